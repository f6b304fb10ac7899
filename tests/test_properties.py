"""Properties of any rig: a pose is drawn first, its lengths measured, and found again.

Rigs on a small grid are full of special places: bars in line, touching circles, joints on top of
one another. There too every answer is right or says what it leaves out.
"""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from linkages import four_bar
from quadratics import conditions
from random_rigs import EVERY, ONE_BY_ONE, PRUNED, Case, lattice_case, random_case

import rigpose as rp
from rigpose.model.equations import Array

SEEDS = st.integers(0, 10**6)
settings.register_profile("steady", derandomize=True, deadline=None, database=None)
settings.load_profile("steady")


def right(found: rp.Branches) -> None:
    """Lengths hold, and a cell has a pose exactly where it says so."""
    assert rp.judge(found.rig, found.positions, found.size).worst(found.redundant)[0] < 1e-12
    alive = found.state == rp.State.MET
    assert np.array_equal(alive, np.isfinite(found.positions).all(axis=(2, 3)))
    assert np.array_equal(alive, np.isfinite(found.margin))
    assert (found.margin[alive] >= 0).all()
    assert (found.margin[alive] <= 1).all()


def drawn_again(case: Case) -> None:
    found = rp.find_branches(case.rig, case.drives, case.wishes)
    right(found)
    c = conditions(case.rig, case.drives, case.targets)
    for pose in found.positions[:, 0]:
        assert np.abs(c.residual(pose.ravel()[c.free])).max(initial=0.0) < 1e-11
    away = np.abs(found.positions[:, 0] - case.drawn).max(axis=(1, 2)).min(initial=9.0)
    told = any("turns freely" in note for note in found.notes)
    assert away < 1e-6 or told


# -- poses ----------------------------------------------------------------------------------------

@settings(max_examples=40)
@given(seed=SEEDS, steps=st.integers(1, 7))
def test_a_drawn_pose_is_found_again(seed: int, steps: int) -> None:
    drawn_again(random_case(seed, steps, PRUNED))


@settings(max_examples=12)
@given(seed=SEEDS, steps=st.integers(1, 3))
def test_a_drawn_pose_with_blocks_is_found_again(seed: int, steps: int) -> None:
    drawn_again(random_case(seed, steps, EVERY))


@settings(max_examples=100)
@given(seed=SEEDS, steps=st.integers(1, 5))
def test_a_pose_drawn_on_a_grid_is_found_again(seed: int, steps: int) -> None:
    case = lattice_case(seed, steps)
    try:
        drawn_again(case)
    except rp.BadInput as refused:
        # Two legs of a joint on one line through both feet at rest, in any pose: it may turn.
        assert "still move" in str(refused)


@settings(max_examples=40)
@given(st.tuples(*[st.floats(-3, 3)] * 4), st.floats(-360, 360))
def test_four_bars_of_very_unequal_lengths(powers: tuple[float, ...], turn: float) -> None:
    """From a thousandth to a thousand: lengths hold to 1e-12 of the size, whichever is small."""
    d, a, b, c = (10.0**p for p in powers)
    kite = min(abs(d - a) + abs(b - c), abs(d - c) + abs(a - b)) < 1e-6 * d
    if 2 * max(d, a, b, c) >= 0.999 * (d + a + b + c) or kite:
        return  # it doesn't close, or two of its joints may lie on each other: see below
    found = rp.find_branches(four_bar(d, a, b, c), {"input": turn})
    right(found)
    q = np.sqrt(a * a + d * d - 2 * a * d * np.cos(np.radians(turn)))
    room = 1e-9 * max(a, d)
    if abs(b - c) + room < q < b + c - room:
        assert len(found) == 2
    elif not abs(b - c) - room < q < b + c + room:
        assert len(found) == 0


@pytest.mark.parametrize("bars", [
    (1, 1, 1, 1), (1, 1, 2, 2), (2, 1, 2, 1), (1, 2, 1, 2), (3, 1, 1, 3)])
def test_four_bars_that_can_fold_are_posed_by_their_lengths_alone(bars: tuple[float, ...]) -> None:
    found = rp.find_branches(four_bar(*bars), {"input": 30.0})
    right(found)
    assert len(found) == 2


@settings(max_examples=40)
@given(seed=SEEDS, steps=st.integers(1, 5))
def test_the_judge_sees_a_joint_out_of_place(seed: int, steps: int) -> None:
    """Every joint that isn't the crank's own is held by lengths that change when it is moved."""
    case = random_case(seed, steps, PRUNED)
    size = rp.find_rest(case.rig).size
    assert rp.judge(case.rig, case.drawn[None], size).worst()[0] < 1e-12
    rng = np.random.default_rng(seed)
    tied = {j for b in case.rig.bones for j in b.ends} | {j for p in case.rig.plates
                                                          for j in p.joints}
    for k, joint in enumerate(case.rig.joints):
        if joint.pin or joint.name not in tied:
            continue
        # Both ways along two axes: a single one might follow a circle.
        worst = 0.0
        for move in rng.normal(size=(3, 2)):
            pose = case.drawn.copy()
            pose[k] += 1e-3 * size * move / np.linalg.norm(move)
            worst = max(worst, rp.judge(case.rig, pose[None], size).worst()[0])
        assert worst > 1e-5


# -- rows -----------------------------------------------------------------------------------------

def swept(case: Case, seed: int, count: int, back: bool = False) -> rp.Branches:
    """Drives that go a long way at an even pace."""
    rng = np.random.default_rng(seed)
    cranks = {c.name for c in case.rig.cranks}
    t = np.linspace(0, 1, count)[::-1 if back else 1]
    drives = {}
    for name, value in case.drives.items():
        way = rng.uniform(60, 400) if name in cranks else rng.uniform(0.1, 1)
        drives[name] = value + way * (rng.choice([-1, 1]) if name in cranks else 1) * t
    return rp.find_branches(case.rig, drives, case.wishes)


def row_among(row: Array, rows: Array) -> bool:
    """Whether a motion ``(n_frames, n_joints, 2)`` is one of ``rows``."""
    with np.errstate(invalid="ignore"):
        apart = np.abs(rows - row).max(axis=(2, 3))
    return bool((np.nan_to_num(apart, nan=9.0) < 1e-5).all(axis=1).any())


def whole_rows(found: rp.Branches) -> list[int]:
    """Rows that live in every frame and don't open between two."""
    gaps = [any(e.kind == "gap" for e in row) for row in found.events] or [False] * len(found)
    return [k for k in range(len(found))
            if not gaps[k] and (found.state[k] == rp.State.MET).all()]


def rows_agree(case: Case, seed: int) -> None:
    """The same motion is found from fewer frames, from more, and from back to front."""
    coarse, fine = swept(case, seed, 61), swept(case, seed, 181)
    back = swept(case, seed, 181, back=True)
    for found in (coarse, fine, back):
        right(found)
    for k in whole_rows(coarse):
        assert row_among(coarse.positions[k], fine.positions[:, ::3])
    for k in whole_rows(fine):
        assert row_among(fine.positions[k], back.positions[:, ::-1])


@settings(max_examples=12)
@given(seed=SEEDS, steps=st.integers(1, 3))
def test_rows_do_not_depend_on_how_they_are_sampled(seed: int, steps: int) -> None:
    rows_agree(random_case(seed, steps, ONE_BY_ONE), seed)


@settings(max_examples=40)
@given(seed=SEEDS, steps=st.integers(1, 4))
def test_rows_through_dead_centres_do_not_depend_on_how_they_are_sampled(
    seed: int, steps: int) -> None:
    case = lattice_case(seed, steps)
    try:
        rows_agree(case, seed)
    except rp.BadInput as refused:
        assert "still move" in str(refused)


@settings(max_examples=15)
@given(seed=SEEDS, steps=st.integers(1, 4))
def test_a_sweep_has_the_poses_of_its_frames(seed: int, steps: int) -> None:
    case = random_case(seed, steps, PRUNED)
    found = swept(case, seed, 8)
    for frame in range(8):
        drives = {n: v[frame] for n, v in found.knowns.drives.items()}
        one = rp.find_branches(case.rig, drives, case.wishes)
        alive = found.state[:, frame] == rp.State.MET
        assert alive.sum() == len(one)
        if len(one):
            apart = np.abs(found.positions[alive, frame][:, None]
                           - one.positions[:, 0]).max(axis=(2, 3))
            assert apart.min(axis=1).max() < 1e-6 * found.size
            assert apart.min(axis=0).max() < 1e-6 * found.size


@pytest.mark.slow
@pytest.mark.parametrize("kind", ["random", "grid"])
def test_hundreds_of_sweeps(kind: str) -> None:
    wrong = []
    for seed in range(400):
        case = (random_case(seed, 1 + seed % 4, ONE_BY_ONE) if kind == "random"
                else lattice_case(seed, 1 + seed % 4))
        try:
            rows_agree(case, seed)
        except rp.BadInput as refused:
            if "still move" not in str(refused) and "range" not in str(refused):
                wrong.append(f"{seed}: {refused}")
        except AssertionError as error:
            wrong.append(f"{seed}: {str(error)[:200]}")
    assert wrong == []
