"""The machines of rigs/ that stand in space: each against formulas or a solution of its own.

The loop equations here are written from the drawings in the files, in unknowns that the program
doesn't use (angles, turns of whole parts), and solved by SciPy or in closed form. Formulas without
a source are elementary geometry.
"""

from __future__ import annotations

import math
from collections.abc import Callable
from dataclasses import replace
from functools import cache, partial
from pathlib import Path
from typing import Any

import numpy as np
import pytest
from numpy.typing import ArrayLike
from scipy.optimize import root
from scipy.spatial.transform import Rotation

import rigpose as rp
from rigpose.model.equations import Array

RIGS = Path(__file__).parent.parent / "rigs"
PIN = {"pin": True}


@cache
def machine(name: str) -> rp.Rig:
    return rp.load_rig(RIGS / f"{name}.toml")


@cache
def baked(name: str) -> rp.Motion:
    return rp.bake(rp.load_shot(RIGS / f"{name}.shot.toml"))


@cache
def given(name: str) -> Any:
    shot = rp.load_shot(RIGS / f"{name}.shot.toml")
    return rp.channels(shot, shot.numbers)


def drawn(name: str, joint: str) -> Array:
    rig = machine(name)
    return np.array(rig.joints[rig.index[joint]].at)


def about(axis: ArrayLike, degrees: ArrayLike) -> Rotation:
    """Turns by the right hand about an axis."""
    unit = np.asarray(axis, dtype=float)
    unit = unit / np.linalg.norm(unit)
    return Rotation.from_rotvec(np.multiply.outer(np.radians(degrees), unit))


def solution(loops: Callable[[Array], Array], start: Array) -> Array:
    """Where loop equations close, by SciPy from a start; how far is for the caller to see."""
    found: Array = root(loops, start, tol=1e-14).x
    return found


def test_there_are_machines_in_space_enough() -> None:
    names = [p.stem for p in RIGS.glob("*.toml") if not p.name.endswith(".shot.toml")]
    assert sum(machine(name).dim == 3 for name in names) >= 8


# -- loops of hinges ------------------------------------------------------------------------------

def test_the_weather_loop_turns_fully_as_bennett_says() -> None:
    """Bennett 1903 (from memory): sin(alpha) / a = sin(beta) / b, and then tan(t1/2) tan(t2/2) =
    sin((beta + alpha) / 2) / sin((beta - alpha) / 2)."""
    a, b, alpha, beta = 30.0, 60.0, math.radians(30), math.radians(90)
    assert math.sin(alpha) / a == pytest.approx(math.sin(beta) / b, rel=1e-15)
    rig = machine("weather_loop")
    axes = {h: drawn("weather_loop", f"{h} axis") - drawn("weather_loop", j)
            for h, j in zip("abcd", ("foot", "near", "far", "heel"), strict=True)}
    for one, other, length, twist in (("a", "b", a, alpha), ("b", "c", b, beta),
                                      ("c", "d", a, alpha), ("d", "a", b, beta)):
        u, v = (axes[h] / np.linalg.norm(axes[h]) for h in (one, other))
        assert abs(u @ v) == pytest.approx(math.cos(twist), abs=1e-12)
        assert length in (a, b)
    report = rp.check(rig)
    assert (report.freedoms, report.freedoms_first_order, report.freedoms_counted) == (1, 1, -2)
    turn = np.linspace(100, 460, 361)
    found = rp.find_branches(rig, {"turn": turn})
    assert len(found) == 1
    motion = found.pick(0).motion()
    ratio = math.sin((beta + alpha) / 2) / math.sin((beta - alpha) / 2)
    want = 2 * np.degrees(np.arctan2(ratio * np.cos(np.radians(turn) / 2),
                                     np.sin(np.radians(turn) / 2)))
    gap = np.remainder(motion.value("bend") - want + 180, 360) - 180
    assert np.abs(gap).max() < 1e-9
    assert float(motion.margin.min()) > 1e-2
    assert np.abs(motion.positions[-1] - motion.positions[0]).max() < 1e-11 * found.size


def test_the_beacon_goes_straight_up() -> None:
    """Sarrus 1853: the height is twice that of one board, and the lamp neither turns nor strays."""
    motion = baked("beacon_lift")
    lift = np.radians(given("beacon_lift").drives["lift"])
    lamp = motion["lamp"]
    assert lamp[:, 2] == pytest.approx(2 * 30 * np.sin(lift) + 14, abs=1e-11)
    assert np.abs(lamp[:, :2]).max() < 1e-11
    for head in ("head_x", "head_y"):
        assert np.ptp(motion[head] - lamp, axis=0).max() < 1e-11
    report = rp.check(machine("beacon_lift"))
    assert (report.freedoms, report.freedoms_counted) == (1, 0)


def test_a_lift_that_lies_on_the_ground_is_no_branch_of_its_own() -> None:
    """With one leaf folded back on itself the table lies on its sills, and the other leaf turns
    freely: no pose there is apart from its neighbours, so none has a margin."""
    found = rp.find_branches(machine("beacon_lift"), {"lift": 40.0})
    low = found.positions[:, 0, found.joints.index("lamp"), 2] < 14 + 1e-6
    assert (~low).sum() == 2
    assert float(found.margin[low].max(initial=0.0)) < 1e-6


def test_the_weather_loop_may_be_led_by_its_second_angle() -> None:
    """Opposite angles and neighbours are alike in kind: without any one of its four axes the screws
    of the other three are never dependent, so there is no dead centre."""
    found = rp.find_branches(machine("weather_loop"), {"bend": np.linspace(0, 360, 50)})
    assert len(found) == 1
    assert not any(found.events)
    assert np.isfinite(found.positions).all()


# -- the wheel on two wishbones -------------------------------------------------------------------

class Corner:
    """The lamp cart's loops: turns of both wishbones and of the carrier are the unknowns."""

    joints = ("lower_ball", "upper_ball", "steer_ball", "wheel", "spring_seat")

    def __init__(self) -> None:
        self.at = {j.name: np.array(j.at) for j in machine("lamp_cart").joints}

    def places(self, unknowns: Array) -> dict[str, Array]:
        lower, upper, *turn = unknowns
        at, carrier = self.at, Rotation.from_rotvec(turn)
        out: dict[str, Array] = {}
        for side, angle, joints in (("lower", lower, ("lower_ball", "spring_seat")),
                                    ("upper", upper, ("upper_ball",))):
            fore, aft = at[f"{side}_fore"], at[f"{side}_aft"]
            swing = about(aft - fore, math.degrees(angle))
            out |= {j: fore + swing.apply(at[j] - fore) for j in joints}
        ball = out["lower_ball"]
        out |= {j: ball + carrier.apply(at[j] - at["lower_ball"]) for j in ("steer_ball", "wheel")}
        out["carried"] = ball + carrier.apply(at["upper_ball"] - at["lower_ball"])
        return out

    def open(self, unknowns: Array, height: float, rack: float) -> Array:
        """How far the loops are open: at the upper ball, along the rod, and from the height."""
        p = self.places(unknowns)
        rod = np.linalg.norm(p["steer_ball"] - self.at["rack_end"] - (0, rack, 0))
        full = np.linalg.norm(self.at["steer_ball"] - self.at["rack_end"])
        return np.array([*(p["carried"] - p["upper_ball"]), rod - full, p["wheel"][2] - height])

    def solved(self, heights: Array, racks: Array) -> dict[str, Array]:
        unknowns, rows = np.zeros(5), []
        for height, rack in zip(heights, racks, strict=True):
            unknowns = solution(partial(self.open, height=height, rack=rack), unknowns)
            assert np.abs(self.open(unknowns, height, rack)).max() < 1e-13
            rows.append(self.places(unknowns))
        return {j: np.array([row[j] for row in rows]) for j in self.joints}


@pytest.mark.parametrize("rack", [-0.06, 0.06])
def test_the_wheels_travel_is_that_of_its_own_loop_equations(rack: float) -> None:
    """SciPy's root finder over the whole travel, 18 cm, begun at the drawing."""
    ease, corner = np.linspace(0, rack, 9)[:-1], Corner()
    down, up = (corner.solved(np.append(np.full(8, 0.33), np.linspace(0.33, end, 46)),
                              np.append(ease, np.full(46, rack))) for end in (0.24, 0.42))
    want = {j: np.concatenate([down[j][:7:-1], up[j][9:]]) for j in corner.joints}
    wheel = np.full((91, 3), np.nan)
    wheel[:, 2] = np.linspace(0.24, 0.42, 91)
    found = rp.find_branches(machine("lamp_cart"), {"rack": np.full(91, rack)}, {"wheel": wheel})
    gaps = [max(np.abs(found.positions[k, :, found.joints.index(j)] - want[j]).max()
                for j in corner.joints) for k in range(len(found))]
    assert min(gaps) < 1e-10


def test_the_cart_follows_its_shot_as_its_loop_equations_do() -> None:
    channels = given("lamp_cart")
    want = Corner().solved(channels.targets["wheel"][:, 2], channels.drives["rack"])
    motion = baked("lamp_cart")
    for joint, places in want.items():
        assert np.abs(motion[joint] - places).max() < 1e-10


# -- the landing leg ------------------------------------------------------------------------------

def test_the_legs_stay_folds_as_two_skew_hinges_say() -> None:
    """Two hinges and two balls: the knee's angle p about its hinge solves P cos p + Q sin p = R."""
    motion, drives = baked("gull_leg"), given("gull_leg").drives
    at = {j.name: np.array(j.at) for j in machine("gull_leg").joints}
    fold = about((1, 0.12, 0.05), drives["fold"])
    lug = fold.apply(at["lug"])
    assert np.abs(motion["lug"] - lug).max() < 1e-11
    # The wheel's rod slides in the leg and turns with it.
    slid = at["wheel"] + np.multiply.outer(drives["spring"], (0, 0, 1))
    assert np.abs(motion["wheel"] - fold.apply(slid)).max() < 1e-11
    root_, axis = at["stay_root"], np.array((1, -0.08, -0.1))
    axis = axis / np.linalg.norm(axis)
    arm = at["knee"] - root_
    along, square = axis * (arm @ axis), arm - axis * (arm @ axis)
    side = np.cross(axis, square)
    reach = lug - root_
    lower = float(np.linalg.norm(at["knee"] - at["lug"]))
    p, q = 2 * reach @ square, 2 * reach @ side
    r = (reach**2).sum(axis=1) + arm @ arm - lower**2 - 2 * reach @ along
    angles = [np.arctan2(q, p) + s * np.arccos(r / np.hypot(p, q)) for s in (1, -1)]
    knees = [root_ + along + np.multiply.outer(np.cos(a), square)
             + np.multiply.outer(np.sin(a), side) for a in angles]
    gaps = [np.abs(motion["knee"] - knee).max() for knee in knees]
    assert min(gaps) < 1e-11
    wanted = np.degrees(angles[int(np.argmin(gaps))])
    gap = np.remainder(motion.value("stay") - wanted + 180, 360) - 180
    assert np.abs(gap).max() < 1e-9
    # Folded when the leg is up, nearly straight when it is down.
    span = np.linalg.norm(motion["lug"] - root_, axis=1)
    assert span[0] < 5
    assert span[40] > 20


# -- three arms that don't tilt -------------------------------------------------------------------

def spheres(centres: Array, radius: float) -> Array:
    """The two points ``(2, 3)`` at one distance from three."""
    a, b, c = centres
    x = (b - a) / np.linalg.norm(b - a)
    y = c - a - x * (x @ (c - a))
    y = y / np.linalg.norm(y)
    z = np.cross(x, y)
    d, e, f = x @ (b - a), x @ (c - a), y @ (c - a)
    u, v = d / 2, (e * e + f * f - e * d) / (2 * f)
    w = math.sqrt(radius**2 - u * u - v * v)
    return np.array([a + u * x + v * y + s * w * z for s in (-1, 1)])


def elbows(angles: ArrayLike, frame: float, plate: float, arm: float) -> Array:
    """Elbows ``(…, 3, 3)`` of arms turned down by ``angles``, moved in by the plate's radius."""
    a = np.radians(np.asarray(angles, dtype=float))
    out = frame - plate + arm * np.cos(a)
    way = np.radians((0.0, 120.0, 240.0))
    return np.stack([out * np.cos(way), out * np.sin(way), -arm * np.sin(a)], axis=-1)


def test_the_sorters_plate_is_where_three_spheres_meet() -> None:
    motion, drives = baked("letter_sorter"), given("letter_sorter").drives
    rest = math.degrees(math.atan2(11.78746044807266, 59.74988699449332 - 30))
    angles = rest + np.stack([drives[f"leg{k}/dip"] for k in (1, 2, 3)], axis=-1)
    middles = elbows(angles, 30, 9, 32)
    want = np.array([sorted(spheres(m, 70.0), key=lambda p: p[2])[0] for m in middles])
    assert np.abs(motion["sucker"] - want).max() < 1e-10
    for corner in ("plate_1l", "plate_2r", "plate_3l"):
        assert np.ptp(motion[corner] - motion["sucker"], axis=0).max() < 1e-10


def delta() -> rp.Rig:
    """Frame 0.2, plate 0.045, arms 0.2, rods 0.4, drawn with all arms level; rods 0.03 apart."""
    frame, plate, arm, rod, half = 0.2, 0.045, 0.2, 0.4, 0.015
    depth = -math.sqrt(rod**2 - (frame + arm - plate) ** 2)
    joints: dict[str, Any] = {"middle": [0, 0, depth]}
    sections: dict[str, dict[str, Any]] = {k: {} for k in ("plates", "bones", "hinges", "cranks")}
    for k in range(3):
        turn = about((0, 0, 1), 120 * k)
        joints[f"shoulder{k}"] = {"at": turn.apply((frame, 0, 0)), **PIN}
        for side, y in (("l", half), ("r", -half)):
            joints[f"elbow{k}{side}"] = turn.apply((frame + arm, y, 0))
            joints[f"corner{k}{side}"] = turn.apply((plate, y, depth))
            sections["bones"][f"rod{k}{side}"] = [f"elbow{k}{side}", f"corner{k}{side}"]
        sections["plates"][f"arm{k}"] = [f"shoulder{k}", f"elbow{k}l", f"elbow{k}r"]
        sections["hinges"][f"shoulder{k}"] = {
            "parts": ["ground", f"arm{k}"], "at": f"shoulder{k}", "axis": turn.apply((0, 1, 0))}
        sections["cranks"][f"dip{k}"] = {"turns": f"arm{k}", "about": f"shoulder{k}"}
    sections["plates"]["plate"] = ["middle", *(j for j in joints if j.startswith("corner"))]
    return rp.make_rig(joints, dim=3, **sections)


def test_both_untilted_places_of_three_arms() -> None:
    """Arms at 10, 20 and 30 degrees down: by meeting spheres in closed form (own calculation)."""
    rig = delta()
    want = spheres(elbows((10, 20, 30), 0.2, 0.045, 0.2), 0.4)
    assert want[np.argsort(want[:, 2])] == pytest.approx(np.array([
        (.03108871, .01915230, -.27279226), (-.00837771, -.00372696, .13888410)]), abs=1e-8)
    found = rp.find_branches(rig, {f"dip{k}": 10.0 * (k + 1) for k in range(3)})
    assert float(np.nanmax(rp.judge(rig, found.positions, found.size).broken)) < 1e-11
    middle = found.positions[:, 0, found.joints.index("middle")]
    for place in want:
        assert np.abs(middle - place).max(axis=1).min() < 1e-10


def test_three_arms_reach_a_place_in_eight_ways() -> None:
    """Each arm in two ways: for the lower place above 10 or -141.141754 degrees, and so on (own
    calculation in closed form)."""
    rig, middle = delta(), spheres(elbows((10, 20, 30), 0.2, 0.045, 0.2), 0.4)
    place = middle[np.argmin(middle[:, 2])]
    start = np.array(rig.joints[rig.index["middle"]].at)
    corners = [j for j in rig.joints if j.name == "middle" or j.name.startswith("corner")]
    found = rp.find_branches(rig, targets={
        j.name: place + np.array(j.at) - start for j in corners})
    assert len(found) == 8
    read = [found.pick(k).motion() for k in range(8)]
    dips = np.array([[float(m.value(f"dip{k}")[0]) for k in range(3)] for m in read])
    for k, other in enumerate((-141.141754, -141.121137, -141.101113)):
        both = np.remainder(np.unique(np.round(dips[:, k], 6)) + 180, 360) - 180
        assert sorted(both) == pytest.approx([other, 10.0 * (k + 1)], abs=2e-6)


def test_the_untilted_ways_are_among_all_ways_to_a_place() -> None:
    """With the plate free to tilt there are more ways than the eight above, and all of those."""
    rig, goal = machine("letter_sorter"), np.array((5.0, 3.0, -62.0))
    found = rp.find_branches(rig, targets={"sucker": goal})
    plates = [found.joints.index(j) for j in rig.joint_names if j.startswith("plate_")]
    shift = goal - drawn("letter_sorter", "sucker")
    level = np.array([drawn("letter_sorter", rig.joint_names[k]) for k in plates]) + shift
    apart = np.abs(found.positions[:, 0, plates] - level).max(axis=(1, 2))
    assert int((apart < 1e-6).sum()) == 8


# -- a crank, a rocker and a rod between them -----------------------------------------------------

def test_a_rod_between_two_hinges_that_do_not_meet() -> None:
    """Crank 1 about z, rod 3, rocker 2 about a line along y through (2.5, 0, 1): at most two places
    for each angle of the crank, P cos p + Q sin p = R (own calculation)."""
    axis = np.array((2.5, 0.0, 1.0))
    wanted = {0: (-42.265083, -250.354782), 60: (-68.244994, -238.624904),
              150: (-106.115590, -220.792485), 270: (-85.761629, -230.635552)}
    drawing = np.radians(wanted[0][0])
    tip = axis + 2 * np.array((np.cos(drawing), 0, np.sin(drawing)))
    assert np.linalg.norm(tip - (1, 0, 0)) == pytest.approx(3, abs=1e-7)
    rig = rp.make_rig(
        {"hub": {"at": [0, 0, 0], **PIN}, "pin": [1, 0, 0], "tip": tip,
         "post": {"at": axis, **PIN}},
        {"crank": ["hub", "pin"], "rod": {"ends": ["pin", "tip"], "length": 3},
         "rocker": ["post", "tip"]}, dim=3,
        hinges={"in": {"parts": ["ground", "crank"], "at": "hub", "axis": [0, 0, 1]},
                "out": {"parts": ["ground", "rocker"], "at": "post", "axis": [0, -1, 0]}},
        cranks={"turn": {"turns": "crank", "about": "in", "zero": [1, 0, 0]},
                "swing": {"turns": "rocker", "about": "out", "zero": [1, 0, 0]}})
    for turn, want in wanted.items():
        found = rp.find_branches(rig, {"turn": float(turn)})
        assert found.found is rp.Found.COMPLETE
        read = [float(found.pick(k).motion().value("swing")[0]) for k in range(len(found))]
        assert sorted(np.remainder(read, 360)) == pytest.approx(
            sorted(np.remainder(want, 360)), abs=2e-6)


# -- scissors and ribs, by copies -----------------------------------------------------------------

def test_the_gangway_reaches_as_far_as_its_bays_say() -> None:
    """Each bay is as long as the root of (2 half)^2 less the square of its height."""
    rig, motion = machine("folding_gangway"), baked("folding_gangway")
    height = given("folding_gangway").drives["winch"]
    assert len(rig.joints) >= 25
    for k in range(1, 6):
        reach = k * np.sqrt(4 - height**2)
        for side, y in (("left", 0.6), ("right", -0.6)):
            low, high = motion[f"bay{k}/far_low_{side}"], motion[f"bay{k}/far_high_{side}"]
            want = np.stack([reach, np.full(len(reach), y), np.zeros(len(reach))], axis=-1)
            assert np.abs(low - want).max() < 1e-11
            assert np.abs(high - want - np.multiply.outer(height, (0, 0, 1))).max() < 1e-11
    report = rp.check(rig)
    assert report.freedoms == 1
    assert report.freedoms_counted < 0
    assert rp.count_branches(rig, {"winch": 1.2}).branches == 2**5


def crossing(a: Array, b: Array, ra: float, rb: float, side: int) -> Array:
    """Where circles about places ``(n, 2)`` meet, to the left (1) or right (-1) of a to b."""
    way = b - a
    d = np.linalg.norm(way, axis=-1, keepdims=True)
    along = (ra**2 - rb**2 + d**2) / (2 * d)
    square = np.stack([-way[:, 1], way[:, 0]], axis=-1) / d
    out: Array = a + way / d * along + side * square * np.sqrt(ra**2 - along**2)
    return out


def test_the_canopys_ribs_unfold_as_circles_say() -> None:
    """A rib seen from its side: the strut leads the inner bar, the thin rod the outer one."""
    at = {j.name.removeprefix("rib1/"): np.array(j.at)[[0, 2]]
          for j in machine("market_canopy").joints if j.name.startswith(("rib1/", "collar"))}

    def length(a: str, b: str) -> float:
        return float(np.linalg.norm(at[a] - at[b]))

    def carried(tip: str, foot: str, head: str, feet: Array, heads: Array) -> Array:
        """A joint of a bar, from two others of it."""
        turn = complex(*(at[tip] - at[foot])) / complex(*(at[head] - at[foot]))
        way = (heads - feet) @ np.array([1, 1j]) * turn
        out: Array = feet + np.stack([way.real, way.imag], axis=-1)
        return out

    motion, height = baked("market_canopy"), given("market_canopy").drives["mast"]
    collar = np.stack([0 * height, height], axis=-1)
    crown, anchor = (np.tile(at[k], (len(height), 1)) for k in ("crown", "anchor"))
    pushed = crossing(collar, crown, length("collar", "pushed"), length("crown", "pushed"), -1)
    elbow = carried("elbow", "crown", "pushed", crown, pushed)
    horn = crossing(anchor, elbow, length("anchor", "horn"), length("elbow", "horn"), 1)
    tip = carried("tip", "elbow", "horn", elbow, horn)
    for k in range(8):
        turn = about((0, 0, 1), 45 * k)
        for joint, flat in (("pushed", pushed), ("elbow", elbow), ("horn", horn), ("tip", tip)):
            places = turn.apply(np.stack([flat[:, 0], 0 * height, flat[:, 1]], axis=-1))
            assert np.abs(motion[f"rib{k + 1}/{joint}"] - places).max() < 1e-11
    # It opens as the collar goes up.
    assert tip[60, 1] - tip[0, 1] > 0.5


def test_a_canopy_without_limits_could_stand_in_65536_ways() -> None:
    """Eight ribs, each in two ways at the strut and two at the rod."""
    free = replace(machine("market_canopy"), limits=())
    count = rp.count_branches(free, {"mast": 2.4})
    assert (count.branches, count.groups) == (4**8, (4,) * 8)
    assert rp.count_branches(machine("market_canopy"), {"mast": 2.4}).branches == 1


# -- the arm on six hinges ------------------------------------------------------------------------

def folds(wrist: Array) -> list[tuple[float, float, Array]]:
    """All ways to reach a place with the wrist: the waist's angle, the shoulder's, and the elbow.

    The wrist stands in the upright plane through the waist's axis that holds the arm, before the
    post or behind it.
    """
    at = {j.name: np.array(j.at) for j in machine("lamplighter").joints}
    upper = float(np.linalg.norm(at["elbow"] - at["shoulder"]))
    lower = float(np.linalg.norm(at["wrist"] - at["elbow"]))
    out = []
    for sign in (1, -1):
        waist = math.atan2(sign * wrist[1], sign * wrist[0])
        shoulder = np.array([[0.15, 0.5]])
        goal = np.array([[sign * math.hypot(wrist[0], wrist[1]), wrist[2]]])
        if not abs(upper - lower) < np.linalg.norm(goal - shoulder) < upper + lower:
            continue
        for side in (1, -1):
            x, z = crossing(shoulder, goal, upper, lower, side)[0]
            slope = math.atan2(z - 0.5, x - 0.15) - math.atan2(0.8, 0.3)
            out.append((math.degrees(waist), -math.degrees(slope),
                        np.array((x * math.cos(waist), x * math.sin(waist), z))))
    return out


@pytest.mark.parametrize(("move", "count"), [((0, 0, 0), 4), ((-0.55, 0.2, -0.3), 8)])
def test_the_lamplighter_reaches_a_place_in_all_the_ways_there_are(
        move: tuple[float, float, float], count: int) -> None:
    """Waist forwards or backwards, elbow up or down, and the last three hinges in two ways each."""
    rig = machine("lamplighter")
    found = rp.find_branches(rig, targets={
        j: drawn("lamplighter", j) + move for j in ("flame", "grip", "side")})
    assert float(np.nanmax(rp.judge(rig, found.positions, found.size).broken)) < 1e-11
    ways = folds(drawn("lamplighter", "wrist") + move)
    assert len(found) == 2 * len(ways) == count
    elbows_found = found.positions[:, 0, found.joints.index("elbow")]
    motions = [found.pick(k).motion() for k in range(count)]
    for waist, raised, elbow in ways:
        mine = np.flatnonzero(np.abs(elbows_found - elbow).max(axis=1) < 1e-9)
        assert len(mine) == 2
        for k in mine:
            for name, want in (("turn", waist), ("raise", raised)):
                gap = float(motions[k].value(name)[0]) - want
                assert abs((gap + 180) % 360 - 180) < 1e-8


def test_the_taper_keeps_its_direction() -> None:
    motion = baked("lamplighter")
    for joint in ("grip", "side"):
        assert np.ptp(motion[joint] - motion["flame"], axis=0).max() < 1e-9


# -- the deck on six legs -------------------------------------------------------------------------

FEET = {"east": ("foot_1", "foot_2"), "west": ("foot_3", "foot_4"), "south": ("foot_5", "foot_6")}


def deck(unknowns: Array) -> dict[str, Array]:
    """The deck's joints, turned by three unknowns and moved by three more, in metres."""
    turn = Rotation.from_rotvec(unknowns[3:])
    return {j: turn.apply(drawn("storm_table", j)) + 100 * unknowns[:3] for j in (*FEET, "ship")}


def legs(unknowns: Array, lengths: Array) -> Array:
    """Squared lengths of the six legs less what they should be, in square metres."""
    places = deck(unknowns)
    have = [((places[top] - drawn("storm_table", foot)) ** 2).sum()
            for top, pair in FEET.items() for foot in pair]
    return (np.array(have) - lengths**2) / 1e4


def test_the_deck_follows_its_six_legs() -> None:
    """SciPy's root finder from frame to frame, on the deck's place and turn."""
    motion, drives = baked("storm_table"), given("storm_table").drives
    lengths = np.stack([drives[f"leg_{k}"] for k in range(1, 7)], axis=-1)
    unknowns = np.zeros(6)
    for frame, six in enumerate(lengths):
        unknowns = solution(partial(legs, lengths=six), unknowns)
        assert np.abs(legs(unknowns, six)).max() < 1e-13
        for joint, place in deck(unknowns).items():
            assert np.abs(motion[joint][frame] - place).max() < 1e-9


def test_no_pose_of_the_deck_is_missing() -> None:
    """From many starts SciPy finds what is listed and nothing else; there are sixteen at most (legs
    that meet in pairs above; Faugère and Lazard 1995)."""
    lengths = np.array([126, 128, 112, 108, 104, 110.0])
    found = rp.find_branches(machine("storm_table"), {
        f"leg_{k + 1}": x for k, x in enumerate(lengths)})
    assert len(found) <= 16
    joints = [found.joints.index(j) for j in (*FEET, "ship")]
    rng = np.random.default_rng(11)
    seen: set[int] = set()
    for _ in range(150):
        start = np.concatenate([rng.uniform(-1, 1, 3), rng.uniform(-3, 3, 3)])
        unknowns = solution(partial(legs, lengths=lengths), start)
        if np.abs(legs(unknowns, lengths)).max() > 1e-12:
            continue
        places = np.array(list(deck(unknowns).values()))
        gaps = np.abs(found.positions[:, 0, joints] - places).max(axis=(1, 2))
        assert gaps.min() < 1e-6
        seen.add(int(np.argmin(gaps)))
    assert seen == set(range(len(found)))
