"""Hinges, universals and sliders as they move: each against a formula that stands in books, and in
its own drawing among the poses that are found."""

from __future__ import annotations

import math
from pathlib import Path
from typing import Any

import numpy as np
import pytest

import rigpose as rp
from rigpose.model.equations import Array

PIN = {"pin": True}
Z = [0, 0, 1]


def holds(rig: rp.Rig, found: rp.Branches) -> None:
    """Every pose keeps all bodies, rails and limits, as the judge measures them."""
    assert len(found.positions) > 0
    verdict = rp.judge(rig, found.positions, found.size)
    assert float(np.nanmax(verdict.broken)) <= 1e-11 * found.size
    assert float(np.nanmax(verdict.over, initial=0.0)) <= 1e-9 * found.size


def drawn(rig: rp.Rig) -> Array:
    return np.array([j.at for j in rig.joints])


def rests_among(rig: rp.Rig, drives: dict[str, float]) -> rp.Branches:
    """The branches at the drives of the drawing, one of which is the drawing itself."""
    found = rp.find_branches(rig, drives)
    holds(rig, found)
    gaps = np.abs(found.positions[:, 0] - drawn(rig)).max(axis=(1, 2))
    assert np.sum(gaps < 1e-9 * found.size) == 1
    return found


def place(found: rp.Branches, joint: str) -> Array:
    where: Array = found.positions[:, :, found.joints.index(joint)]
    return where


def parallel_four_bar() -> rp.Rig:
    """Ground 100, crank 40, coupler 120, follower 80, drawn with the crank at 0 degrees, all four
    hinges upright and at different heights."""
    knee_x = (120**2 - 80**2 - 40**2 + 100**2) / (2 * (100 - 40))
    knee_y = math.sqrt(80**2 - (knee_x - 100) ** 2)
    return rp.make_rig(
        {"left": {"at": [0, 0, 0], **PIN}, "tip": [40, 0, 0], "knee": [knee_x, knee_y, 0],
         "right": {"at": [100, 0, 0], **PIN}},
        {"crank": ["left", "tip"], "coupler": ["tip", "knee"], "follower": ["right", "knee"]},
        dim=3, hinges={
            "a": {"parts": ["ground", "crank"], "at": "left", "axis": Z},
            "b": {"parts": ["crank", "coupler"], "at": "tip", "axis": [0, 0, -1]},
            "c": {"parts": ["coupler", "follower"], "at": "knee", "axis": Z},
            "d": {"parts": ["follower", "ground"], "at": "right", "axis": Z}},
        cranks={"input": {"turns": "crank", "about": "a", "zero": [1, 0, 0]},
                "output": {"turns": "follower", "about": "d", "zero": [1, 0, 0]}})


def test_a_door_turns_by_the_right_hand_about_its_hinge() -> None:
    door = rp.make_rig(
        {"post": {"at": [1, 2, 0], **PIN}, "edge": [4, 2, 0], "latch": [4, 2, 2]}, dim=3,
        plates={"leaf": ["post", "edge", "latch"]},
        hinges={"swing": {"parts": ["ground", "leaf"], "at": "post", "axis": [0, 0, -5]}},
        cranks={"turn": {"turns": "leaf", "about": "swing"},
                "north": {"turns": "leaf", "about": "swing", "zero": [0, 1, 0]}})
    found = rests_among(door, {"turn": 0.0})
    assert len(found.positions) == 1
    angles = np.array([0.0, 30.0, 90.0, -90.0, 725.0])
    found = rp.find_branches(door, {"turn": angles})
    holds(door, found)
    # The axis points down, so the door turns from x towards -y.
    turn = np.radians(angles)
    want = np.stack([1 + 3 * np.cos(turn), 2 - 3 * np.sin(turn), np.full(5, 2.0)], axis=-1)
    assert place(found, "latch")[0] == pytest.approx(want, abs=1e-13)
    # Counted from y, x lies a quarter turn on about an axis that points down.
    assert place(rp.find_branches(door, {"north": 90.0}), "edge")[0, 0] == pytest.approx((4, 2, 0))


def test_a_four_bar_of_four_parallel_hinges() -> None:
    """The position example of Norton, Design of Machinery (a 40, b 120, c 80, d 100 mm, crank at
    40 degrees; from memory): the follower stands at 57.324880 or -98.004964 degrees."""
    rig = parallel_four_bar()
    assert len(rests_among(rig, {"input": 0.0}).positions) == 2
    found = rp.find_branches(rig, {"input": 40.0})
    holds(rig, found)
    knee = place(found, "knee")[:, 0] - (100, 0, 0)
    assert sorted(np.degrees(np.arctan2(knee[:, 1], knee[:, 0]))) == pytest.approx(
        [-98.004964, 57.324880], abs=1e-6)
    assert knee[:, 2] == pytest.approx(0, abs=1e-11)
    assert found.found.whole
    assert rp.check(rig).freedoms == 1
    turn = rp.find_branches(rig, {"input": np.linspace(0, 360, 73)})
    holds(rig, turn)
    assert turn.positions.shape[:2] == (2, 73)
    assert not np.isnan(turn.positions).any()


def test_a_four_bar_may_be_driven_between_its_moving_parts() -> None:
    """The same machine, driven by the angle at its knee (A5 of the transmission angle: the law of
    cosines over the open triangle)."""
    rig = parallel_four_bar()
    relative = rp.make_rig(**{**_sections(rig), "cranks": {
        "mu": {"turns": "follower", "from": "coupler", "axis": ["knee", "c axis"], "zero": 0}}})
    found = rp.find_branches(relative, {"mu": 60.0})
    holds(relative, found)
    span = np.linalg.norm(place(found, "tip")[:, 0] - (100, 0, 0), axis=-1)
    assert span == pytest.approx(math.sqrt(120**2 + 80**2 - 120 * 80), rel=1e-12)


def _sections(rig: rp.Rig) -> dict[str, Any]:
    """A hinged rig as plain joints and plates."""
    return {"joints": {j.name: {"at": j.at, "pin": j.pin} for j in rig.joints}, "dim": 3,
            "plates": {p.name: {"joints": p.joints, "shape": p.shape} for p in rig.plates}}


# Bennett's loop

def bennett(first: float, second: float) -> list[Array]:
    """Frames of the four axes of Bennett's loop, ``(4, 4)`` each: lengths 1, 2, 1, 2, twists 30,
    90, 30, 90 degrees, joint angles ``first``, ``second``, and these with the other sign."""
    frames = [np.eye(4)]
    for theta, length, twist in zip((first, second, -first), (1.0, 2.0, 1.0), (30.0, 90.0, 30.0),
                                    strict=True):
        frames.append(frames[-1] @ _link(theta, length, twist))
    return frames


def _link(theta: float, length: float, twist: float) -> Array:
    """Turn about z, go along x, twist about x (Denavit and Hartenberg 1955; from memory)."""
    c, s = math.cos(math.radians(theta)), math.sin(math.radians(theta))
    ca, sa = math.cos(math.radians(twist)), math.sin(math.radians(twist))
    return np.array([[c, -s * ca, s * sa, length * c], [s, c * ca, -c * sa, length * s],
                     [0, sa, ca, 0], [0, 0, 0, 1]])


def bennett_rig() -> tuple[rp.Rig, float]:
    """Drawn with its first angle at 100 degrees, and that angle's partner."""
    first = 100.0
    second = partner(first)
    frames = bennett(first, second)
    points = [f[:3, 3] for f in frames]
    closed = frames[3] @ _link(-second, 2.0, 90.0)
    assert np.abs(closed - np.eye(4)).max() < 1e-14  # the loop closes, as Bennett says
    links = {f"link{k}": [f"p{k}", f"p{(k + 1) % 4}"] for k in range(3)}
    hinged = [("link0", "ground", 0), ("link0", "link1", 1), ("link1", "link2", 2),
              ("link2", "ground", 3)]
    rig = rp.make_rig(
        {f"p{k}": {"at": p, **(PIN if k in (0, 3) else {})} for k, p in enumerate(points)}, links,
        dim=3, hinges={f"h{k}": {"parts": [a, b], "at": f"p{k}", "axis": frames[k][:3, 2]}
                       for a, b, k in hinged},
        cranks={"first": {"turns": "link0", "about": "h0", "zero": [1, 0, 0]},
                # From the link's start, which lies backwards: half a turn less.
                "second": {"turns": "link1", "from": "link0", "about": "h1", "zero": -180}})
    return rig, second


def partner(first: float) -> float:
    """The second joint angle of the loop (Bennett 1903: tan(t1/2) tan(t2/2) = sin((b + a)/2) /
    sin((b - a)/2), here the root of 3; from memory)."""
    return 2 * math.degrees(math.atan(math.sqrt(3) / math.tan(math.radians(first) / 2)))


def test_bennetts_loop_moves_as_its_inventor_says() -> None:
    rig, second = bennett_rig()
    assert second == pytest.approx(110.939448, abs=1e-6)
    rests_among(rig, {"first": 100.0})
    angles = np.array([40.0, 100.0, 160.0, 230.0])
    found = rp.find_branches(rig, {"first": angles})
    holds(rig, found)
    want = np.remainder([partner(a) for a in angles], 360.0)
    assert want == pytest.approx([156.265262, 110.939448, 33.966107, 282.146560], abs=1e-6)
    seconds = np.remainder(second_angles(found), 360.0)
    gaps = np.abs(np.remainder(seconds - want + 180.0, 360.0) - 180.0)
    assert float(np.nanmin(gaps, axis=0).max()) < 1e-9
    assert rp.check(rig).freedoms == 1


def second_angles(found: rp.Branches) -> Array:
    """Degrees from the first link, prolonged, to the second about the second axis."""
    p0, p1, p2, q = (place(found, n) for n in ("p0", "p1", "p2", "h1 axis"))
    axis = (q - p1) / np.linalg.norm(q - p1, axis=-1, keepdims=True)
    a, b = p1 - p0, p2 - p1
    degrees: Array = np.degrees(np.arctan2((axis * np.cross(a, b)).sum(axis=-1),
                                           (a * b).sum(axis=-1)))
    return degrees


# universals and sliders

def test_a_universal_drives_its_second_shaft_unevenly() -> None:
    """Two shafts at 30 degrees: tan(out) = cos(30) tan(in), counted from where the first fork's
    axis is square to both shafts (Hooke's joint in any textbook; from memory)."""
    tilt = math.radians(30)
    along = np.array([math.cos(tilt), math.sin(tilt), 0])
    rig = rp.make_rig(
        {"middle": [0, 0, 0], "first": {"at": [-2, 0, 0], **PIN},
         "second": {"at": 2 * along, **PIN}, "key": [-2, 1, 0], "lug": 2 * along + (0, 0, 1)},
        dim=3, plates={"driver": ["first", "middle", "key"], "driven": ["second", "middle", "lug"]},
        hinges={"in": {"parts": ["ground", "driver"], "at": "first", "axis": [1, 0, 0]},
                "out": {"parts": ["ground", "driven"], "at": "second", "axis": along}},
        universals={"cross": {"parts": ["driver", "driven"], "at": "middle",
                              "axes": [Z, [-math.sin(tilt), math.cos(tilt), 0]]}},
        cranks={"turn": {"turns": "driver", "about": "in"}})
    rests_among(rig, {"turn": 0.0})
    angles = np.array([0.0, 10.0, 45.0, 80.0, 100.0, 200.0])
    found = rp.find_branches(rig, {"turn": angles})
    holds(rig, found)
    lug = place(found, "lug") - 2 * along
    side = np.cross(along, (0, 0, 1.0))
    out = np.arctan2(lug @ side, lug[..., 2])
    want = np.arctan2(math.cos(tilt) * np.sin(np.radians(angles)), np.cos(np.radians(angles)))
    gaps = np.abs(np.remainder(out - want + np.pi, 2 * np.pi) - np.pi)
    assert float(gaps.max(axis=1).min()) < 1e-12


def slider_crank() -> rp.Rig:
    """Crank 40, rod 120, the pin of its block on y = -20: drawn at 60 degrees."""
    tip = [40 * math.cos(math.radians(60)), 40 * math.sin(math.radians(60)), 0]
    x = tip[0] + math.sqrt(120**2 - (tip[1] + 20) ** 2)
    return rp.make_rig(
        {"hub": {"at": [0, 0, 0], **PIN}, "tip": tip, "pin": [x, -20, 0], "top": [x, 5, 7]},
        {"crank": ["hub", "tip"], "rod": ["tip", "pin"], "block": ["pin", "top"]}, dim=3,
        hinges={"a": {"parts": ["ground", "crank"], "at": "hub", "axis": Z},
                "b": {"parts": ["crank", "rod"], "at": "tip", "axis": Z},
                "c": {"parts": ["rod", "block"], "at": "pin", "axis": Z}},
        sliders={"way": {"parts": ["ground", "block"], "at": "pin", "axis": [-3, 0, 0]}},
        cranks={"turn": {"turns": "crank", "about": "a", "zero": [1, 0, 0]}})


def test_a_block_on_a_slider() -> None:
    """The position example of Norton, Design of Machinery (a 40, b 120, offset -20, crank at 60
    degrees; from memory): the pin stands at x = 126.838005 or -86.838005."""
    rig = slider_crank()
    found = rests_among(rig, {"turn": 60.0})
    pins = place(found, "pin")[:, 0]
    assert sorted(pins[:, 0]) == pytest.approx([-86.838005, 126.838005], abs=1e-6)
    assert pins[:, 1:] == pytest.approx(np.array([[-20, 0]] * 2), abs=1e-11)
    # It never turns over: what stands on the block keeps its place beside the pin.
    assert place(found, "top")[:, 0] - pins == pytest.approx(np.array([[0, 25, 7]] * 2), abs=1e-10)


def test_a_driven_slider_counts_from_its_drawing_along_its_axis() -> None:
    rig = slider_crank()
    found = rp.find_branches(rig, {"way": np.array([0.0, 30.0])})
    holds(rig, found)
    assert place(found, "pin")[:, :, 0] == pytest.approx(
        np.array([[126.838005, 96.838005]] * len(found.positions)), abs=1e-6)


def test_a_rod_that_slides_in_a_part_that_swings() -> None:
    """The rod stands 2 + value from the pivot of its guide, in the guide's own direction."""
    rig = rp.make_rig(
        {"pivot": {"at": [0, 0, 1], **PIN}, "mouth": [1, 0, 1], "eye": [2, 0, 1],
         "hook": [2, 1, 3]}, {"guide": ["pivot", "mouth"], "rod": ["eye", "hook"]}, dim=3,
        hinges={"swing": {"parts": ["ground", "guide"], "at": "pivot", "axis": [0, -1, 0]}},
        sliders={"reach": {"parts": ["guide", "rod"], "at": "eye", "axis": [1, 0, 0],
                           "range": [-1, 3]}},
        cranks={"lift": {"turns": "guide", "about": "swing"}})
    assert len(rests_among(rig, {"lift": 0.0, "reach": 0.0}).positions) == 1
    angle, way = np.array([0.0, 30.0, 90.0]), np.array([-0.5, 0.0, 2.0])
    found = rp.find_branches(rig, {"lift": angle, "reach": way})
    holds(rig, found)
    c, s = np.cos(np.radians(angle)), np.sin(np.radians(angle))
    eye = np.stack([(2 + way) * c, 0 * c, 1 + (2 + way) * s], axis=-1)
    assert place(found, "eye")[0] == pytest.approx(eye, abs=1e-12)
    # The hook stands (0, 1, 2) from the eye and turns with the guide.
    assert place(found, "hook")[0] == pytest.approx(
        eye + np.stack([-2 * s, 1 + 0 * c, 2 * c], axis=-1), abs=1e-11)


# limits, planes, copies

def test_a_limit_about_a_hinge_chooses_the_bend() -> None:
    rig = parallel_four_bar()
    sections = _sections(rig)
    both = 0
    for low, high in ((-180, 0), (0, 180)):
        limited = rp.make_rig(**sections, cranks={
            "input": {"turns": "crank", "axis": ["left", "a axis"], "zero": [1, 0, 0]}},
            limits={"bend": {"from": "coupler", "to": "follower", "at": "knee",
                             "axis": ["knee", "c axis"], "range": [low, high]}})
        found = rp.find_branches(limited, {"input": 40.0})
        holds(limited, found)
        knee = place(found, "knee")[:, 0]
        # From the coupler (towards the tip) to the follower (towards the ground joint).
        u, v = place(found, "tip")[:, 0] - knee, np.array([100, 0, 0]) - knee
        turn = np.degrees(np.arctan2(np.cross(u, v)[:, 2], (u * v).sum(axis=1)))
        assert ((turn >= low) & (turn <= high)).all()
        both += len(found.positions)
    assert both == 2


def test_a_joint_in_a_plane() -> None:
    """A tripod's top at given distances from two feet, in a plane: two places by Pythagoras."""
    rig = rp.make_rig(
        {"a": {"at": [-3, 0, 0], **PIN}, "b": {"at": [3, 0, 0], **PIN}, "top": [0, 0, 4]},
        {"left": ["a", "top"], "right": ["b", "top"]}, dim=3,
        rails={"wall": {"joint": "top", "through": [9, 0, 0], "normal": [0, -7, 0]}})
    found = rests_among(rig, {})
    assert sorted(place(found, "top")[:, 0, 2]) == pytest.approx([-4, 4])


def test_mirrored_legs_stand_alike_at_the_same_drives(tmp_path: Path) -> None:
    """A leg and its mirror image in x: at the same values of their cranks and sliders the one pose
    is the other's mirror image."""
    (tmp_path / "leg.toml").write_text("""rigpose = 1
dim = 3
[joints]
hip = { at = [1, 0, 3], pin = true }
knee = [2, 1, 2]
toe = [2, 0.5, 0]
cap = [2, 0.75, 1]
shoe = [2.5, 1, 0]
[bones]
thigh = ["hip", "knee"]
shin = ["knee", "toe"]
foot = ["cap", "shoe"]
[hinges]
hip = { parts = ["ground", "thigh"], at = "hip", axis = [1, 0.5, 0] }
knee = { parts = ["thigh", "shin"], at = "knee", axis = [1, 0, 0.25] }
[sliders]
spring = { parts = ["shin", "foot"], at = "cap", axis = [0, 0.25, 1] }
[cranks]
raise = { turns = "thigh", about = "hip", zero = [0, 0, -1] }
fold = { turns = "shin", from = "thigh", about = "knee" }
""", encoding="utf-8")
    (tmp_path / "walker.toml").write_text(
        'rigpose = 1\ndim = 3\n[copies]\nport = { of = "leg.toml" }\n'
        'star = { of = "leg.toml", mirror = "x" }\n', encoding="utf-8")
    rig = rp.load_rig(tmp_path / "walker.toml")
    wish = {"raise": [-10.0, 20.0], "fold": [5.0, -40.0], "spring": [0.1, -0.2]}
    found = rp.find_branches(rig, {f"{side}/{name}": np.array(values) for side in ("port", "star")
                                   for name, values in wish.items()})
    holds(rig, found)
    assert len(found.positions) == 1
    for joint in rp.load_rig(tmp_path / "leg.toml").joint_names:
        assert place(found, f"star/{joint}") == pytest.approx(
            place(found, f"port/{joint}") * (-1, 1, 1), abs=1e-12)


def test_ties_between_angles_and_ways() -> None:
    """Two flaps geared one to two, the second with a screw of 3 a turn: 40 degrees of the first
    are -20 of the second, and 40 / 360 * 3 on the slide."""
    rig = rp.make_rig(
        {"a": {"at": [0, 0, 0], **PIN}, "a tip": [1, 0, 0], "b": {"at": [5, 0, 0], **PIN},
         "b tip": [5, 1, 0], "nut": [0, 0, 2], "arm": [0, 1, 2]}, dim=3,
        bones={"first": ["a", "a tip"], "second": ["b", "b tip"], "carriage": ["nut", "arm"]},
        hinges={"ha": {"parts": ["ground", "first"], "at": "a", "axis": Z},
                "hb": {"parts": ["ground", "second"], "at": "b", "axis": [1, 0, 0]}},
        sliders={"slide": {"parts": ["ground", "carriage"], "at": "nut", "axis": Z}},
        cranks={"one": {"turns": "first", "about": "ha"},
                "two": {"turns": "second", "about": "hb"}},
        ties={"gear": {"sum": {"one": 1, "two": 2}},
              "screw": {"sum": {"one": "3 / 360", "slide": -1}}})
    rests_among(rig, {"one": 0.0})
    found = rp.find_branches(rig, {"one": 40.0})
    holds(rig, found)
    turn = math.radians(-20)
    assert place(found, "b tip")[:, 0] == pytest.approx(np.array([[
        5, math.cos(turn), math.sin(turn)]]), abs=1e-12)
    assert place(found, "arm")[:, 0] == pytest.approx(np.array([[0, 1, 2 + 1 / 3]]), abs=1e-12)


def test_a_lamp_on_gimbals() -> None:
    """A universal on the ground: the cross turns about x by 30 degrees, the lamp in it by 40."""
    rig = rp.make_rig(
        {"middle": [0, 0, 5], "wick": [0, 0, 3]}, {"lamp": ["middle", "wick"]}, dim=3,
        universals={"ring": {"parts": ["ground", "lamp"], "at": "middle",
                             "axes": [[1, 0, 0], [0, 1, 0]]}},
        cranks={"roll": {"turns": "ring", "axis": ["middle", "ring axis 1"]},
                "pitch": {"turns": "lamp", "from": "ring", "axis": ["middle", "ring axis 2"]}})
    assert [j.name for j in rig.joints if j.pin] == ["middle", "ring axis 1"]
    rests_among(rig, {"roll": 0.0, "pitch": 0.0})
    found = rp.find_branches(rig, {"roll": 30.0, "pitch": 40.0})
    holds(rig, found)
    r, p = math.radians(30), math.radians(40)
    turn = np.array([[1, 0, 0], [0, math.cos(r), -math.sin(r)], [0, math.sin(r), math.cos(r)]])
    tilt = np.array([[math.cos(p), 0, math.sin(p)], [0, 1, 0], [-math.sin(p), 0, math.cos(p)]])
    assert place(found, "wick")[:, 0] == pytest.approx(
        (turn @ tilt @ (0, 0, -2) + (0, 0, 5))[None], abs=1e-12)


# written out flat

@pytest.mark.parametrize("name", ["gull_leg", "lamplighter", "market_canopy", "weather_loop"])
def test_a_rig_with_hinges_written_out_flat_is_the_same_machine(tmp_path: Path, name: str) -> None:
    """The same parts, the same fingerprint and, in its shot's first frame, the same poses; what
    hinges made is the flat file's own."""
    shot = rp.load_shot(Path(__file__).resolve().parent.parent / "rigs" / f"{name}.shot.toml")
    rig = shot.rig
    assert rig.helper_joints
    path = tmp_path / "flat.toml"
    path.write_text(rp.flat_text(rig), encoding="utf-8")
    flat = rp.load_rig(path)
    kept = ("joints", "bones", "plates", "rails", "rams", "cranks", "limits", "ties", "planes",
            "frozen", "fingerprint", "joint_names")
    assert [k for k in kept if getattr(flat, k) != getattr(rig, k)] == []
    assert rp.flat_text(flat) == rp.flat_text(rig)
    assert (flat.helper_joints, flat.own_joints) == (frozenset(), rig.joint_names)
    first = rp.bake(shot).knowns
    drives = {n: float(v[0]) for n, v in first.drives.items()}
    targets = {n: v[0] for n, v in first.targets.items()}
    one, other = (rp.find_branches(r, drives, targets) for r in (rig, flat))
    assert len(one) > 0
    np.testing.assert_array_equal(one.positions, other.positions)


def test_rigs_that_differ_in_their_helpers_alone_are_not_one(tmp_path: Path) -> None:
    """Else what is kept of the one would be told in the words of the other."""
    rig = rp.make_rig({"post": {"at": [0, 0, 0], **PIN}, "edge": [3, 0, 0], "latch": [3, 0, 2]},
                      dim=3, plates={"leaf": ["post", "edge", "latch"]},
                      hinges={"swing": {"parts": ["ground", "leaf"], "at": "post", "axis": Z}})
    plain = rp.make_rig(**_sections(rig))
    assert plain.joints == rig.joints
    assert plain != rig
    assert hash(plain.joints[-1]) == hash(rig.joints[-1])
    assert plain.own_joints == (*rig.own_joints, "swing axis")
