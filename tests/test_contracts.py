"""What holds for every rig, whatever it is: the files in rigs/ and random ones.

The same rig written differently has the same poses; what is given is never changed and what is
given back can't be; a pose has the same bends however it was found.
"""

from __future__ import annotations

import pickle
from collections.abc import Mapping
from functools import cache
from pathlib import Path
from typing import Any

import numpy as np
import pytest
from changed import Change, renamed, shuffled
from numpy.typing import NDArray
from random_rigs import ONE_BY_ONE, random_case
from samples import MOST, Sample
from scipy.spatial import cKDTree

import rigpose as rp
from rigpose.model.bends import bends_of, measure_bends
from rigpose.model.equations import Array
from rigpose.motion.gauges import read_value

RIGS = Path(__file__).parent.parent / "rigs"
SHOTS = sorted(p.name.removesuffix(".shot.toml") for p in RIGS.glob("*.shot.toml")
               if rp.load_shot(p).rig.dim == 2)
"""Shots in the plane: those in space have contracts of their own."""
SEEDS = [f"random {k}" for k in range(300, 306)]


@cache
def sample(name: str) -> Sample:
    if name.startswith("random"):
        case = random_case(int(name.split()[1]), 3, ONE_BY_ONE)
        targets = {j: np.array([np.nan if x is None else x for x in place])
                   for j, place in case.targets.items()}
        return Sample(case.rig, {k: np.array(v) for k, v in case.drives.items()}, targets)
    shot = rp.load_shot(RIGS / f"{name}.shot.toml")
    first = rp.channels(shot, shot.numbers[:1])
    return Sample(shot.rig, first.drives, first.targets)


def same_set(ours: Array, theirs: Array, room: float) -> None:
    """Poses ``(n, n_joints, 2)`` that are the same but for their order."""
    assert len(ours) == len(theirs)
    if len(ours):
        for some, others in ((ours, theirs), (theirs, ours)):
            tree = cKDTree(others.reshape(len(others), -1))
            apart, _ = tree.query(some.reshape(len(some), -1), p=np.inf)
            assert np.max(apart) < room


@pytest.mark.parametrize("name", [*SHOTS, *SEEDS])
def test_every_branch_is_judged_right(name: str) -> None:
    s = sample(name)
    assert len(s.found) > 0
    verdict = rp.judge(s.rig, s.poses, s.found.size)
    assert verdict.worst(s.found.redundant, beyond_floats=True)[0] < 1e-12
    assert verdict.worst()[0] < s.rig.slack
    assert verdict.passed()[0] < 1e-6
    for joint, wish in s.targets.items():
        off = s.poses[:, s.rig.index[joint]] - wish
        assert np.nanmax(np.abs(off)) < 1e-12 * s.found.size + 4 * np.spacing(np.nanmax(wish))
    motion = s.found.pick(0).motion()
    for drive, value in s.drives.items():
        # Read off the places, not handed through.
        read = read_value(s.rig, motion.positions, drive)[0]
        apart = read - float(np.ravel(value)[0])
        if drive in {c.name for c in s.rig.cranks}:
            apart = np.remainder(apart + 180.0, 360.0) - 180.0
        assert abs(apart) < 1e-9


@pytest.mark.parametrize("name", [*SHOTS, *SEEDS])
def test_names_of_joints_mean_nothing(name: str) -> None:
    s = sample(name)
    # Names that sort the other way round.
    way = {j: f"{len(s.rig.joints) - k:03d}_{j}" for k, j in enumerate(s.rig.joint_names)}
    other = rp.find_branches(renamed(s.rig, way), s.drives,
                             {way[j]: t for j, t in s.targets.items()}, budget=MOST)
    assert np.array_equal(other.positions, s.found.positions, equal_nan=True)
    assert np.array_equal(other.signs, s.found.signs)
    assert [n.replace(":", "/") for n in other.names] == [
        " ".join(w if w.startswith(("#", "=")) or w == "only" else
                 f"{way[w.rsplit(':', 1)[0]]}/{w.rsplit(':', 1)[1]}" for w in n.split(" "))
        for n in s.found.names]


@pytest.mark.parametrize("name", [*SHOTS, *SEEDS])
def test_the_order_of_parts_means_nothing(name: str) -> None:
    s = sample(name)
    for seed in range(2):
        mixed = shuffled(s.rig, seed)
        other = rp.find_branches(mixed, s.drives, s.targets, budget=MOST)
        order = [mixed.index[j] for j in s.rig.joint_names]
        assert other.count == s.found.count
        assert other.found == s.found.found
        if other.found is not rp.Found.BUDGET:
            same_set(s.poses, other.positions[:, 0][:, order], s.room)


CHANGES = {
    "scaled": Change(scale=1000.0), "turned": Change(turn=37.0), "mirrored": Change(mirror=True),
    "all at once": Change(scale=20.0, turn=-110.0, shift=(3.0, 4.0), mirror=True)}


def changed_wishes(change: Change, targets: Mapping[str, Array]) -> dict[str, Array] | None:
    """Targets moved along, None where a single coordinate would turn into a slanted line."""
    out = {}
    for joint, wish in targets.items():
        flat = np.reshape(wish, (-1, 2))[0]
        if np.isnan(flat).any() and change.turn:
            return None
        out[joint] = np.where(np.isnan(flat), np.nan, change.places(np.nan_to_num(flat)))
    return out


@pytest.mark.parametrize("how", CHANGES)
@pytest.mark.parametrize("name", [*SHOTS, *SEEDS])
def test_the_same_rig_elsewhere_has_the_same_branches(name: str, how: str) -> None:
    s, change = sample(name), CHANGES[how]
    wishes = changed_wishes(change, s.targets)
    if wishes is None or (s.rig.ties and (change.mirror or change.turn)):
        pytest.skip("a line would slant, or ties would count from another zero")
    rig = change.rig(s.rig)
    other = rp.find_branches(rig, change.drives(s.rig, s.drives), wishes, budget=MOST)
    assert (other.count, other.found) == (s.found.count, s.found.found)
    if other.found is rp.Found.BUDGET:
        return
    want = change.places(s.poses)
    same_set(want, other.positions[:, 0], s.room * change.scale)
    # Each pose has the bends of the one that it comes from.
    signs = measure_bends(rig, want)
    bends = bends_of(s.rig)
    for k in range(len(want)):
        mine = {s.rig.joint_names[b.joint]: b.word(v)
                for b, v in zip(bends, s.found.signs[k], strict=True)}
        theirs = {s.rig.joint_names[b.joint]: b.word(v)
                  for b, v in zip(bends, signs[k], strict=True)}
        told = {j: w for j, w in change.bends(mine).items() if w != "straight"}
        assert {j: theirs[j] for j in told} == told


@pytest.mark.parametrize("name", [*SHOTS, *SEEDS])
def test_a_million_sizes_away(name: str) -> None:
    s = sample(name)
    far = 1e6 * s.found.size
    change = Change(shift=(far, -far))
    wishes = changed_wishes(change, s.targets)
    assert wishes is not None
    other = rp.find_branches(change.rig(s.rig), change.drives(s.rig, s.drives), wishes, budget=MOST)
    assert (other.count, other.found) == (s.found.count, s.found.found)
    verdict = rp.judge(other.rig, other.positions, other.size)
    assert verdict.worst(other.redundant, beyond_floats=True)[0] < 1e-12
    # Pins and rails are rounded to what floats hold there, which moves the poses a little.
    margin = float(s.found.margin.min(initial=1.0))
    room = 16 * np.spacing(far) / margin if margin > 1e-4 else 1e-3 * s.found.size
    if other.found is not rp.Found.BUDGET:
        same_set(change.places(s.poses), other.positions[:, 0], room)


@pytest.mark.parametrize("name", [*SHOTS, *SEEDS])
def test_what_is_given_stays_and_what_comes_back_is_sealed(name: str) -> None:
    s = sample(name)
    drives = {k: np.array(v, dtype=float) for k, v in s.drives.items()}
    targets = {k: np.array(v, dtype=float) for k, v in s.targets.items()}
    before = pickle.dumps((drives, targets)), s.rig.fingerprint
    found = rp.find_branches(s.rig, drives, targets, budget=MOST)
    assert (pickle.dumps((drives, targets)), s.rig.fingerprint) == before
    motion = found.pick(0).motion()
    rest = rp.find_rest(s.rig)
    arrays: list[NDArray[Any]] = [
        found.positions, found.state, found.margin, motion.positions, motion.state, motion.margin,
        rest.positions, *found.knowns.drives.values(), *found.knowns.targets.values()]
    for array in arrays:
        assert not array.flags.writeable
        with pytest.raises(ValueError, match="read-only"):
            array[...] = 0
    assert all(a.flags.writeable for a in (*drives.values(), *targets.values()))


@pytest.mark.parametrize("name", [*SHOTS, *SEEDS[:4]])
def test_values_can_be_pickled(name: str) -> None:
    s = sample(name)
    found = s.found.take(range(min(len(s.found), 3)))
    motion = found.pick(0).motion()
    again = pickle.loads(pickle.dumps(found))
    assert np.array_equal(again.positions, found.positions, equal_nan=True)
    assert list(again.names) == list(found.names)
    assert np.array_equal(pickle.loads(pickle.dumps(motion)).positions, motion.positions)
    assert pickle.loads(pickle.dumps(s.rig)) == s.rig
    assert pickle.loads(pickle.dumps(s.rig)).fingerprint == s.rig.fingerprint
    assert np.array_equal(pickle.loads(pickle.dumps(rp.find_rest(s.rig))).positions,
                          rp.find_rest(s.rig).positions)
    count = rp.count_branches(s.rig, s.drives, s.targets)
    assert pickle.loads(pickle.dumps(count)) == count


@pytest.mark.parametrize("name", SHOTS[:4])
def test_shots_can_be_pickled(name: str) -> None:
    shot = rp.load_shot(RIGS / f"{name}.shot.toml")
    again = pickle.loads(pickle.dumps(shot))
    assert again == shot
    assert np.array_equal(rp.bake(again).positions, rp.bake(shot).positions, equal_nan=True)


@pytest.mark.parametrize("name", [*SHOTS, *SEEDS])
def test_one_pose_reached_by_two_plans_has_the_same_bends(name: str) -> None:
    """Another crank, ram, rail or joint is given in place of one drive, at its value there."""
    s = sample(name)
    tried = 0
    for k in range(min(len(s.found), 3)):
        pose, motion = s.poses[k], s.found.pick(k).motion()
        if not s.found.margin[k, 0] > 1e-3:
            continue
        for old in s.drives:
            kept = {d: v for d, v in s.drives.items() if d != old}
            gauges = {g: motion.value(g) for g in s.rig.drive_names if g not in s.drives}
            others: list[tuple[dict[str, Array], dict[str, Array]]] = [
                ({**kept, g: v}, dict(s.targets)) for g, v in gauges.items()]
            others += [(kept, {**s.targets, j: pose[i]}) for i, j in enumerate(s.rig.joint_names)
                       if not s.rig.joints[i].pin and j not in s.targets][:3]
            for drives, targets in others:
                tried += _same_bends(s, k, drives, targets)
    # What has no drive, or is at a dead centre, or is driven in one way only, says nothing here.
    assert tried or not s.drives or name in ("quay_engine", "mooring_stage")


def _same_bends(s: Sample, k: int, drives: Mapping[str, Array],
                targets: Mapping[str, Array]) -> int:
    try:
        found = rp.find_branches(s.rig, drives, targets, budget=MOST)
    except rp.BadInput:
        return 0  # something still moves, or the value lies a rounding outside its range
    if not found.found.whole:
        return 0
    apart = np.abs(found.positions[:, 0] - s.poses[k]).max(axis=(1, 2))
    assert apart.min(initial=9.0) < 1e-6 * s.found.size
    mine = int(np.argmin(apart))
    clear = (found.signs[mine] != 0) & (s.found.signs[k] != 0)
    assert np.array_equal(found.signs[mine][clear], s.found.signs[k][clear])
    return 1
