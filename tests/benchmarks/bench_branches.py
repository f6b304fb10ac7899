"""Large sets of branches: 2^18 held against copying them, and 2^24 streamed."""

from __future__ import annotations

import resource
import sys
import time

import numpy as np
from machine import drag_rig, ladder, timed

import rigpose as rp


def held() -> None:
    """With names and margins; the copy is of all its arrays into fresh memory."""
    rig, budget = ladder(20), rp.Budget(poses=1 << 18)

    def work() -> rp.Branches:
        found = rp.find_branches(rig, budget=budget)
        assert found.names[-1] and found.margin.shape == (1 << 18, 1)
        return found

    found = work()
    ours = timed(work, 5)
    copy = timed(lambda: [a.copy(order="K") for a in (found.positions, found.margin, found.state,
                                                      found.signs, found.choice)], 5)
    print(f"2^18 branches of 20 joints: {ours:.3f} s; copying them {copy:.3f} s; "
          f"ratio {ours / copy:.1f}")


def dragged() -> None:
    """One pose after another with the plan kept."""
    rig = drag_rig()
    rp.find_branches(rig, {"turn": 45.0})
    times, most = [], 0
    for k in range(300):
        start = time.perf_counter()
        found = rp.find_branches(rig, {"turn": 45.0 + 0.01 * k})
        times.append(time.perf_counter() - start)
        most = max(most, len(found))
    print(f"one pose of {len(rig.joints)} joints, up to {most} branches: "
          f"{np.median(times) * 1e3:.2f} ms median")


def streamed() -> None:
    """In a process that has held nothing else."""
    start = time.perf_counter()
    total = sum(len(block) for block in rp.stream_branches(ladder(26)))
    taken = time.perf_counter() - start
    most = resource.getrusage(resource.RUSAGE_SELF).ru_maxrss / 2**20
    print(f"2^24 branches of 26 joints streamed: {total:,} in {taken:.1f} s, "
          f"at most {most:.2f} GiB")


if __name__ == "__main__":
    if "stream" in sys.argv:
        streamed()
    else:
        dragged()
        held()
