"""Random rigs against SciPy's root finders from many starts, on conditions written apart.

No pose outside our set, and in our set nothing that SciPy doesn't accept as a root. SciPy alone
doesn't find everything from so few starts; that it finds most shows that the test can fail.
"""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np
import pytest
import random_rigs
from quadratics import conditions, roots
from random_rigs import Case, random_case

import rigpose as rp


def compared(case: Case, starts: int, seed: int) -> tuple[int, int]:
    """Numbers of our branches and of SciPy's roots, after comparing them one by one."""
    found = rp.find_branches(case.rig, case.drives, case.wishes)
    ours = found.positions[:, 0]
    c = conditions(case.rig, case.drives, case.targets)
    assert found.found.whole
    for pose in ours:
        x = pose.ravel()[c.free]
        assert np.abs(c.residual(x)).max(initial=0.0) < 1e-12
        assert c.allowed(x)
        assert np.abs(c.pose(x) - pose).max() < 1e-12 * c.size
    assert np.abs(ours - case.drawn).max(axis=(1, 2)).min(initial=9.0) < 1e-7 * c.size
    for a in range(len(ours)):
        apart = np.abs(ours[a + 1:] - ours[a]).max(axis=(1, 2))
        assert apart.min(initial=9.0) > 1e-8 * c.size, "a branch is there twice"
    verdict = rp.judge(case.rig, ours, found.size)
    assert verdict.worst()[0] < 1e-12
    assert verdict.passed()[0] < 1e-9
    first = np.random.default_rng(seed).uniform(-3, 3, (starts, len(c.free)))
    theirs = [p for p in roots(c, first)
              if rp.judge(case.rig, p[None], found.size).passed()[0] < 1e-9]
    for pose in theirs:
        assert np.abs(ours - pose).max(axis=(1, 2)).min(initial=9.0) < 1e-6 * c.size, pose
    return len(ours), len(theirs)


def all_compared(kinds: str, seeds: Sequence[int], steps: int, starts: int,
                 share: float) -> None:
    total = np.zeros(2)
    for seed in seeds:
        total += compared(random_case(seed, steps, getattr(random_rigs, kinds)), starts, seed)
    assert total[1] > share * total[0]


@pytest.mark.parametrize("first", range(0, 40, 10))
def test_rigs_placed_joint_by_joint(first: int) -> None:
    seeds = [s for s in range(first, first + 10) if s != 12]
    all_compared("ONE_BY_ONE", seeds, steps=3, starts=60, share=0.8)


@pytest.mark.parametrize("first", range(0, 20, 10))
def test_longer_rigs_with_limits_and_surplus_bones(first: int) -> None:
    seeds = [s for s in range(first, first + 10) if s != 7]
    all_compared("PRUNED", seeds, steps=5, starts=60, share=0.5)


@pytest.mark.parametrize("first", range(0, 12, 4))
def test_rigs_with_a_block(first: int) -> None:
    """A platform, a triangle that may turn over, a trammel: solved together, by Newton."""
    all_compared("BLOCKS", range(first, first + 4), steps=1, starts=150, share=0.9)


def test_rigs_of_every_kind() -> None:
    all_compared("EVERY", range(100, 106), steps=3, starts=100, share=0.5)


@pytest.mark.parametrize(("kinds", "seed", "steps"), [
    ("ONE_BY_ONE", 12, 3), ("PRUNED", 7, 5), ("PRUNED", 209, 5), ("PRUNED", 266, 5),
    ("PRUNED", 1070, 5), ("EVERY", 1014, 4),
    ("EVERY", 2014, 4)])
def test_rigs_that_went_wrong_once(kinds: str, seed: int, steps: int) -> None:
    """A floating body's frame was trusted where the ground places three of its joints."""
    compared(random_case(seed, steps, getattr(random_rigs, kinds)), 40, seed)


@pytest.mark.slow
@pytest.mark.parametrize(("kinds", "steps", "starts", "count"), [
    ("ONE_BY_ONE", 3, 200, 300), ("PRUNED", 5, 300, 300), ("BLOCKS", 1, 400, 100),
    ("EVERY", 4, 400, 100)])
def test_hundreds_of_rigs(kinds: str, steps: int, starts: int, count: int) -> None:
    wrong = []
    for seed in range(1000, 1000 + count):
        try:
            compared(random_case(seed, steps, getattr(random_rigs, kinds)), starts, seed)
        except (AssertionError, rp.BadInput) as error:
            wrong.append(f"{seed}: {type(error).__name__} {str(error)[:200]}")
    assert wrong == []
