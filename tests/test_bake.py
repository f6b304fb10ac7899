"""Baking shots: which row is taken, what happens on it, and what is said where it can't go on."""

from __future__ import annotations

import math
from collections.abc import Mapping, Sequence
from fractions import Fraction
from typing import Any

import numpy as np
import pytest
from linkages import four_bar, slider_crank
from random_rigs import BLOCKS, ONE_BY_ONE, random_case

import rigpose as rp
from rigpose.model.equations import Array
from rigpose.motion.bake import Baking
from rigpose.motion.settle import WINDOW, pieces
from rigpose.motion.shot import Ease

PIN = {"pin": True}
CRANK_ROCKER = (100.0, 40.0, 120.0, 80.0)
STIFF = (150.0, 80.0, 110.0, 70.0)
LIMIT = math.degrees(math.acos((150**2 + 80**2 - 180**2) / (2 * 150 * 80)))

Values = Sequence[tuple[float, float]]


def shot(rig: rp.Rig, drives: Mapping[str, Values], frames: tuple[float, float],
         ease: Ease = "linear", **more: Any) -> rp.Shot:
    """A key for every frame and value of every drive, all with one ease."""
    keys: dict[float, dict[str, float]] = {}
    for name, values in drives.items():
        for frame, value in values:
            keys.setdefault(frame, {})[name] = value
    return rp.Shot("shot", rig, Fraction(24), frames, keys=tuple(
        rp.Key(f, keys[f], ease=ease) for f in sorted(keys)), **more)


def turning(rig: rp.Rig, first: float, last: float, frames: int, **more: Any) -> rp.Shot:
    """The input from one angle to another at an even pace, from frame 1 on."""
    return shot(rig, {"input": [(1, first), (frames, last)]}, (1, frames), **more)


# -- which row ------------------------------------------------------------------------------------

def test_the_row_nearest_to_rest_is_taken() -> None:
    rig = rp.make_rig(
        {"left": {"at": [0, 0], **PIN}, "right": {"at": [100, 0], **PIN},
         "tip": [40, 0], "knee": [60, -60]},
        {"crank": {"ends": ["left", "tip"], "length": 40},
         "coupler": {"ends": ["tip", "knee"], "length": 120},
         "follower": {"ends": ["right", "knee"], "length": 80}},
        cranks={"input": {"turns": "crank", "about": "left"}})
    motion = rp.bake(turning(rig, 0, 90, 10))
    assert motion.ok
    assert motion.bends["knee"] == "right"
    assert (motion["knee"][:, 1] < 0).all()


@pytest.mark.parametrize("side", ["left", "right"])
def test_bends_choose_the_row(side: str) -> None:
    motion = rp.bake(turning(four_bar(*CRANK_ROCKER), 0, 720, 49, branch={"knee": side}))
    assert motion.ok
    assert motion.bends["knee"] == side
    assert motion.name == f"knee:{side}"
    rows = rp.find_branches(motion.rig, {"input": np.linspace(0, 720, 49)})
    assert np.array_equal(motion.positions, rows.pick(knee=side).positions[0])


def test_a_name_of_the_rig_chooses_the_row() -> None:
    base = four_bar(*CRANK_ROCKER)
    rig = rp.make_rig({j.name: {"at": j.at, "pin": True} if j.pin else {} for j in base.joints},
                      {b.name: {"ends": b.ends, "length": b.length} for b in base.bones},
                      cranks={"input": {"turns": "crank", "about": "left"}},
                      branches={"lamp side": {"knee": "right"}})
    assert rp.bake(turning(rig, 0, 90, 10, branch="lamp side")).bends["knee"] == "right"


def test_places_choose_where_bends_cannot() -> None:
    rig = four_bar(*CRANK_ROCKER)
    both = rp.find_branches(rig, {"input": 0.0})
    for k in range(2):
        near = {"knee": tuple(both.positions[k, 0, 3] + (3, -2))}
        motion = rp.bake(turning(rig, 0, 90, 10, near=near))
        assert motion.ok
        assert np.abs(motion.positions[0] - both.positions[k, 0]).max() < 1e-9


def test_bends_and_place_that_agree() -> None:
    rig = four_bar(*CRANK_ROCKER)
    one = rp.find_branches(rig, {"input": 0.0}).pick(knee="left")
    motion = rp.bake(turning(rig, 0, 90, 10, branch={"knee": "left"},
                             near={"knee": tuple(one.positions[0, 0, 3])}))
    assert motion.ok


def test_bends_and_place_that_disagree_take_nothing() -> None:
    rig = four_bar(*CRANK_ROCKER)
    other = rp.find_branches(rig, {"input": 0.0}).pick(knee="right")
    motion = rp.bake(turning(rig, 0, 90, 10, branch={"knee": "left"},
                             near={"knee": tuple(other.positions[0, 0, 3])}))
    assert not motion.ok
    assert np.isnan(motion.positions).all()
    (problem,) = motion.problems
    assert "the branch with these bends is the one nearest to the place" in str(problem)
    assert "knee:right is 0 m away" in str(problem)


def test_a_place_between_two_rows_takes_nothing() -> None:
    rig = four_bar(*CRANK_ROCKER)
    motion = rp.bake(turning(rig, 0, 90, 10, near={"tip": (40.0, 0.0)}))
    assert not motion.ok
    (problem,) = motion.problems
    assert "knee:left and knee:right are equally near" in str(problem) or (
        "knee:right and knee:left are equally near" in str(problem))


def test_bends_that_no_branch_has_take_nothing() -> None:
    motion = rp.bake(turning(four_bar(*CRANK_ROCKER), 0, 90, 10, branch={"knee": "straight"}))
    assert not motion.ok
    assert np.isnan(motion.positions).all()
    assert "some branch of the first frame has these bends" in str(motion.problems[0])
    with pytest.raises(rp.Unsolvable, match="some branch of the first frame has these bends"):
        rp.bake(turning(four_bar(*CRANK_ROCKER), 0, 90, 10, branch={"knee": "straight"}),
                strict=True)


@pytest.mark.parametrize("seed", range(8))
def test_a_baked_row_is_a_row_of_the_map(seed: int) -> None:
    """Random rigs, their drives swung a little about the drawn pose."""
    case = random_case(seed + 900, 3, ONE_BY_ONE)
    rng = np.random.default_rng(seed)
    drives = {n: [(1, v), (13, v + rng.uniform(-8, 8) * (1 if n in {c.name for c in case.rig.cranks}
                                                         else .01)), (25, v)]
              for n, v in case.drives.items()}
    keys = tuple(rp.Key(f, {n: s[k][1] for n, s in drives.items()}, case.targets, "smooth")
                 for k, f in enumerate((1, 13, 25)))
    near = {j: tuple(case.drawn[k]) for k, j in enumerate(case.rig.joint_names)}
    one = rp.Shot("shot", case.rig, Fraction(24), (1, 25), near=near, keys=keys)
    motion = rp.bake(one)
    rows = rp.branch_map(one)
    assert np.abs(motion.positions[0] - case.drawn).max() < 1e-7
    apart = np.abs(rows.positions - motion.positions).max(axis=(2, 3))
    same = (apart < 1e-9 * motion.size) | (np.isnan(apart)
                                           & (rows.state == rp.State.NONE)
                                           & (motion.state == rp.State.NONE))
    assert same.all(axis=1).any()
    assert motion.worst < 1e-12
    if motion.ok:
        assert np.abs(motion.positions[-1] - motion.positions[0]).max() < 1e-7 * motion.size


# -- what can't be done ---------------------------------------------------------------------------

def test_spans_tell_each_stretch_that_does_not_assemble() -> None:
    """A crank of a linkage that can't turn fully, driven round twice: two stretches are out."""
    frames = 721
    motion = rp.bake(turning(four_bar(*STIFF), 0, 720, frames, branch={"knee": "left"}))
    turn = np.linspace(0, 720, frames)
    out = np.abs(np.remainder(turn + 180, 360) - 180) > LIMIT
    assert np.array_equal(motion.state == rp.State.NONE, out)
    assert np.array_equal(np.isnan(motion.positions).any(axis=(1, 2)), out)
    assert np.array_equal(np.isnan(motion.margin), out)
    starts = (np.flatnonzero(np.diff(out.astype(int)) == 1) + 2.0).tolist()
    ends = (np.flatnonzero(np.diff(out.astype(int)) == -1) + 1.0).tolist()
    assert np.array_equal([(s.first, s.last) for s in motion.spans], np.stack([starts, ends], 1))
    for span in motion.spans:
        assert set(span.parts) == {"coupler", "follower"}
        # Farthest out where crank and frame are in line: 230 against bars of 180.
        assert span.why == '"follower" and "coupler" can\'t meet at "knee", by up to 50 m'
    assert not motion.ok
    assert motion.worst < 1e-12
    with pytest.raises(rp.Unsolvable, match=r"frames 100 … 262: .*can't meet"):
        rp.bake(turning(four_bar(*STIFF), 0, 720, frames, branch={"knee": "left"}), strict=True)


def test_a_shot_that_only_assembles_later_begins_there() -> None:
    motion = rp.bake(turning(four_bar(*STIFF), 180, 0, 181, branch={"knee": "right"}))
    first = int(np.argmax(motion.state == rp.State.MET))
    assert first == math.ceil(180 - LIMIT)
    assert (motion.state[first:] == rp.State.MET).all()
    assert [(s.first, s.last) for s in motion.spans] == [(1, first)]
    assert motion.bends["knee"] == "right"
    # Past the turn-back a row keeps its side.
    rows = rp.find_branches(motion.rig, {"input": np.linspace(180, 0, 181)[first:]})
    apart = np.abs(rows.positions - motion.positions[first:]).max(axis=(1, 2, 3))
    assert apart.min() < 1e-9 * motion.size


def test_a_shot_that_never_assembles() -> None:
    motion = rp.bake(turning(four_bar(*STIFF), 170, 190, 60))
    assert not motion.ok
    assert np.isnan(motion.positions).all()
    assert "some frame assembles; got none" in str(motion.problems[0])
    assert "60 without a pose" in motion.note()


def test_ends_of_ranges_stop_a_row() -> None:
    """An undriven ram, a rail's end and a limit each stop the same motion and are named."""
    base: dict[str, dict[str, object]] = {
        "joints": {"hub": {"at": [0, 0], **PIN}, "tip": [1, 0], "block": [4, 0],
                   "eye": {"at": [6, 1], **PIN}},
        "bones": {"crank": ["hub", "tip"], "rod": ["tip", "block"]}}
    cranks = {"input": {"turns": "crank", "about": "hub"}}
    rail: dict[str, object] = {"joint": "block", "through": [0, 0], "direction": [1, 0]}

    def baked(**more: object) -> rp.Motion:
        sections = {**base, "rails": {"way": rail}, "cranks": cranks, **more}
        return rp.bake(turning(rp.make_rig(**sections), 0, 180, 181,  # type: ignore[arg-type]
                               branch={"block": "after"}))

    def last(motion: rp.Motion) -> int:
        return int(np.flatnonzero(motion.state == rp.State.MET)[-1])

    t = np.radians(np.arange(181))
    x = np.cos(t) + np.sqrt(9 - np.sin(t) ** 2)
    assert baked().ok
    ended = baked(rails={"way": {**rail, "range": [3, 5]}})
    assert last(ended) == np.flatnonzero(x >= 3)[-1]
    assert ended.spans[0].parts == ("way",)
    assert ended.spans[0].why == 'the rail "way" ends there'
    rope = baked(rams={"rope": {"ends": ["block", "eye"], "range": [0.5, 3.0]}})
    assert last(rope) == np.flatnonzero(np.hypot(6 - x, 1) <= 3)[-1]
    assert rope.spans[0].why == 'the ram "rope" is at the end of its range'
    knee = baked(limits={"knee": {"from": "crank", "to": "rod", "at": "tip", "range": [140, 220]}})
    rod = np.degrees(np.arctan2(-np.sin(t), x - np.cos(t)))
    inside = np.remainder(rod - (np.degrees(t) + 180) - 140, 360) <= 80
    assert last(knee) == np.flatnonzero(inside)[-1]
    assert knee.spans[0].why == 'the limit "knee" stops it'


def test_what_still_moves_is_refused() -> None:
    with pytest.raises(rp.BadInput, match="tip, knee still move; drive input or output"):
        rp.bake(rp.Shot("shot", four_bar(*STIFF), Fraction(24), (1, 5)))


def test_a_drive_outside_of_its_range_is_refused() -> None:
    base = four_bar(*CRANK_ROCKER)
    rig = rp.make_rig({j.name: {"at": j.at, "pin": True} if j.pin else {} for j in base.joints},
                      {b.name: {"ends": b.ends, "length": b.length} for b in base.bones},
                      cranks={"input": {"turns": "crank", "about": "left", "range": [-30, 60]}})
    assert rp.bake(turning(rig, -30, 60, 20)).ok
    with pytest.raises(rp.BadInput, match=r'drive "input": stays in its range -30 … 60; got 61'):
        rp.bake(turning(rig, -30, 61, 20))


# -- windows, stopping, sub-frames ----------------------------------------------------------------

@pytest.mark.parametrize("window", [5, 7, 64, 4096])
def test_a_motion_does_not_depend_on_its_windows(window: int) -> None:
    """A coupling rod whose dead centres fall on seams, next to them and between frames."""
    rig = four_bar(2, .5, 2, .5)
    work = Baking(shot(rig, {"input": [(1, 13.0), (92, 13 + 7.5 * 91)]}, (1, 92),
                       branch={"knee": "left"}), rp.Budget())
    assert work.row is not None
    got = np.concatenate([p.positions for p in pieces(
        work.context, work.clock, work.row.begins, window)])
    assert np.abs(got - rp.bake(work.shot).positions).max() < 1e-9
    turn = np.radians(np.linspace(13, 13 + 7.5 * 91, 92))
    parallel = np.stack([2 + .5 * np.cos(turn), .5 * np.sin(turn)], axis=1)
    assert np.abs(got[:, 3] - parallel).max() < 1e-9


@pytest.mark.parametrize("past", [
    -3.0, -2.2, -1.8, -1.55, -1.4, -1.0, -0.5, 0.0, 0.3, 1.9])
def test_dead_centres_at_a_windows_seam(past: float) -> None:
    """Windows that overlap by two frames on each side."""
    at, pace, count = WINDOW + past, 0.005, WINDOW + 14
    first = 180 - pace * at
    motion = rp.bake(turning(four_bar(2, .5, 2, .5), first, first + pace * (count - 1), count,
                             branch={"knee": "left"}))
    (event,) = motion.events
    assert event.frame == pytest.approx(at + 1, abs=1e-6)
    assert np.abs(motion.value("output") - motion.value("input")).max() < 1e-5


@pytest.mark.parametrize("first", [
    179.9, 179.4, 179.0, 161.1, 161.6, 161.9,
    179.55, 179.995, 161.45, 161.005])
def test_dead_centres_at_the_ends_of_a_motion(first: float) -> None:
    turn = first + np.arange(20.0)
    found = rp.find_branches(four_bar(2, .5, 2, .5), {"input": turn})
    assert [[e.kind for e in row] for row in found.events] == [["passed"], ["passed"]]
    parallel = 2 + .5 * np.cos(np.radians(turn)), .5 * np.sin(np.radians(turn))
    knee = found.positions[:, :, 3]
    assert np.abs(knee - np.stack(parallel, axis=1)).max(axis=(1, 2)).min() < 1e-9


def test_events_are_told_once_whatever_the_windows() -> None:
    rig = four_bar(2, .5, 2, .5)
    work = Baking(shot(rig, {"input": [(1, 90.0), (361, 3690.0)]}, (1, 361)), rp.Budget())
    assert work.row is not None
    for window in (9, 18, 50, 4096):
        times = [p.time for piece in pieces(work.context, work.clock, work.row.begins, window)
                 for _, p in piece.passes]
        assert times == pytest.approx([9 + 18 * k for k in range(20)], abs=1e-6)


def test_a_long_shot_goes_straight_on_over_its_windows() -> None:
    frames = 9001
    motion = rp.bake(turning(four_bar(2, .5, 2, .5), 10, 10 + 90 * 360, frames,
                             branch={"knee": "left"}))
    assert motion.ok
    assert np.abs(motion.value("output") - motion.value("input")).max() < 1e-6
    assert len(motion.events) == 180
    assert {e.kind for e in motion.events} == {"passed"}


def test_a_watch_sees_frames_and_can_stop() -> None:
    long = turning(four_bar(*CRANK_ROCKER), 0, 3600, 40_000)
    seen: list[tuple[str, int, int]] = []
    whole = rp.bake(long, watch=lambda *a: seen.append(a))
    assert whole.ok
    assert [s[0] for s in seen] == ["frames"] * len(seen)
    assert [s[2] for s in seen] == [40_000] * len(seen)
    assert seen[-1][1] == 40_000
    part = rp.bake(long, watch=lambda what, done, total: False)
    assert part.found is rp.Found.STOPPED
    assert 0 < len(part) < 40_000
    assert np.array_equal(part.positions, whole.positions[:len(part)])
    assert np.array_equal(part.frames, whole.frames[:len(part)])
    assert len(part.value("input")) == len(part)


def test_steps_between_frames() -> None:
    rig = four_bar(*CRANK_ROCKER)
    whole = rp.bake(turning(rig, 0, 360, 13))
    fine = rp.bake(turning(rig, 0, 360, 13, step=0.25))
    assert len(fine) == 49
    assert np.array_equal(fine.frames[::4], whole.frames)
    assert np.abs(fine.positions[::4] - whole.positions).max() < 1e-12 * whole.size
    # Events are told in frame numbers, whatever the step.
    rod = four_bar(2, .5, 2, .5)
    for step in (1.0, 0.5, 0.125):
        (event,) = rp.bake(turning(rod, 90, 270, 13, step=step)).events
        assert event.frame == pytest.approx(7.0, abs=1e-6)


def test_a_single_frame_is_a_shot() -> None:
    motion = rp.bake(shot(four_bar(*CRANK_ROCKER), {"input": [(5, 40.0)]}, (5, 5)))
    assert motion.ok
    assert motion.frames.tolist() == [5]


# -- values ---------------------------------------------------------------------------------------

def test_values_go_on_over_many_turns() -> None:
    motion = rp.bake(turning(four_bar(40, 100, 80, 120), 0, 1085, 400))
    assert motion.value("input")[-1] == 1085
    out = motion.value("output")
    # A double crank: its follower goes round as often as its crank.
    assert np.abs(np.diff(out)).max() < 40
    assert out[-1] - out[0] == pytest.approx(1085, abs=120)
    slider = rp.bake(turning(slider_crank(1, 3), 0, 720, 100))
    assert np.abs(slider.value("guide") - slider["block"][:, 0]).max() < 1e-12
    with pytest.raises(KeyError):
        slider.value("nothing")
    with pytest.raises(KeyError):
        slider["nothing"]


def gears(first: float, second: float) -> rp.Rig:
    """Two wheels in mesh, and bars from both to one joint."""
    return rp.make_rig(
        {"a": {"at": [0, 0], **PIN}, "b": {"at": [3, 0], **PIN}, "p": [0.5, 0], "q": [3.4, 0],
         "top": [2, 4]},
        {"arm_a": ["a", "p"], "arm_b": ["b", "q"], "bar_a": ["p", "top"], "bar_b": ["q", "top"]},
        cranks={"turn_a": {"turns": "arm_a", "about": "a"},
                "turn_b": {"turns": "arm_b", "about": "b"}},
        ties={"mesh": {"sum": {"turn_a": first, "turn_b": second}}})


@pytest.mark.parametrize("driven", ["turn_a", "turn_b"])
@pytest.mark.parametrize("frames", [721, 9001])
def test_a_tie_holds_over_many_turns(driven: str, frames: int) -> None:
    """Wheels of 30 and 18 teeth: whichever is driven, the other goes -30 / 18 of it, or back."""
    last = 40 * 360.0
    motion = rp.bake(shot(gears(30, 18), {driven: [(1, 0), (frames, last)]}, (1, frames)))
    assert motion.ok
    a, b = motion.value("turn_a"), motion.value("turn_b")
    assert np.abs(30 * a + 18 * b).max() < 1e-6
    assert np.ptp(a if driven == "turn_a" else b) == last
    drawn = np.stack([0.5 * np.cos(np.radians(a)), 0.5 * np.sin(np.radians(a))], axis=1)
    assert np.abs(motion["p"] - drawn).max() < 1e-10
    assert motion.worst < 1e-12


def test_a_limits_angle_can_be_read() -> None:
    rig = rp.make_rig(
        {"hub": {"at": [0, 0], **PIN}, "tip": [1, 0], "block": [4, 0]},
        {"crank": ["hub", "tip"], "rod": ["tip", "block"]},
        rails={"way": {"joint": "block", "through": [0, 0], "direction": [1, 0]}},
        cranks={"input": {"turns": "crank", "about": "hub"}},
        limits={"knee": {"from": "crank", "to": "rod", "at": "tip", "range": [0, 360]}})
    motion = rp.bake(turning(rig, 0, 90, 10, branch={"block": "after"}))
    t = np.radians(np.linspace(0, 90, 10))
    rod = np.degrees(np.arctan2(-np.sin(t), np.sqrt(9 - np.sin(t) ** 2)))
    assert motion.value("knee") == pytest.approx(np.remainder(rod - np.degrees(t) - 180, 360))
    assert set(motion.value_names) == {"input", "way", "knee"}


# -- blocks ---------------------------------------------------------------------------------------

def swung(seed: int) -> tuple[rp.Shot, Array]:
    """A rig with a block, its crank swung about the drawn pose and back."""
    case = random_case(seed, 1, BLOCKS)
    at = case.drives["turn"]
    near = {j: tuple(case.drawn[k]) for k, j in enumerate(case.rig.joint_names)}
    return shot(case.rig, {"turn": [(1, at), (31, at + 5), (61, at)]}, (1, 61), "smooth",
                near=near), case.drawn


@pytest.mark.parametrize("seed", range(2))
def test_a_block_is_followed(seed: int) -> None:
    one, drawn = swung(seed)
    motion = rp.bake(one)
    assert np.abs(motion.positions[0] - drawn).max() < 1e-7
    if not motion.ok:
        # It came to a dead centre on the way: what there is must still be right.
        assert motion.spans
    assert motion.worst < 1e-12
    assert motion.found is rp.Found.PROBABLY
    alive = np.flatnonzero(motion.state == rp.State.MET)
    for frame in alive[::20]:
        poses = rp.find_branches(one.rig, {"turn": motion.value("turn")[frame]}).positions[:, 0]
        apart = np.abs(poses - motion.positions[frame]).max(axis=(1, 2))
        assert apart.min() < 1e-7 * motion.size
    step = np.diff(motion.positions, axis=0)
    assert np.nanmax(np.abs(np.diff(step, axis=0))) < 0.2 * max(np.nanmax(np.abs(step)), 1e-3)
    if motion.ok:
        assert np.abs(motion.positions[-1] - motion.positions[0]).max() < 1e-7 * motion.size


def test_a_followed_block_does_not_depend_on_its_windows() -> None:
    one, _ = swung(1)
    work = Baking(one, rp.Budget())
    assert work.row is not None
    got = [np.concatenate([p.positions for p in pieces(
        work.context, work.clock, work.row.begins, window)]) for window in (5, 16, 4096)]
    assert np.abs(got[0] - got[2]).max() < 1e-10
    assert np.abs(got[1] - got[2]).max() < 1e-10
