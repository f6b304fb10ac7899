"""What holds for every rig in space, whatever it is: the files in rigs/ and random ones.

The same rig written differently has the same poses and the same bends; a pose has the same bends
however it was found; what is given is never changed.
"""

from __future__ import annotations

import pickle
from collections.abc import Iterator, Mapping
from functools import cache
from itertools import product
from pathlib import Path

import numpy as np
import pytest
import random_space
from changed import Change, renamed, shuffled
from random_space import random_space_case
from samples import MOST, Sample
from scipy.spatial import cKDTree

import rigpose as rp
from rigpose.model.bends import bends_of, measure_bends
from rigpose.model.equations import Array
from rigpose.motion.gauges import read_value

RIGS = Path(__file__).parent.parent / "rigs"
SHOTS = sorted(p.name.removesuffix(".shot.toml") for p in RIGS.glob("*.shot.toml")
               if rp.load_shot(p).rig.dim == 3)
LARGE = ("letter_sorter", "market_canopy", "folding_gangway")
QUICK = [pytest.param(n, marks=[pytest.mark.slow] if n in LARGE else []) for n in SHOTS]
SEEDS = [*(f"ONE_BY_ONE {k}" for k in range(300, 305)), "PRUNED 310", "HINGED 320", "BLOCKS 330"]


@cache
def sample(name: str) -> Sample:
    if " " in name:
        kinds, seed = name.split()
        steps = 1 if kinds == "BLOCKS" else 3
        case = random_space_case(int(seed), steps, getattr(random_space, kinds))
        targets = {j: np.array([np.nan if x is None else x for x in place])
                   for j, place in case.targets.items()}
        return Sample(case.rig, {k: np.array(v) for k, v in case.drives.items()}, targets)
    shot = rp.load_shot(RIGS / f"{name}.shot.toml")
    first = rp.channels(shot, shot.numbers[:1])
    return Sample(shot.rig, first.drives, {j: place[0] for j, place in first.targets.items()})


def same_set(ours: Array, theirs: Array, room: float) -> None:
    """Poses ``(n, n_joints, 3)`` that are the same but for their order."""
    assert len(ours) == len(theirs)
    if len(ours):
        for some, others in ((ours, theirs), (theirs, ours)):
            tree = cKDTree(others.reshape(len(others), -1))
            apart, _ = tree.query(some.reshape(len(some), -1), p=np.inf)
            assert np.max(apart) < room


def words(rig: rp.Rig, signs: Array) -> dict[str, str]:
    """Bends by joint of one pose's signs."""
    return {rig.joint_names[b.joint]: b.word(v)
            for b, v in zip(bends_of(rig), signs, strict=True)}


@pytest.mark.parametrize("name", [*SHOTS, *SEEDS])
def test_all_that_was_asked_for_holds(name: str) -> None:
    s = sample(name)
    assert len(s.found) > 0
    verdict = rp.judge(s.rig, s.found.positions, s.found.size)
    assert verdict.worst(s.found.redundant)[0] < 1e-12
    assert verdict.worst()[0] < s.rig.slack
    assert verdict.passed()[0] < 1e-6
    for joint, wish in s.targets.items():
        off = s.poses[:, s.rig.index[joint]] - wish
        room = 1e-12 * s.found.size + 4 * np.spacing(np.nanmax(np.abs(wish)))
        assert np.nanmax(np.abs(off)) < room
    motion = s.found.pick(0).motion()
    cranks = {c.name for c in s.rig.cranks}
    for drive, value in s.drives.items():
        # Read off the places, not handed through.
        apart = read_value(s.rig, motion.positions, drive)[0] - float(np.ravel(value)[0])
        if drive in cranks:
            apart = np.remainder(apart + 180.0, 360.0) - 180.0
        assert abs(apart) < 1e-9


@pytest.mark.parametrize("name", [*QUICK, *SEEDS])
def test_names_of_joints_mean_nothing(name: str) -> None:
    s = sample(name)
    # Names that sort the other way round.
    way = {j: f"{len(s.rig.joints) - k:03d}_{j}" for k, j in enumerate(s.rig.joint_names)}
    other = rp.find_branches(renamed(s.rig, way), s.drives,
                             {way[j]: t for j, t in s.targets.items()}, budget=MOST)
    assert np.array_equal(other.positions, s.found.positions, equal_nan=True)
    assert np.array_equal(other.signs, s.found.signs)


@pytest.mark.parametrize("name", [*QUICK, *SEEDS])
def test_the_order_of_parts_means_nothing(name: str) -> None:
    s = sample(name)
    mixed = shuffled(s.rig, 1)
    other = rp.find_branches(mixed, s.drives, s.targets, budget=MOST)
    order = [mixed.index[j] for j in s.rig.joint_names]
    assert other.count == s.found.count
    if other.found is not rp.Found.BUDGET:
        same_set(s.poses, other.positions[:, 0][:, order], s.room)


CHANGES = {
    "scaled": Change(scale=1000.0),
    "turned": Change(turn=37.0, axis=(1.0, -2.0, 0.5)),
    "axes changed about": Change(turn=120.0, axis=(1.0, 1.0, 1.0)),
    "mirrored": Change(mirror=True),
    "all at once": Change(scale=20.0, turn=-110.0, axis=(0.3, 0.0, 1.0), shift=(3.0, 4.0, -5.0),
                          mirror=True)}


def moved_along(s: Sample, change: Change) -> rp.Branches:
    """Branches of a changed rig at changed drives and targets; skips where a plane would slant."""
    wishes = {j: change.wish(t) for j, t in s.targets.items()}
    if any(w is None for w in wishes.values()):
        pytest.skip("a wish for one coordinate would become one for a slanted plane")
    given = {j: w for j, w in wishes.items() if w is not None}
    return rp.find_branches(change.rig(s.rig), change.drives(s.rig, s.drives), given, budget=MOST)


def cases() -> Iterator[object]:
    """Every rig in every way; of the files only the ways that hold others by default."""
    for name, how in product([*SHOTS, *SEEDS], CHANGES):
        marks = []
        if name in LARGE or (name in SHOTS and how in ("scaled", "mirrored")):
            marks.append(pytest.mark.slow)
        yield pytest.param(name, how, marks=marks)


@pytest.mark.parametrize(("name", "how"), list(cases()))
def test_the_same_rig_elsewhere_has_the_same_branches(name: str, how: str) -> None:
    s, change = sample(name), CHANGES[how]
    other = moved_along(s, change)
    assert (other.count, other.found) == (s.found.count, s.found.found)
    verdict = rp.judge(other.rig, other.positions, other.size)
    assert verdict.worst(other.redundant, beyond_floats=True)[0] < 1e-12
    if other.found is rp.Found.BUDGET:
        return
    want = change.places(s.poses)
    same_set(want, other.positions[:, 0], s.room * change.scale)
    # Each pose has the bends of the one that it comes from.
    for mine, theirs in zip(s.found.signs, measure_bends(other.rig, want), strict=True):
        told = {j: w for j, w in change.bends(words(s.rig, mine)).items() if w != "straight"}
        seen = words(other.rig, theirs)
        assert {j: seen[j] for j in told} == told


@pytest.mark.parametrize("name", [*QUICK, *SEEDS])
def test_a_million_sizes_away(name: str) -> None:
    s = sample(name)
    far = 1e6 * s.found.size
    change = Change(shift=(far, -far, far / 2))
    other = moved_along(s, change)
    assert (other.count, other.found) == (s.found.count, s.found.found)
    verdict = rp.judge(other.rig, other.positions, other.size)
    assert verdict.worst(other.redundant, beyond_floats=True)[0] < 1e-12
    # Pins and rails are rounded to what floats hold there, which moves the poses a little.
    margin = float(s.found.margin.min(initial=1.0))
    room = 16 * np.spacing(far) / margin if margin > 1e-4 else 1e-3 * s.found.size
    if other.found is not rp.Found.BUDGET:
        same_set(change.places(s.poses), other.positions[:, 0], room)


@pytest.mark.parametrize("name", [*QUICK, *SEEDS])
def test_what_is_given_stays_and_what_comes_back_is_sealed(name: str) -> None:
    s = sample(name)
    drives = {k: np.array(v, dtype=float) for k, v in s.drives.items()}
    targets = {k: np.array(v, dtype=float) for k, v in s.targets.items()}
    before = pickle.dumps((drives, targets)), s.rig.fingerprint
    found = rp.find_branches(s.rig, drives, targets, budget=MOST)
    assert (pickle.dumps((drives, targets)), s.rig.fingerprint) == before
    motion = found.pick(0).motion()
    for array in (found.positions, found.state, found.margin, motion.positions, motion.margin,
                  rp.find_rest(s.rig).positions):
        assert not array.flags.writeable
    again = pickle.loads(pickle.dumps(found))
    assert np.array_equal(again.positions, found.positions, equal_nan=True)
    assert pickle.loads(pickle.dumps(s.rig)) == s.rig


@pytest.mark.parametrize("name", [*QUICK, *SEEDS])
def test_one_pose_reached_by_two_plans_has_the_same_bends(name: str) -> None:
    """A gauge's value, or a joint's whole place, is given in place of one drive or target."""
    s = sample(name)
    for k in range(min(len(s.found), 2)):
        if not s.found.margin[k, 0] > 1e-3:
            continue
        motion = s.found.pick(k).motion()
        for old in list(s.drives)[:2]:
            kept = {d: v for d, v in s.drives.items() if d != old}
            gauges = [g for g in s.rig.drive_names if g not in s.drives][:2]
            others = [({**kept, g: motion.value(g)}, s.targets) for g in gauges]
            others += [(kept, {**s.targets, j.name: s.poses[k, i]})
                       for i, j in enumerate(s.rig.joints)
                       if not j.pin and j.name not in s.targets][:2]
            for drives, targets in others:
                _same_bends(s, k, drives, targets)


def _same_bends(s: Sample, k: int, drives: Mapping[str, Array],
                targets: Mapping[str, Array]) -> None:
    try:
        found = rp.find_branches(s.rig, drives, targets, budget=MOST)
    except rp.BadInput:
        return  # something still moves, or the value lies a rounding outside its range
    if not found.found.whole:
        return
    apart = np.abs(found.positions[:, 0] - s.poses[k]).max(axis=(1, 2))
    assert apart.min(initial=9.0) < 1e-6 * s.found.size
    mine = int(np.argmin(apart))
    clear = (found.signs[mine] != 0) & (s.found.signs[k] != 0)
    assert np.array_equal(found.signs[mine][clear], s.found.signs[k][clear])
