"""Rigs in space as files: hinges, universals, sliders and planes, cranks and limits about an axis.

Expected places and angles are worked out by hand from the numbers in the files, or measured in the
test by formulas of its own; none comes from the program.
"""

from __future__ import annotations

import json
import math
import tomllib
from pathlib import Path

import numpy as np
import pytest

from rigpose.files.flat import flat_text
from rigpose.files.rigfile import load_rig
from rigpose.files.schema import rig_schema
from rigpose.files.start import start_text
from rigpose.ground.errors import BadInput
from rigpose.model.equations import Array
from rigpose.model.make import make_rig
from rigpose.model.rig import Crank, Limit, Pair, Plate, Rig, Tie
from rigpose.model.spec import IN_SPACE

LEG = """rigpose = 1
dim = 3
[joints]
heel = { at = [0, 0, 0], pin = true }
hip = [0, 0, 4]
knee = [3, 0, 4]
toe = [3, 0, 0]
far = [6, 8, 0]
lost = {}
[bones]
thigh = ["hip", "knee"]
shin = ["knee", "toe"]
spare = { ends = ["toe", "far"], play = 1e-3 }
loose = { ends = ["toe", "lost"], length = 3 }
[rams]
ram = { ends = ["heel", "knee"], range = [1, 9] }
"""
"""Its extent, from hip to far, is the root of 36 + 64 + 16; from heel to far it is 10."""
EXTENT = math.sqrt(116)
KNEE = '[hinges]\nfold = { parts = ["thigh", "shin"], at = "knee", axis = [0, -2, 0] }\n'

EVERY_KEY = """
rigpose = 1
dim = 3
name = "lock gate"
[sizes]
leaf = 4
[joints]
post = { at = [0, 0, 0], pin = true }
edge = ["leaf", 0, 0]
strut = [4, 3, 0]
wall = { at = [0, 6, 0], pin = true }
crate = [2, 2, 3]
lid = [2, 2, 4]
rider = [1, 1, 1]
keel = [1, 2, 0]
tail = [8, 6, 0]
[bones]
gate = ["post", "edge"]
arm = ["edge", "strut"]
lift = ["crate", "lid"]
boom = ["strut", "tail"]
[rails]
way = { joint = "rider", through = [1, 1, 1], direction = [0, 0, 2], range = [-1, 1] }
floor = { joint = "keel", through = [0, 0, 0], normal = [0, 0, 3], note = "the sill" }
slot = { joint = "tail", along = ["edge", "strut"] }
[planes]
wharf = { joints = ["rider", "keel"], through = [1, "leaf", 1], normal = [2, 0, 0], layer = 2 }
[hinges]
swing = { parts = ["ground", "gate"], at = "post", axis = [0, 0, "leaf"], note = "pintle" }
fold = { parts = ["gate", "arm"], at = "edge", axis = [0, 0, 1] }
[universals]
yoke = { parts = ["arm", "boom"], at = "strut", axes = [[0, 0, 1], [0, 3, 0]] }
[sliders]
hoist = { parts = ["boom", "lift"], at = "crate", axis = [0, 0, 1], range = [0, "leaf / 2"] }
[cranks]
turn = { turns = "gate", about = "swing", zero = [1, 0, 0], range = [-90, 90] }
knuckle = { turns = "arm", from = "gate", about = "fold", zero = "90 / 3" }
nod = { turns = "boom", from = "yoke", axis = ["strut", "yoke axis 2"], line = ["strut", "tail"], \
from_line = ["strut", "yoke axis 1"] }
lean = { turns = "arm", axis = ["edge", "fold axis"], toward = [1, 1, 0], zero = 10 }
plain = { turns = "arm", about = "fold" }
[limits]
stop = { from = "gate", to = "arm", at = "fold", range = [-10, 170] }
jamb = { from = "ground", to = "gate", axis = ["post", "swing axis"], at = "post", \
from_line = ["post", "wall"], to_line = ["post", "edge"], range = [-170, 0] }
open = { from = "arm", to = "gate", at = "edge", range = [0, 180], either = true }
"""


def load(folder: Path, text: str) -> Rig:
    (folder / "leg.toml").write_text(text, encoding="utf-8")
    return load_rig(folder / "leg.toml")


def refusal(folder: Path, text: str) -> str:
    with pytest.raises(BadInput) as told:
        load(folder, text)
    return str(told.value)


def at(rig: Rig, joint: str) -> tuple[float, ...]:
    place = rig.joints[rig.index[joint]].at
    assert place is not None
    return place


def plate(rig: Rig, name: str) -> Plate:
    return next(p for p in rig.plates if p.name == name)


def way(body: Plate, a: str, b: str) -> Array:
    """From one joint of a plate to another, in the plate's own frame."""
    shape = np.array(body.shape)
    found: Array = shape[body.joints.index(b)] - shape[body.joints.index(a)]
    return found


def crank(rig: Rig, name: str) -> Crank:
    return next(c for c in rig.cranks if c.name == name)


# hinges

def test_a_hinge_becomes_a_joint_on_its_axis_that_both_parts_carry(tmp_path: Path) -> None:
    rig = load(tmp_path, LEG + KNEE)
    assert rig.joint_names[-1] == "fold axis"
    assert at(rig, "fold axis") == (3.0, 0.0 - EXTENT / 10, 4.0)
    assert [b.name for b in rig.bones] == ["spare", "loose"]
    assert [(p.name, p.joints) for p in rig.plates] == [
        ("thigh", ("hip", "knee", "fold axis")), ("shin", ("knee", "toe", "fold axis"))]
    thigh, shin = rig.plates
    assert way(thigh, "hip", "knee").tolist() == [3, 0, 0]
    assert way(shin, "knee", "toe").tolist() == [0, 0, -4]
    for body in rig.plates:
        assert way(body, "knee", "fold axis") == pytest.approx((0, -EXTENT / 10, 0), abs=1e-15)


def test_the_ground_is_pinned_where_it_is_hinged(tmp_path: Path) -> None:
    rig = load(tmp_path, LEG + '[hinges]\nstand = { parts = ["shin", "ground"], at = "toe", '
               'axis = [1, 0, 0], note = "in the sill", layer = 3, skin = "brass" }\n')
    toe, helper = rig.joints[rig.index["toe"]], rig.joints[rig.index["stand axis"]]
    assert toe.pin
    assert helper.pin
    assert at(rig, "stand axis") == (3 + EXTENT / 10, 0, 0)
    assert (helper.note, helper.layer, helper.skin) == ("in the sill", 3, "brass")
    assert plate(rig, "shin").joints == ("knee", "toe", "stand axis")


def test_a_length_wins_over_the_drawing_and_the_axis_stays_where_it_is_drawn(
        tmp_path: Path) -> None:
    text = LEG.replace('shin = ["knee", "toe"]',
                       'shin = { ends = ["toe", "knee"], length = 5, note = "n" }')
    rig = load(tmp_path, text + KNEE)
    shin = plate(rig, "shin")
    assert shin.note == "n"
    assert way(shin, "toe", "knee").tolist() == [0, 0, 5]
    assert way(shin, "knee", "fold axis") == pytest.approx((0, -EXTENT / 10, 0), abs=1e-15)


def test_a_part_that_lacks_the_joint_gets_it(tmp_path: Path) -> None:
    rig = load(tmp_path, LEG + '[hinges]\nh = { parts = ["thigh", "ground"], at = "toe", '
               "axis = [0, 0, 1] }\n")
    thigh = plate(rig, "thigh")
    assert thigh.joints == ("hip", "knee", "toe", "h axis")
    assert way(thigh, "knee", "toe").tolist() == [0, 0, -4]
    assert way(thigh, "hip", "toe").tolist() == [3, 0, -4]
    assert way(thigh, "toe", "h axis") == pytest.approx((0, 0, EXTENT / 10), abs=1e-15)


def test_an_axis_is_turned_into_the_frame_of_a_plate_with_a_shape_of_its_own() -> None:
    """The plate is drawn a quarter turn about z on from its own frame, and shifted."""
    shape = [[0, 0, 0], [2, 0, 0], [0, 3, 0], [0, 0, 1]]
    places = [[5 - y, 7 + x, 9 + z] for x, y, z in shape]
    rig = make_rig({**dict(zip("abcd", places, strict=True)), "e": {"at": [8, 8, 8], "pin": True}},
                   {"post": ["a", "e"]}, dim=3, plates={"p": {"joints": list("abcd"),
                                                              "shape": shape}},
                   hinges={"h": {"parts": ["p", "post"], "at": "a", "axis": [0, 1, 0]},
                           "k": {"parts": ["p", "ground"], "at": "e", "axis": [0, 0, -1]}})
    body = plate(rig, "p")
    far = max(math.dist(p, q) for p in [*places, [8, 8, 8]] for q in places) / 10
    assert way(body, "a", "h axis") == pytest.approx((far, 0, 0), abs=1e-14)
    # From a at (5, 7, 9) to e at (8, 8, 8) is (3, 1, -1) in the drawing, (1, -3, -1) in its frame.
    assert way(body, "a", "e") == pytest.approx((1, -3, -1), abs=1e-14)
    assert way(body, "e", "k axis") == pytest.approx((0, 0, -far), abs=1e-14)
    assert way(body, "a", "b").tolist() == [2, 0, 0]


def test_three_parts_on_one_axis_have_joints_of_their_own_on_it(tmp_path: Path) -> None:
    """No two joints of a plate stand at one place: the second comes at half the way."""
    rig = load(tmp_path, LEG + KNEE + 'more = { parts = ["thigh", "ground"], at = "knee", '
               "axis = [0, -1, 0] }\n")
    assert at(rig, "more axis") == (3, -EXTENT / 20, 4)
    assert plate(rig, "thigh").joints == ("hip", "knee", "fold axis", "more axis")
    assert load(tmp_path, flat_text(rig)).fingerprint == rig.fingerprint


# universals and sliders

def test_a_universal_is_a_cross_with_one_axis_in_each_part(tmp_path: Path) -> None:
    rig = load(tmp_path, LEG + '[universals]\nyoke = { parts = ["thigh", "shin"], at = "knee", '
               "axes = [[0, 2, 0], [1, 0, 0]] }\n")
    far = EXTENT / 10
    assert [(p.name, p.joints) for p in rig.plates] == [
        ("yoke", ("knee", "yoke axis 1", "yoke axis 2")),
        ("thigh", ("hip", "knee", "yoke axis 1")), ("shin", ("knee", "toe", "yoke axis 2"))]
    assert at(rig, "yoke axis 1") == (3, far, 4)
    assert at(rig, "yoke axis 2") == (3 + far, 0, 4)
    assert np.array(plate(rig, "yoke").shape) == pytest.approx(
        np.array([[0, 0, 0], [0, far, 0], [far, 0, 0]]), abs=1e-15)


def test_a_slider_on_the_ground(tmp_path: Path) -> None:
    rig = load(tmp_path, LEG + '[sliders]\nlift = { parts = ["ground", "shin"], at = "toe", '
               "axis = [0, 2, 0], range = [0, 3] }\n")
    far = EXTENT / 10
    assert plate(rig, "shin").joints == ("knee", "toe", "lift axis", "lift side")
    assert at(rig, "lift axis") == (3, far, 0)
    # Half as far along, and as far beside it; which side is of no account.
    beside = np.array(at(rig, "lift side")) - (3, far / 2, 0)
    assert beside @ (0, 1, 0) == pytest.approx(0, abs=1e-15)
    assert math.hypot(*beside) == pytest.approx(far)
    assert [(r.name, r.joint, r.through, r.direction, r.range) for r in rig.rails] == [
        ("lift", "toe", (3, 0, 0), (0, 1, 0), (0, 3)),
        ("lift axis", "lift axis", (3, 0, 0), (0, 1, 0), None),
        ("lift side", "lift side", at(rig, "lift side"), (0, 1, 0), None)]
    # The two on one line keep their order: the part doesn't turn over.
    assert rig.ties == (Tie(name="lift axis", sum=(("lift axis", 1.0), ("lift", -1.0)),
                            equals=far),)
    assert load(tmp_path, LEG + '[sliders]\nlift = { parts = ["shin", "ground"], at = "toe", '
                "axis = [0, 2, 0], range = [0, 3] }\n") == rig


def test_a_slider_on_a_part_that_moves(tmp_path: Path) -> None:
    rig = load(tmp_path, LEG + '[sliders]\nlift = { parts = ["thigh", "shin"], at = "toe", '
               "axis = [0, 1, 0] }\n")
    assert plate(rig, "thigh").joints == (
        "hip", "knee", "lift start", "lift end", "lift side start", "lift side end")
    assert plate(rig, "shin").joints == ("knee", "toe", "lift axis", "lift side")
    assert [r.along for r in rig.rails] == [("lift start", "lift end"), ("lift start", "lift end"),
                                            ("lift side start", "lift side end")]
    assert at(rig, "lift start") == at(rig, "toe")
    assert at(rig, "lift side start") == at(rig, "lift side")
    for line in (("lift start", "lift end"), ("lift side start", "lift side end")):
        ahead = np.array(at(rig, line[1])) - at(rig, line[0])
        assert ahead == pytest.approx((0, EXTENT / 10, 0), abs=1e-15)
    assert load(tmp_path, flat_text(rig)).fingerprint == rig.fingerprint


def test_a_slider_uses_the_carriers_own_joint_where_it_has_one_there(tmp_path: Path) -> None:
    text = LEG.replace("lost = {}", "lost = {}\nsole = [3, 0, 0]").replace(
        "[rams]", 'sledge = ["heel", "sole"]\n[rams]')
    rig = load(tmp_path, text + '[sliders]\nlift = { parts = ["sledge", "shin"], at = "toe", '
               "axis = [0, 1, 0] }\n")
    assert rig.rails[0].along == ("sole", "lift end")
    assert load(tmp_path, flat_text(rig)).fingerprint == rig.fingerprint


# planes

def test_planes_and_rails_in_planes(tmp_path: Path) -> None:
    rig = load(tmp_path, LEG + '[planes]\nside = { joints = ["knee", "toe"], through = [3, 0, 4], '
               'normal = [0, "2 * 3", 0] }\n[rails]\nfloor = { joint = "toe", through = [0, 0, 0], '
               "normal = [0, 0, 5] }\n")
    assert [(p.name, p.joints, p.through, p.normal) for p in rig.planes] == [
        ("side", ("knee", "toe"), (3, 0, 4), (0, 1, 0)), ("floor", ("toe",), (0, 0, 0), (0, 0, 1))]
    assert rig.rails == ()
    assert "floor" not in rig.drive_names


# cranks and limits

def test_cranks_about_a_hinge_and_about_two_joints(tmp_path: Path) -> None:
    rig = load(tmp_path, LEG + KNEE + """[cranks]
flex = { turns = "shin", from = "thigh", about = "fold" }
same = { turns = "shin", from = "thigh", axis = ["fold axis", "knee"], zero = 30, range = [0, 90] }
low = { turns = "shin", about = "fold", zero = [1, 0, 1] }
drawn = { turns = "thigh", about = "fold", zero = 5 }
down = { turns = "shin", about = "fold", toward = [0, 0, -2] }
rest = { turns = "shin", about = "fold", toward = [0, 0, -2], zero = "rest" }
mast = { turns = "loose", axis = ["heel", "hip"] }
""")
    flex, same, low, drawn, down, rest, mast = rig.cranks
    assert (flex.axis, flex.line, flex.base, flex.zero, flex.toward) == (
        ("knee", "fold axis"), ("knee", "toe"), ("knee", "hip"), "rest", None)
    assert (same.axis, same.line, same.base, same.zero, same.range) == (
        ("fold axis", "knee"), ("fold axis", "toe"), ("fold axis", "hip"), 30, (0, 90))
    assert (low.base, low.zero) == (None, 0)
    assert low.toward == pytest.approx((math.sqrt(0.5), 0, math.sqrt(0.5)), abs=1e-15)
    # Without a direction: where the part points, square to the axis. The hip lies at (-3, 0, 0).
    assert (drawn.line, drawn.zero, drawn.toward) == (("knee", "hip"), 5, (-1, 0, 0))
    assert (down.zero, down.toward) == (0, (0, 0, -1))
    assert (rest.zero, rest.toward) == ("rest", (0, 0, -1))
    # A ball-jointed bone about an axis that it doesn't carry; the joint without a place is no
    # pointer. The toe lies at (3, 0, 0) from the mast.
    assert (mast.line, mast.toward) == (("heel", "toe"), (1, 0, 0))


def test_a_pointer_lies_well_off_the_axis(tmp_path: Path) -> None:
    """A joint that rounding has left beside the axis shows no turn; the next one does."""
    text = LEG.replace("far = [6, 8, 0]", "far = [6, 8, 0]\nnear = [3.0001, 2, 4]\nup = [3, 1, 6]")
    rig = load(tmp_path, text + '[plates]\nwing = ["knee", "near", "up"]\n' + KNEE
               + '[cranks]\nc = { turns = "wing", about = "fold" }\n')
    assert rig.cranks[0].line == ("knee", "up")


def test_limits_about_a_hinge_and_an_axis(tmp_path: Path) -> None:
    rig = load(tmp_path, LEG + KNEE + """[limits]
bend = { from = "thigh", to = "shin", at = "fold", range = [-160, -5] }
free = { from = "thigh", to = "shin", at = "fold", range = [5, 160], either = true }
line = { from = "thigh", to = "shin", at = "knee", axis = ["knee", "far"], range = [0, 90] }
floor = { from = "ground", to = "shin", at = "fold", range = [0, 180] }
open = { from = "thigh", to = "shin", at = "knee", range = [10, 170], either = true }
""")
    def told(x: Limit) -> tuple[Pair | None, Pair, Pair, str, bool]:
        return x.axis, x.first, x.second, x.at, x.either

    fold, hip, toe = ("knee", "fold axis"), ("knee", "hip"), ("knee", "toe")
    assert [told(x) for x in rig.limits] == [
        (fold, hip, toe, "knee", False), (fold, hip, toe, "knee", True),
        (("knee", "far"), hip, toe, "knee", False),
        (fold, ("knee", "heel"), toe, "knee", False),
        # A bone that was hinged still is the line of its two ends.
        (None, hip, toe, "knee", True)]
    assert [x.range for x in rig.limits] == [(-160, -5), (5, 160), (0, 90), (0, 180), (10, 170)]


def test_a_hinge_and_its_joint_may_have_one_name(tmp_path: Path) -> None:
    rig = load(tmp_path, LEG + KNEE.replace("fold", "knee") + '[cranks]\nc = { turns = "shin", '
               'about = "knee" }\n[limits]\nl = { from = "thigh", to = "shin", at = "knee", '
               "range = [0, 90] }\n")
    assert rig.cranks[0].axis == ("knee", "knee axis")
    assert rig.limits[0].axis == ("knee", "knee axis")


# flat and JSON

def test_the_example_has_every_key() -> None:
    document = tomllib.loads(EVERY_KEY)
    definitions = rig_schema()["$defs"]
    for section in (*IN_SPACE, "cranks", "limits", "rails"):
        keys = set(definitions[f"{section[:-1].title()}Spec"]["properties"])
        seen = {key for part in document[section].values() for key in part}
        assert keys - seen - {"note", "layer", "skin", "about"} == set(), section


@pytest.mark.parametrize("suffix", ["toml", "json"])
def test_flat_holds_everything_and_reads_back(tmp_path: Path, suffix: str) -> None:
    data = tomllib.loads(EVERY_KEY)
    text = EVERY_KEY if suffix == "toml" else json.dumps(data)
    (tmp_path / f"gate.{suffix}").write_text(text, encoding="utf-8")
    rig = load_rig(tmp_path / f"gate.{suffix}")
    flat = flat_text(rig)
    assert {"hinges", "universals", "sliders"} & set(tomllib.loads(flat)) == set()
    again = load(tmp_path, flat)
    kept = ("joints", "bones", "plates", "rails", "rams", "cranks", "limits", "ties", "planes",
            "frozen", "fingerprint")
    assert [k for k in kept if getattr(again, k) != getattr(rig, k)] == []
    assert flat_text(again) == flat
    assert make_rig(**{k: v for k, v in data.items() if k != "rigpose"}
                    ).fingerprint == rig.fingerprint


def test_what_is_written_of_a_gate(tmp_path: Path) -> None:
    """The parts that the example's sections make, by name; all that the file says of them."""
    rig = load(tmp_path, EVERY_KEY)
    assert [p.name for p in rig.plates] == ["yoke", "gate", "arm", "boom", "lift"]
    assert [r.name for r in rig.rails] == ["hoist", "hoist axis", "hoist side", "way", "slot"]
    assert [(p.name, p.note, p.layer) for p in rig.planes] == [
        ("wharf", "", 2), ("floor", "the sill", 0)]
    assert rig.joints[rig.index["swing axis"]].note == "pintle"
    nod = crank(rig, "nod")
    assert (nod.line, nod.base, nod.base_part) == (
        ("strut", "tail"), ("strut", "yoke axis 1"), "yoke")
    jamb = rig.limits[1]
    assert (jamb.first, jamb.second, jamb.first_part) == (
        ("post", "wall"), ("post", "edge"), "ground")


# copies

def turned(a: Array, axis: Array, b: Array) -> float:
    """Degrees from a to b about an axis by the right hand, each seen along the axis."""
    u = axis / np.linalg.norm(axis)
    flat_a, flat_b = (v - (v @ u) * u for v in (a, b))
    return math.degrees(math.atan2(u @ np.cross(flat_a, flat_b), flat_a @ flat_b))


def value(rig: Rig, x: Array, part: Crank | Limit) -> float:
    """The value of a crank (counted from 0) or limit in a pose ``(n_joints, 3)``."""
    assert part.axis is not None
    p, q = (x[rig.index[j]] for j in part.axis)
    if isinstance(part, Limit):
        first, second = (x[rig.index[b]] - x[rig.index[a]] for a, b in (part.first, part.second))
        return turned(first, q - p, second)
    start = np.array(part.toward) if part.base is None else x[rig.index[part.base[1]]] - p
    return turned(start, q - p, x[rig.index[part.line[1]]] - p)


def about_an_axis(rig: Rig) -> list[Crank | Limit]:
    return [*rig.cranks, *(x for x in rig.limits if x.axis is not None)]


MIRRORS = [("", np.eye(3)), ('mirror = "x", ', np.diag([-1.0, 1, 1])),
           ('mirror = "y", ', np.diag([1.0, -1, 1])), ('mirror = "z", ', np.diag([1.0, 1, -1]))]
TURN = np.array([[0.0, -1, 0], [1, 0, 0], [0, 0, 1]])
"""A quarter turn about z."""


@pytest.mark.parametrize(("mirror", "sign"), MIRRORS, ids=["plain", "x", "y", "z"])
def test_cranks_and_limits_of_a_copy_have_the_same_values_in_the_same_pose(
        tmp_path: Path, mirror: str, sign: Array) -> None:
    """Any pose of the file, mirrored and turned as the copy is, gives the copy the same values."""
    gate = load(tmp_path, EVERY_KEY)
    (tmp_path / "gate.toml").write_text(EVERY_KEY, encoding="utf-8")
    quay = load(tmp_path, 'rigpose = 1\ndim = 3\nunit = "cm"\n[copies]\nwest = { of = "gate.toml", '
                f"{mirror}turn = 90, at = [10, 20, 30] }}\n")
    pose = np.random.default_rng(3).normal(size=(len(gate.joints), 3))
    there = np.array([10.0, 20, 30]) + 100 * pose @ sign @ TURN.T
    assert quay.joint_names == tuple(f"west/{j}" for j in gate.joint_names)
    assert [c.zero for c in quay.cranks] == [c.zero for c in gate.cranks]
    for own, copy in zip(about_an_axis(gate), about_an_axis(quay), strict=True):
        assert value(quay, there, copy) == pytest.approx(value(gate, pose, own), abs=1e-10)
        assert copy.range == own.range
    for sheet, moved in zip(gate.planes, quay.planes, strict=True):
        for joint in sheet.joints:
            off = (pose[gate.index[joint]] - sheet.through) @ np.array(sheet.normal)
            far = (there[quay.index[f"west/{joint}"]] - moved.through) @ np.array(moved.normal)
            assert far == pytest.approx(100 * off, abs=1e-10)
    assert load(tmp_path, flat_text(quay)).fingerprint == quay.fingerprint


@pytest.mark.parametrize(("mirror", "sign"), MIRRORS, ids=["plain", "x", "y", "z"])
def test_helper_joints_and_bodies_of_a_copy_move_and_mirror_with_it(
        tmp_path: Path, mirror: str, sign: Array) -> None:
    gate = load(tmp_path, EVERY_KEY)
    (tmp_path / "gate.toml").write_text(EVERY_KEY, encoding="utf-8")
    quay = load(tmp_path, 'rigpose = 1\ndim = 3\n[copies]\nwest = { of = "gate.toml", '
                f"{mirror}turn = 90 }}\n")
    for joint in gate.joint_names:
        moved = TURN @ sign @ np.array(at(gate, joint))
        assert at(quay, f"west/{joint}") == pytest.approx(moved, abs=1e-14)
    for own, copy in zip(gate.plates, quay.plates, strict=True):
        shape = np.array(own.shape) @ sign @ TURN.T
        assert np.array(copy.shape) == pytest.approx(shape, abs=1e-14)
    for rail, moved_rail in zip(gate.rails, quay.rails, strict=True):
        if rail.direction is not None:
            assert moved_rail.direction == pytest.approx(TURN @ sign @ np.array(rail.direction))


def test_a_sliders_tie_holds_in_the_copys_unit(tmp_path: Path) -> None:
    (tmp_path / "lift.toml").write_text(LEG.replace("dim = 3", 'dim = 3\nunit = "cm"')
                                        + '[sliders]\nlift = { parts = ["ground", "shin"], '
                                        'at = "toe", axis = [0, 1, 0] }\n', encoding="utf-8")
    rig = load(tmp_path, 'rigpose = 1\ndim = 3\n[copies]\na = { of = "lift.toml", mirror = "y" }\n')
    (tie,) = rig.ties
    helper, toe = at(rig, "a/lift axis"), at(rig, "a/toe")
    ways = {r.name: float(np.dot(np.array(at(rig, r.joint)) - np.array(r.through or ()),
                                 r.direction or ())) for r in rig.rails}
    assert math.dist(helper, toe) == pytest.approx(EXTENT / 1000)
    assert math.fsum(f * ways[n] for n, f in tie.sum) == pytest.approx(tie.equals)


def test_a_copys_hinges_are_named_by_the_rig_that_brings_it_in(tmp_path: Path) -> None:
    (tmp_path / "fore.toml").write_text(LEG + KNEE, encoding="utf-8")
    rig = load(tmp_path, 'rigpose = 1\ndim = 3\n[joints]\nhook = [0, 0, 9]\n[copies]\n'
               'a = { of = "fore.toml" }\nb = { of = "fore.toml", mirror = "z" }\n'
               '[bones]\ntow = ["a/knee", "hook"]\n'
               '[cranks]\nc = { turns = "tow", from = "a/shin", about = "a/fold" }\n'
               'd = { turns = "b/shin", from = "b/thigh", about = "b/fold" }\n'
               '[hinges]\nnew = { parts = ["a/thigh", "tow"], at = "a/knee", axis = [0, 0, 1] }\n')
    c, d = rig.cranks
    assert (c.axis, c.line, c.base) == (
        ("a/knee", "a/fold axis"), ("a/knee", "hook"), ("a/knee", "a/toe"))
    assert d.axis == ("b/fold axis", "b/knee")
    assert plate(rig, "a/thigh").joints == ("a/hip", "a/knee", "a/fold axis", "new axis")
    # The frozen group of a copy can't lose a bone to a hinge.
    (tmp_path / "fore.toml").write_text(LEG + '[frozen]\nf = ["thigh"]\n', encoding="utf-8")
    assert refusal(tmp_path, 'rigpose = 1\ndim = 3\n[copies]\na = { of = "fore.toml" }\n[hinges]\n'
                   'n = { parts = ["a/thigh", "ground"], at = "a/knee", axis = [0, 0, 1] }\n') == (
        'leg.toml:6: hinges.n.parts[0]: a hinge makes a plate of a bone, and a frozen group is of '
        'bones; got "a/thigh" of the group "a/f"; take it out of the group')


# starting a file

def test_start_lays_out_the_sections_of_space(tmp_path: Path) -> None:
    """Each line, its words put in and uncommented, is read."""
    (tmp_path / "points.csv").write_text("joint,x,y,z\na,0,0,0\nb,1,2,3\nc,4,4,4\n",
                                         encoding="utf-8")
    text = start_text(tmp_path / "points.csv")
    for section in ("bones", "rails", "cranks", "limits", *IN_SPACE):
        assert f"\n# [{section}]\n" in text
    assert 'through = [0, 0, 0], direction = [1, 0, 0], range' in text
    lines = [line[2:] for line in text.splitlines() if line.startswith(("# [", "# NAME = {"))]
    body = "\n".join(lines).replace("NAME", "n", 1)
    for k in range(body.count("NAME")):
        body = body.replace("NAME", f"n{k}", 1)
    assert set(tomllib.loads(body)) >= set(IN_SPACE)
