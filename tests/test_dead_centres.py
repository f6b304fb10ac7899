"""Dead centres: passed, touched, turned back, opened for a moment; and what lies close to them.

What happens where is geometry that anyone can redo by hand: a parallelogram, a piston driven as a
turning crank would drive it, two wheels coupled by two rods a quarter turn apart. A motion with a
dead centre goes on as the mechanism would, with no jump in speed.
"""

from __future__ import annotations

import math
from fractions import Fraction

import numpy as np
import pytest
from linkages import angle, four_bar, slider_crank
from scipy.optimize import brentq

import rigpose as rp
from rigpose.model.equations import Array

PIN = {"pin": True}
PARALLEL = (2.0, 0.5, 2.0, 0.5)


def unrolled(found: rp.Branches, start: str, end: str) -> Array:
    """Directions in degrees ``(n_branches, n_frames)`` without jumps of a turn."""
    out: Array = np.unwrap(angle(found, start, end), period=360, axis=1)
    return out


def held(found: rp.Branches) -> None:
    """Every length holds in every pose."""
    assert rp.judge(found.rig, found.positions, found.size).worst()[0] < 1e-12


def kinds(found: rp.Branches) -> list[list[str]]:
    return [[e.kind for e in row] for row in found.events]


def shot(rig: rp.Rig, keys: list[tuple[float, float, str]], frames: tuple[int, int],
         branch: dict[str, str] | None = None) -> rp.Shot:
    return rp.Shot("shot", rig, Fraction(24), frames, branch=branch, keys=tuple(
        rp.Key(f, {"input": v}, ease=ease) for f, v, ease in keys))  # type: ignore[arg-type]


# -- passed ---------------------------------------------------------------------------------------

@pytest.mark.parametrize("frames", [3601, 721, 500])
def test_a_coupling_rod_goes_straight_through_for_ten_turns(frames: int) -> None:
    turn = np.linspace(0, 3600, frames)
    found = rp.find_branches(four_bar(*PARALLEL), {"input": turn})
    assert len(found) == 2
    assert (found.state == rp.State.MET).all()
    held(found)
    follower = unrolled(found, "right", "knee")
    parallel = int(np.argmin(np.abs(follower - turn).max(axis=1)))
    assert np.abs(follower[parallel] - turn).max() < 1e-8  # the root of rounding at a dead centre
    # All but the two at the ends; two a turn.
    for row in found.events:
        assert [e.kind for e in row] == ["passed"] * 19
        at = np.array([e.frame for e in row]) * 3600 / (frames - 1)
        assert np.abs(at - 180 * np.arange(1, 20)).max() < 1e-6


@pytest.mark.parametrize("turn", [
    np.linspace(11, 350, 40), np.linspace(10, 350, 40), np.linspace(10, 350, 41),
    np.linspace(0, 350, 37)])
def test_a_coupling_rod_goes_straight_through_between_frames(turn: Array) -> None:
    found = rp.find_branches(four_bar(*PARALLEL), {"input": turn})
    assert len(found) == 2
    held(found)
    assert kinds(found) == [["passed"], ["passed"]]
    off = np.abs(unrolled(found, "right", "knee") - turn)
    assert np.remainder(off + 1, 360).max(axis=1).min() < 1 + 1e-8


@pytest.mark.parametrize("longer", [0.0, 9.0, 24.0])
def test_a_driven_piston_turns_the_crank_round(longer: float) -> None:
    """The block is moved as a crank that turns evenly would move it, so the crank turns evenly.

    The offset is such that the way out takes 180 + ``longer`` degrees: asin(e / (l - r)) -
    asin(e / (l + r)) more than half a turn. So both dead centres fall on frames of one degree.
    """
    r, rod = 1.0, 3.0

    def ends(e: float) -> tuple[float, float]:
        return math.degrees(math.asin(e / (rod + r))), 180 + math.degrees(math.asin(e / (rod - r)))

    offset = float(brentq(lambda e: ends(e)[1] - ends(e)[0] - 180 - longer, 0, rod - r))
    turn = ends(offset)[0] + np.arange(-100.0, 981.0)
    t = np.radians(turn)
    x = r * np.cos(t) + np.sqrt(rod**2 - (r * np.sin(t) - offset) ** 2)
    found = rp.find_branches(slider_crank(r, rod, offset), {"guide": x})
    assert len(found) == 2
    assert (found.state == rp.State.MET).all()
    held(found)
    got = unrolled(found, "hub", "tip")
    first = int(np.argmin(np.remainder(got[:, 0] - turn[0] + 1, 360)))
    assert np.abs(got[first] - got[first, 0] - (turn - turn[0])).max() < 1e-5
    assert kinds(found)[first] == ["passed"] * 6


def quartered(between: float, throw: float) -> rp.Rig:
    """Two wheels and two rods whose pins stand a quarter turn apart."""
    joints: dict[str, object] = {"hub1": {"at": [0, 0], **PIN}, "hub2": {"at": [between, 0], **PIN}}
    for k, x in ((1, 0.0), (2, between)):
        joints |= {f"p{k}": [x + throw, 0], f"q{k}": [x, throw]}
    return rp.make_rig(
        joints, {"rod_p": ["p1", "p2"], "rod_q": ["q1", "q2"]},
        plates={"wheel1": ["hub1", "p1", "q1"], "wheel2": ["hub2", "p2", "q2"]},
        cranks={"turn": {"turns": "wheel1", "line": ["hub1", "p1"], "about": "hub1"}})


@pytest.mark.parametrize(("between", "throw"), [(2.0, 0.5), (2.37, 0.431)])
def test_quartered_rods_live_at_every_whole_degree_as_one_motion(
    between: float, throw: float) -> None:
    """One rod places, the other checks, and at 0, 180, … degrees it can only do so to the root of
    rounding. No other motion exists: a quarter turn apart the wheels can't turn crossed. Nor is
    there a dead centre: while one rod lies in line with its cranks, the other stands square."""
    turn = np.arange(3601.0)
    found = rp.find_branches(quartered(between, throw), {"turn": turn})
    assert len(found) == 1
    assert (found.state == rp.State.MET).all()
    held(found)
    assert not any(found.events)
    # With either rod alone the margin is |sin| of the turn, of which one is 0.7 at least.
    assert found.margin.min() > math.sqrt(0.5)
    assert np.abs(unrolled(found, "hub2", "p2")[0] - turn).max() < 1e-10
    step = np.diff(found.positions[0], n=2, axis=0)
    assert np.abs(step).max() < 1.01 * throw * math.radians(1) ** 2


def posed(rig: rp.Rig, degrees: Array) -> None:
    for value in degrees:
        one = rp.find_branches(rig, {"turn": value})
        assert len(one) == 1, value
        held(one)
        assert np.abs(one.positions[0, 0, 4:] - one.positions[0, 0, 2:4] - (2.37, 0)).max() < 1e-12


def test_quartered_rods_live_pose_by_pose() -> None:
    posed(quartered(2.37, 0.431), np.concatenate([np.arange(0.0, 361, 5), np.arange(0, 3601, 90)]))


@pytest.mark.slow
def test_quartered_rods_live_at_every_whole_degree_pose_by_pose() -> None:
    posed(quartered(2.37, 0.431), np.arange(3601.0))


def test_a_third_wheel_on_the_rod_is_no_hindrance() -> None:
    """Three wheels, one rod with three pins: redundant, and the other motion is a crossed one."""
    w, r = (1.6, 1.45), 0.35
    at = [0.0, w[0], w[0] + w[1]]
    joints: dict[str, object] = {f"hub{k}": {"at": [x, 0], **PIN} for k, x in enumerate(at)}
    joints |= {f"pin{k}": [x, r] for k, x in enumerate(at)}
    rig = rp.make_rig(
        joints, {f"wheel{k}": [f"hub{k}", f"pin{k}"] for k in range(3)},
        plates={"rod": [f"pin{k}" for k in range(3)]},
        cranks={"turn": {"turns": "wheel0", "about": "hub0"}})
    turn = np.linspace(0, 3600, 1801)
    found = rp.find_branches(rig, {"turn": turn})
    assert len(found) == 1
    assert (found.state == rp.State.MET).all()
    held(found)
    for k in range(3):
        assert np.abs(unrolled(found, f"hub{k}", f"pin{k}")[0] - turn).max() < 1e-8


# -- touched, turned back, stopped ----------------------------------------------------------------

def test_a_drive_that_comes_and_goes_touches_a_change_point() -> None:
    """180 - 40 s^2: the height goes like s^2, whose smooth way stays on its side."""
    s = np.linspace(-1, 1, 201)
    found = rp.find_branches(four_bar(*PARALLEL), {"input": 180 - 40 * s * s})
    assert kinds(found) == [["touched"], ["touched"]]
    held(found)
    assert np.abs(found.positions - found.positions[:, ::-1]).max() < 1e-12


@pytest.mark.parametrize(("off", "row"), [
    (-1e-3, []),
    (0.1, ["passed", "passed"]),
    (1e-3, ["passed", "passed"])])  # both within one frame of the turn
def test_just_past_a_change_point_and_just_short_of_it(off: float, row: list[str]) -> None:
    """Passed twice, or not reached at all: either way the motion comes back as it went."""
    s = np.linspace(-1, 1, 201)
    turn = 180 + off - 40 * s * s
    found = rp.find_branches(four_bar(*PARALLEL), {"input": turn})
    held(found)
    assert (kinds(found) or [[], []]) == [row, row]
    apart = np.abs(np.remainder(angle(found, "right", "knee") - turn + 180, 360) - 180)
    assert apart.max(axis=1).min() < 1e-8


def reach(d: float, a: float, b: float, c: float) -> float:
    """Where the input of a four-bar that can't turn fully stops: coupler and follower in line."""
    return math.degrees(math.acos((d * d + a * a - (b + c) ** 2) / (2 * d * a)))


STIFF = (150.0, 80.0, 110.0, 70.0)


def test_rows_end_where_the_linkage_turns_back() -> None:
    limit = reach(*STIFF)
    turn = np.linspace(0, 180, 1801)
    found = rp.find_branches(four_bar(*STIFF), {"input": turn})
    assert len(found) == 2
    alive = turn <= limit
    assert np.array_equal(found.state == rp.State.MET, np.broadcast_to(alive, (2, len(turn))))
    assert np.isnan(found.positions[:, ~alive]).all()
    assert np.isnan(found.margin[:, ~alive]).all()
    held(found)
    # The last frame may lie on the dead centre itself: it lives, with both rows in one pose.
    found = rp.find_branches(four_bar(*STIFF), {"input": np.linspace(0, limit, 101)})
    assert (found.state == rp.State.MET).all()
    assert found.margin[:, -1].max() < 1e-6
    assert np.abs(found.positions[0, -1] - found.positions[1, -1]).max() < 1e-6 * found.size


def test_a_drive_that_eases_into_the_end_of_its_way_passes_over_to_the_other_side() -> None:
    """limit - 30 s^2: the squared height goes like s^2, and its smooth way changes sides."""
    s = np.linspace(-1, 1, 201)
    found = rp.find_branches(four_bar(*STIFF), {"input": reach(*STIFF) - 30 * s * s})
    assert kinds(found) == [["passed"], ["passed"]]
    assert (found.state == rp.State.MET).all()
    follower = unrolled(found, "right", "knee")
    assert (np.abs(follower[:, 0] - follower[:, -1]) > 20).all()
    assert np.abs(np.diff(follower, n=2, axis=1)).max() < 0.1
    assert np.abs(found.positions[0] - found.positions[1, ::-1]).max() < 1e-6 * found.size


def test_a_span_tells_where_it_begins_and_what_holds_back() -> None:
    limit = reach(*STIFF)
    motion = rp.bake(shot(four_bar(*STIFF), [(1, 0.0, "linear"), (181, 180.0, "linear")],
                          (1, 181), {"knee": "left"}))
    assert not motion.ok
    (span,) = motion.spans
    assert (span.first, span.last) == (math.ceil(limit) + 1, 181)
    assert set(span.parts) == {"coupler", "follower"}
    # At 180 degrees the tip is 230 from the follower's foot, and the two bars make 180.
    assert "by up to 50 m" in span.why


# -- a gap for less than a frame ------------------------------------------------------------------

@pytest.mark.parametrize(("turn", "gaps"), [
    (np.linspace(-20, 20, 41) + 0.1, 1),
    (np.linspace(-20, 20, 41) + 0.25, 1), (np.linspace(-20, 20, 42), 1),
    (np.linspace(160, 200, 41) + 0.25, 0)])
def test_a_linkage_that_opens_for_less_than_a_frame_says_so(turn: Array, gaps: int) -> None:
    """A coupler longer by 1e-6 than the frame of equal cranks: for |input| below about a tenth of
    a degree b - c is more than the way from tip to foot. At 180 degrees it closes."""
    found = rp.find_branches(four_bar(2, 0.5, 2.000001, 0.5), {"input": turn})
    assert (found.state == rp.State.MET).all()
    events = found.events or ((), ())
    assert [[e.kind for e in row] for row in events] == [["gap"] * gaps] * 2
    for row in events:
        for e in row:
            assert np.interp(e.frame, np.arange(len(turn)), turn) == pytest.approx(0, abs=0.15)


# -- rest -----------------------------------------------------------------------------------------

def test_nothing_happens_where_nothing_moves() -> None:
    found = rp.find_branches(four_bar(*PARALLEL), {"input": np.full(5, 30.0)})
    assert len(found) == 2
    assert not found.events
    assert np.ptp(found.positions, axis=1).max() == 0.0


def test_a_rest_at_a_dead_centre_is_one_row_of_one_pose() -> None:
    found = rp.find_branches(four_bar(*PARALLEL), {"input": np.full(5, 180.0)})
    assert len(found) == 1
    assert np.ptp(found.positions, axis=1).max() == 0.0
    assert found.margin.max() < 1e-6


def test_a_rest_at_a_dead_centre_is_no_event() -> None:
    found = rp.find_branches(four_bar(*PARALLEL), {"input": np.full(5, 180.0)})
    assert not any(found.events)


@pytest.mark.parametrize(("then", "kind"), [(1, "passed"), (-1, "touched")])
def test_a_drive_that_waits_at_a_dead_centre(then: int, kind: str) -> None:
    """Going on it has passed; going back it has touched."""
    up = np.linspace(150, 177, 10)
    turn = np.concatenate([up, np.full(8, 180.0), 180 + then * (180 - up[::-1])])
    found = rp.find_branches(four_bar(*PARALLEL), {"input": turn})
    assert kinds(found) == [[kind], [kind]]
    off = np.abs(np.remainder(angle(found, "right", "knee") - turn + 180, 360) - 180).max(axis=1)
    assert off.min() < 1e-6


def test_a_pose_at_a_dead_centre_is_listed_once_with_both_names() -> None:
    found = rp.find_branches(four_bar(*PARALLEL), {"input": 180.0})
    assert len(found) == 1
    assert list(found.names) == ["knee:left = knee:right"]
    assert found.meets.all()
    assert len(found.pick(knee="left")) == len(found.pick(knee="right")) == 1
    limit = reach(*STIFF)
    assert list(rp.find_branches(four_bar(*STIFF), {"input": limit}).names) == [
        "knee:left = knee:right"]


def test_margin_falls_to_zero_like_the_sine_at_a_meeting() -> None:
    """Near a change point of equal cranks sin(mu) goes to zero with the input's angle."""
    off = np.array([1.0, 1e-1, 1e-2, 1e-3, 1e-4])
    found = [rp.find_branches(four_bar(*PARALLEL), {"input": 180 - v}) for v in off]
    assert [len(f) for f in found] == [2] * 5
    margins = np.array([f.margin[0, 0] for f in found])
    assert margins[:-1] / margins[1:] == pytest.approx([10] * 4, rel=1e-2)


# -- free turning ---------------------------------------------------------------------------------

def fold() -> rp.Rig:
    """Two equal bars from a pin to a target: where the target lies on the pin they turn freely."""
    return rp.make_rig({"a": {"at": [0, 0], **PIN}, "c": [1, 0.5], "d": [1, 1.5]},
                       {"cd": {"ends": ["c", "d"], "length": 1},
                        "ad": {"ends": ["a", "d"], "length": 1}})


def test_concentric_equal_circles_are_told() -> None:
    way = np.stack([np.linspace(-1, 1, 21), np.zeros(21)], axis=1)
    found = rp.find_branches(fold(), targets={"c": way})
    assert (found.state == rp.State.MET).sum(axis=1).tolist() == [20, 20]
    assert not (found.state[:, 10] > rp.State.NONE).any()
    (note,) = found.notes
    assert '"d" turns freely (ad, cd)' in note
    # However near, as long as the two centres can be told apart it is two poses.
    assert len(rp.find_branches(fold(), targets={"c": [1e-9, 0]})) == 2


def test_concentric_equal_circles_are_told_for_a_single_pose() -> None:
    found = rp.find_branches(fold(), targets={"c": [0.0, 0.0]})
    assert len(found) == 0
    assert any('"d" turns freely' in note for note in found.notes)


def test_concentric_equal_circles_in_every_frame() -> None:
    found = rp.find_branches(fold(), targets={"c": np.zeros((3, 2))})
    assert len(found) == 0
    assert any('"d" turns freely' in note for note in found.notes)


# -- in a shot ------------------------------------------------------------------------------------

def test_a_shot_that_eases_into_a_dead_centre_and_on() -> None:
    motion = rp.bake(shot(four_bar(*PARALLEL), [(1, 90, "smooth"), (21, 180, "smooth"),
                                                (41, 270, "smooth")], (1, 41), {"knee": "left"}))
    assert motion.ok
    (event,) = motion.events
    assert event.kind == "passed"
    # Its speed is zero there to the third order, and so is what can be known of the time.
    assert event.frame == pytest.approx(21, abs=1e-3)
    assert np.abs(motion.value("output") - motion.value("input")).max() < 1e-6


@pytest.mark.parametrize("side", ["left", "right"])
def test_a_shot_that_begins_at_a_dead_centre_takes_the_side_that_is_asked_for(side: str) -> None:
    motion = rp.bake(shot(four_bar(*PARALLEL), [(1, 180, "smooth"), (21, 270, "smooth")], (1, 21),
                          {"knee": side}))
    assert motion.ok
    last = rp.find_branches(motion.rig, {"input": 270.0}).pick(knee=side)
    assert np.abs(motion.positions[-1] - last.positions[0, 0]).max() < 1e-6


# -- far from the origin --------------------------------------------------------------------------

@pytest.mark.parametrize("size", [1e-3, 1.0, 1e3])
def test_far_from_the_origin_lengths_hold_to_what_floats_can_say(size: float) -> None:
    """A million sizes away: 1e-12 in the rig's own frame, and 4 units in the last place more."""
    far = 1e6 * size

    def rig(x: float) -> rp.Rig:
        return rp.make_rig(
            {"left": {"at": [x, -x], **PIN}, "right": {"at": [x + size, -x], **PIN}, "tip": {},
             "knee": {}},
            {"crank": {"ends": ["left", "tip"], "length": 0.4 * size},
             "coupler": {"ends": ["tip", "knee"], "length": 1.2 * size},
             "follower": {"ends": ["right", "knee"], "length": 0.8 * size}},
            cranks={"input": {"turns": "crank", "about": "left"}})

    turn = np.linspace(0, 720, 721)
    near, away = (rp.find_branches(rig(x), {"input": turn}) for x in (0.0, far))
    assert list(near.names) == list(away.names)
    # The second pin lies where float64 puts it, which bends the rig itself a little.
    bent = 8 * np.spacing(far) / near.margin.min()
    assert np.abs(away.positions - near.positions - (far, -far)).max() < bent
    verdict = rp.judge(away.rig, away.positions, away.size)
    assert verdict.worst(beyond_floats=True)[0] < 1e-12
