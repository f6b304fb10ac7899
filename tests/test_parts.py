"""Plates, lines and slots: their shapes and sides, from lengths and as drawn."""

from __future__ import annotations

import math
import re
from pathlib import Path

import pytest
from hypothesis import given
from hypothesis import strategies as st
from loading import load, told

from rigpose.ground.errors import BadInput
from rigpose.model.make import make_rig


def test_a_plate_from_lengths(tmp_path: Path) -> None:
    """A right triangle with sides 3, 4 and 5, and a fourth joint in the middle of the longest.

    That this middle is half of it away from all three corners is Thales's theorem (Euclid,
    Elements III.31, by its converse).
    """
    text = """
[joints]
a = {}
b = {}
c = {}
m = {}
[plates]
left = { joints = ["a", "b", "c"], hand = "left", lengths = [
  ["a", "b", 3], ["b", "c", 4], ["a", "c", "10 / 2"]] }
right = { joints = ["a", "b", "c", "m"], hand = "right", lengths = [
  ["a", "b", 3], ["b", "c", 4], ["a", "c", 5], ["m", "a", 2.5], ["b", "m", 2.5], ["c", "m", 2.5]] }
"""
    left, right = load(tmp_path, text).plates
    for plate, sign in ((left, 1), (right, -1)):
        a, b, c = (complex(*p) for p in plate.shape[:3])
        assert abs(b - a) == pytest.approx(3, abs=1e-14)
        assert (c - b) / (b - a) == pytest.approx(4 / 3 * sign * 1j, abs=1e-14)
    middle = complex(*right.shape[3])
    assert middle == pytest.approx((complex(*right.shape[0]) + complex(*right.shape[2])) / 2,
                                   abs=1e-14)
    assert sum(complex(*p) for p in right.shape) == pytest.approx(0, abs=1e-14)


@pytest.mark.parametrize(("lengths", "message"), [
    ('["m", "a", 2.5], ["b", "m", 2.5], ["c", "m", 2.6]',
     r'plates.p.lengths: the lengths of a plate must agree with one another; got 2.[56] for '
     r'\["[abc]", "m"\], where the others make it 2'),
    ('["m", "a", 2.5], ["b", "m", 2.5]',
     r"plates.p.lengths: every further joint of a plate needs three lengths, from joints that are "
     r'not in line; got "m" has 2, from a, b; add a length, or give'),
    ('["m", "a", 9.5], ["b", "m", 2.5], ["c", "m", 2.5]',
     r"plates.p.lengths: the lengths of a plate must agree with one another; got 9.5 for "
     r'\["a", "m"\], where the others make it '),
])
def test_a_plates_lengths_that_say_too_little_or_disagree(tmp_path: Path, lengths: str,
                                                          message: str) -> None:
    text = f"""
[joints]
a = {{}}
b = {{}}
c = {{}}
m = {{}}
[plates]
p = {{ joints = ["a", "b", "c", "m"], hand = "left", lengths = [
  ["a", "b", 3], ["b", "c", 4], ["a", "c", 5], {lengths}] }}
"""
    assert re.search(message, told(tmp_path, text, frame=""))


@given(st.lists(st.tuples(st.floats(-5, 5), st.floats(-5, 5)), min_size=3, max_size=7),
       st.booleans())
def test_plates_from_lengths_measure_as_drawn(points: list[tuple[float, float]],
                                              mirror: bool) -> None:
    """Build a shape first, measure it, and require those lengths and that hand again."""
    first, second, third = (complex(*p) for p in points[:3])
    way = (third - first) * (second - first).conjugate()
    apart = min((math.dist(p, q) for k, p in enumerate(points) for q in points[:k]), default=0)
    if apart < 0.1 or abs(way.imag) < 0.5:
        return
    names = [f"j{k}" for k in range(len(points))]
    lengths = [[names[i], names[k], math.dist(points[i], points[k])]
               for i in range(len(points)) for k in range(i)]
    left = (way.imag > 0) != mirror
    rig = make_rig({n: {} for n in names}, plates={
        "p": {"joints": names, "lengths": lengths, "hand": "left" if left else "right"}})
    shape = rig.plates[0].shape
    for i in range(len(points)):
        for k in range(i):
            assert math.dist(shape[i], shape[k]) == pytest.approx(math.dist(points[i], points[k]),
                                                                  abs=1e-6)
    a, b, c = (complex(*p) for p in shape[:3])
    assert (((c - a) * (b - a).conjugate()).imag > 0) == left


def test_plates_may_lie_in_line() -> None:
    rig = make_rig({"a": [0, 0], "b": [1, 1], "c": [3, 3]}, plates={"p": ["a", "b", "c"]})
    assert math.dist(rig.plates[0].shape[0], rig.plates[0].shape[2]) == pytest.approx(18 ** 0.5)
    flat = make_rig({"a": {}, "b": {}, "c": {}}, plates={"p": {
        "joints": ["a", "b", "c"], "hand": "left",
        "lengths": [["a", "b", 1], ["b", "c", 2], ["a", "c", 3]]}})
    assert [y for _, y in flat.plates[0].shape] == [0, 0, 0]


def test_lines_of_cranks_and_limits() -> None:
    """Bones are seen from `about` and `at` outwards, plates along the lines that are named."""
    joints = {"a": {"at": [0, 0], "pin": True}, "b": [1, 0], "c": [2, 1], "d": [3, 0]}
    rig = make_rig(
        joints, {"ab": ["a", "b"], "bc": ["b", "c"]}, plates={"p": ["b", "c", "d"]},
        cranks={"plain": {"turns": "ab"}, "out": {"turns": "ab", "about": "b"},
                "rel": {"turns": "bc", "from": "ab", "about": "b"},
                "plate": {"turns": "p", "line": ["d", "b"], "from": "ab", "zero": "rest"}},
        limits={"l": {"from": "ab", "to": "bc", "at": "b", "range": [10, 170]},
                "m": {"from": "ab", "to": "p", "to_line": ["b", "d"], "at": "b",
                      "range": [10, 170], "either": True}},
    )
    plain, out, rel, plate = rig.cranks
    assert (plain.line, plain.base, plain.base_part) == (("a", "b"), None, "ground")
    assert out.line == ("b", "a")
    assert (rel.line, rel.base) == (("b", "c"), ("b", "a"))
    assert (plate.line, plate.base, plate.zero) == (("d", "b"), ("a", "b"), "rest")
    assert (rig.limits[0].first, rig.limits[0].second) == (("b", "a"), ("b", "c"))
    assert (rig.limits[1].second, rig.limits[1].either) == (("b", "d"), True)
    assert rig.drive_names == ("plain", "out", "rel", "plate")


def test_slots_on_a_plate_a_bone_and_the_ground() -> None:
    joints = {"a": {"at": [0, 0], "pin": True}, "b": {"at": [4, 0], "pin": True}, "c": [2, 1],
              "d": [3, 2], "e": [1, 1]}
    rig = make_rig(joints, {"cd": ["c", "d"]}, plates={"p": ["a", "c", "e"]}, rails={
        "ground": {"joint": "d", "along": ["a", "b"]},
        "bone": {"joint": "e", "along": ["d", "c"], "range": [0, 1]},
        "plate": {"joint": "d", "along": ["e", "c"]}})
    assert [r.along for r in rig.rails] == [("a", "b"), ("d", "c"), ("e", "c")]
    with pytest.raises(BadInput, match="the two joints of a slot stand apart; got both at"):
        make_rig({**joints, "b": {"at": [0, 0], "pin": True}}, {}, rails={
            "r": {"joint": "d", "along": ["a", "b"]}})
