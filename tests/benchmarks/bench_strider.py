"""The walking machine over 10,000 frames, one row, against SciPy on all its lengths."""

from __future__ import annotations

from dataclasses import replace

from machine import RIGS, Lengths, timed
from scipy.optimize import fsolve, least_squares

import rigpose as rp

FRAMES, SOLVED = 10_000, 100


def long_shot() -> rp.Shot:
    """Ten turns of the shaft."""
    shot = rp.load_shot(RIGS / "quay_strider.shot.toml")
    first = shot.keys[0]
    turned = {name: value + 3600.0 for name, value in first.drive.items()}
    return replace(shot, frames=(1.0, float(FRAMES)), step=1.0, keys=(
        rp.Key(1.0, dict(first.drive), ease="linear"), rp.Key(float(FRAMES), turned)))


def main() -> None:
    shot = long_shot()
    motion = rp.bake(shot)
    assert motion.ok
    ours = timed(lambda: rp.bake(shot), 5) / FRAMES
    rig, poses = shot.rig, motion.positions
    driven = {j for c in rig.cranks for j in c.line}
    known = [j.name for j in rig.joints if j.pin or j.name in driven]
    system = Lengths(rig, known)

    def by_least_squares() -> None:
        x = system.set(poses[0])
        for pose in poses[1:SOLVED + 1]:
            system.set(pose)
            x = least_squares(system.residual, x, system.jacobian, xtol=1e-12, ftol=1e-12,
                              gtol=1e-12).x

    slow = timed(by_least_squares, 2) / SOLVED
    system.square(system.set(poses[0]))

    def by_root_finder() -> None:
        x = system.set(poses[0])
        for pose in poses[1:SOLVED + 1]:
            system.set(pose)
            x = fsolve(system.residual, x, fprime=system.jacobian)

    root = timed(by_root_finder, 2) / SOLVED
    print(f"walking machine, {len(rig.joints)} joints, {FRAMES:,} frames, one row with checks: "
          f"{ours * 1e6:.1f} µs a frame; worst length {motion.worst:.1e} of the size")
    print(f"least_squares on all lengths {slow * 1e6:,.0f} µs: {slow / ours:,.0f} times faster; "
          f"fsolve with Jacobian {root * 1e6:,.0f} µs: {root / ours:,.0f} times faster")


if __name__ == "__main__":
    main()
