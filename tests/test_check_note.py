"""`check`: what can't close, what would pose a rig, and the report itself."""

from __future__ import annotations

import json
import re
from collections.abc import Callable, Mapping
from itertools import combinations
from pathlib import Path
from typing import Any

import numpy as np
import pytest
from trusses import LOOP, PRISM, RISE, TRIANGLE, bars, five_bar, four_bar, freedoms, nearly, wheels

from rigpose.files.rigfile import load_rig
from rigpose.model.judge import judge
from rigpose.model.make import make_rig
from rigpose.solve.report import Report, check
from rigpose.solve.rest import find_rest

# -- what can't close -----------------------------------------------------------------------------


def told(**lengths: float) -> Report:
    joints = {"quay": {"at": [0, 0], "pin": True}, "a": [1, 0], "b": [1, 1]}
    ends = {"keel": ["quay", "a"], "rib": ["a", "b"], "stay": ["b", "quay"]}
    return check(make_rig(joints, {n: {"ends": e, "length": lengths[n]}
                                   for n, e in ends.items()}))


def test_a_triangle_that_cannot_close_is_told_by_how_much() -> None:
    report = told(keel=1.0, rib=1.5, stay=3.25)
    (gap,) = report.gaps
    assert (gap.part, set(gap.chain)) == ("stay", {"keel", "rib"})
    assert gap.short == pytest.approx(0.75)
    assert gap.least == 3.25
    assert not report.assembles
    assert "Can never close: 'stay'" in str(report)
    assert any(p.mend == "shorten 'stay' or lengthen the others by 0.75 m"
               for p in report.problems)


def test_a_triangle_that_just_closes_is_no_gap() -> None:
    assert told(keel=1.0, rib=1.5, stay=2.5).gaps == ()


@pytest.mark.parametrize(("length", "part", "mend"), [
    (1.25, "strut", "shorten 'strut' or move them apart by 0.25 m"),
    (0.75, "the ground", "move the pinned joints together or lengthen the others by 0.25 m"),
])
def test_a_bone_that_contradicts_its_pins_is_told(length: float, part: str, mend: str) -> None:
    joints = {"a": {"at": [0, 0], "pin": True}, "b": {"at": [1, 0], "pin": True}}
    report = check(make_rig(joints, {"strut": {"ends": ["a", "b"], "length": length}}))
    (gap,) = report.gaps
    assert gap.part == part
    assert gap.short == pytest.approx(0.25)
    assert mend in [p.mend for p in report.problems]
    (spare,) = report.redundant
    assert spare.off == pytest.approx(1 - length)


def test_a_chain_too_short_for_its_ground_is_told() -> None:
    joints = {"quay": {"at": [0, 0], "pin": True}, "post": {"at": [10, 0], "pin": True},
              "a": [3, 0], "b": [6, 0]}
    bones = {n: {"ends": e, "length": 3.0} for n, e in
             (("one", ["quay", "a"]), ("two", ["a", "b"]), ("three", ["b", "post"]))}
    (gap,) = check(make_rig(joints, bones)).gaps
    assert (gap.part, gap.chain) == ("the ground", ("one", "two", "three"))
    assert gap.short == pytest.approx(1.0)


def test_a_rail_out_of_reach_and_a_ram_too_short_are_told() -> None:
    joints = {"quay": {"at": [0, 0], "pin": True}, "block": [0.5, 2.0]}
    rail = {"beam": {"joint": "block", "through": [0, 2], "direction": [1, 0]}}
    report = check(make_rig(joints, {"arm": {"ends": ["quay", "block"], "length": 1.5}},
                            rails=rail))
    (gap,) = report.gaps
    assert (gap.part, gap.chain) == ("beam", ("arm",))
    assert gap.short == pytest.approx(0.5)
    ram = {"lift": {"ends": ["quay", "block"], "range": [3.0, 4.0]}}
    report = check(make_rig(joints, {"arm": {"ends": ["quay", "block"], "length": 2.5}},
                            rams=ram))
    (gap,) = report.gaps
    assert gap.part == "lift"
    assert gap.short == pytest.approx(0.5)


def test_two_bones_of_different_lengths_between_the_same_joints_cannot_close() -> None:
    joints = {"a": {"at": [0, 0], "pin": True}, "b": [1, 0]}
    bones = {"short": {"ends": ["a", "b"], "length": 1.0},
             "long": {"ends": ["b", "a"], "length": 1.25}}
    (gap,) = check(make_rig(joints, bones)).gaps
    assert (gap.part, gap.chain) == ("long", ("short",))
    assert gap.short == pytest.approx(0.25)


def test_a_joint_that_nothing_holds_is_told() -> None:
    rig = bars([(0, 0), (3, 0), (0, 1), (3, 2), (9, 9)], LOOP, (0, 1))
    report = check(rig)
    assert report.loose == ("j4",)
    assert [p.part for p in report.problems] == ["j4"]
    assert freedoms(report) == (3, 3, 3)
    assert report.suggestions


def test_a_rest_outside_of_a_range_is_told() -> None:
    joints = {"quay": {"at": [0, 0], "pin": True}, "block": [0.5, 2.0]}
    rail = {"beam": {"joint": "block", "through": [0, 2], "direction": [1, 0], "range": [1, 3]}}
    (problem,) = check(make_rig(joints, rails=rail)).problems
    assert (problem.part, problem.got) == ("beam", "0.5 m beyond")


# -- suggestions ----------------------------------------------------------------------------------


def test_a_four_bar_is_best_driven_by_its_crank() -> None:
    report = check(four_bar())
    best = report.suggestions[0]
    assert (best.drives, best.targets, best.lengths) == (("turn",), (), ())
    assert (best.block, best.branches) == (1, 2)  # a four-bar has two assemblies (CHECKS A1)
    names = [n for s in report.suggestions for n in s.names]
    assert {"target pin.x", "target knee.y", "a length from quay to knee"} <= set(names)
    assert str(best) == "drive turn"


def test_a_five_bar_gets_sets_of_two() -> None:
    report = check(five_bar())
    assert freedoms(report) == (2, 2, 2)
    assert str(report.suggestions[0]) == "drive west and drive east"
    assert all(len(s.names) == 2 for s in report.suggestions)
    # The tip alone, in x and y, is met by two dyads: at most 2 times 2 poses.
    tip = next(s for s in report.suggestions if s.targets == (("tip", 0), ("tip", 1)))
    assert (tip.block, tip.branches) == (1, 4)


def test_suggestions_stand_in_their_order() -> None:
    for rig in (four_bar(), five_bar()):
        found = check(rig).suggestions
        keys = [(s.margin is None or s.margin < 1e-2, s.block, s.branches is None,
                 s.branches or 0) for s in found]
        assert keys == sorted(keys)


def slope(value: Callable[[np.ndarray], float], x: np.ndarray) -> np.ndarray:
    """Slopes by central differences."""
    steps = 1e-6 * np.eye(x.size).reshape(-1, *x.shape)
    return np.array([(value(x + d) - value(x - d)) / 2e-6 for d in steps])


def test_whatever_is_suggested_makes_the_rig_finite() -> None:
    # Judged from outside: rank of the file's own lengths, angles and coordinates.
    rig = five_bar()
    x = find_rest(rig).positions + 0.0
    at = rig.index
    free = np.flatnonzero(np.repeat([not j.pin for j in rig.joints], 2))
    lines = {c.name: c.line for c in rig.cranks}

    def length(a: str, b: str) -> np.ndarray:
        return slope(lambda p: float(np.linalg.norm(p[at[b]] - p[at[a]])), x)

    def angle(a: str, b: str) -> np.ndarray:
        return slope(lambda p: float(np.arctan2(*(p[at[b]] - p[at[a]])[::-1])), x)

    bones = [length(*b.ends) for b in rig.bones]
    for s in check(rig).suggestions:
        rows = bones + [angle(*lines[d]) for d in s.drives] + [length(*e) for e in s.lengths]
        rows += [np.eye(x.size)[2 * at[j] + axis] for j, axis in s.targets]
        assert np.linalg.matrix_rank(np.array(rows)[:, free], tol=1e-4) == len(free), str(s)


@pytest.mark.parametrize("path", sorted(
    p for p in (Path(__file__).parent.parent / "rigs").glob("*.toml")
    if not p.name.endswith(".shot.toml")), ids=lambda p: p.stem)
def test_the_rigs_of_lantern_quay_have_no_problems(path: Path) -> None:
    report = check(load_rig(path))
    assert report.assembles
    assert (report.problems, report.gaps, report.loose, report.rounding) == ((), (), (), ())
    assert report.freedoms is not None
    assert report.freedoms == report.freedoms_first_order
    assert report.freedoms >= 1
    assert report.suggestions


# -- the report -----------------------------------------------------------------------------------


def test_rest_tells_how_far_joints_move() -> None:
    joints: Mapping[str, Any] = {"quay": {"at": [0, 0], "pin": True}, "tip": [1.5, 0]}
    report = check(make_rig(joints, {"arm": {"ends": ["quay", "tip"], "length": 1.0}}))
    assert report.moved == {"tip": pytest.approx(0.5)}
    assert report.unplaced == ()
    assert "tip by 0.5 m" in str(report)


@pytest.mark.parametrize(("pin", "tip", "said"), [
    ([3, 4], [3, 1], ", with every joint where the file puts it."),
    ([3, 4], {}, ", with every placed joint where the file puts it; places were found for tip."),
    ([3, 4.5], {}, " once these joints move: pin by # m; places were found for tip."),
    ({}, {}, ", with every placed joint where the file puts it; places were found for pin, tip."),
])
def test_rest_tells_which_joints_have_no_place_in_the_file(pin: object, tip: object,
                                                           said: str) -> None:
    joints: Mapping[str, Any] = {"quay": {"at": [0, 0], "pin": True}, "pin": pin, "tip": tip}
    report = check(make_rig(joints, {"arm": {"ends": ["quay", "pin"], "length": 5.0},
                                     "rod": {"ends": ["pin", "tip"], "length": 3.0}}))
    told = re.sub(r"[\d.]+ m", "# m", str(report).splitlines()[1])
    assert told == f"At rest all lengths hold{said}"
    assert report.as_dict()["unplaced"] == tuple(n for n in ("pin", "tip") if joints[n] == {})


def test_a_rig_that_nothing_places_says_so() -> None:
    report = check(make_rig({"bow": {}, "stern": {}},
                            {"keel": {"ends": ["bow", "stern"], "length": 2.0}}))
    assert report.unplaced == ("bow", "stern")
    assert str(report).splitlines()[1] == (
        "At rest all lengths hold; the file gives no places, so they were found.")


def test_the_rest_that_is_reported_holds_all_lengths_for_the_judge() -> None:
    for rig in (four_bar(), five_bar(), wheels(), nearly()):
        rest = find_rest(rig)
        assert judge(rig, rest.positions, rest.size).worst()[0] < 1e-12
        assert check(rig).misfit < 1e-12


def test_the_report_is_a_short_note_and_plain_json() -> None:
    for rig in (four_bar(), five_bar(), wheels(1.0005), nearly(),
                bars(np.random.default_rng(0).normal(size=(9, 2)), combinations(range(9), 2))):
        report = check(rig)
        assert len(str(report).splitlines()) <= 25
        assert "Tolerances: slack" in str(report)
        plain = json.loads(json.dumps(report.as_dict()))
        assert {"name", "dim", "joints", "bones", "freedoms", "freedoms_first_order",
                "freedoms_counted", "redundant", "problems"} <= set(plain)
        assert plain["joints"] == len(rig.joints)


def test_the_caller_may_stop_the_work() -> None:
    seen: list[str] = []

    def watch(what: str, done: int, total: int) -> bool:
        seen.append(f"{what} {done}/{total}")
        return done < 2

    report = check(four_bar(), watch=watch)
    assert seen == ["lengths 0/4", "motions 1/4", "rounding 2/4"]
    assert report.stopped
    assert report.freedoms == 1
    assert report.suggestions == ()
    assert "Stopped before the end" in str(report)


@pytest.mark.parametrize("scale", [1e-3, 1.0, 1e3])
@pytest.mark.parametrize("offset", [0.0, 1e5])
def test_the_answer_is_the_same_at_any_scale_and_place(scale: float, offset: float) -> None:
    turn = np.array([[0.6, 0.8], [-0.8, 0.6]])
    places = (np.array([(0, 0), (3, 0), (0.6, 0.8), (3.6, 0.8), (2, 2)]) @ turn + offset) * scale
    rig = bars(places, [*LOOP, (2, 4), (3, 4)], (0, 1))
    assert freedoms(check(rig)) == (1, 1, 1)


def test_order_and_names_of_joints_do_not_matter() -> None:
    places = np.concatenate([TRIANGLE, TRIANGLE + RISE])
    for seed in range(4):
        order = np.random.default_rng(seed).permutation(6)
        place_of = {int(o): k for k, o in enumerate(order)}
        edges = [(place_of[a], place_of[b]) for a, b in PRISM]
        pins = (place_of[0], place_of[1])
        assert freedoms(check(bars(places[order], edges, pins))) == (1, 1, 0)


def test_a_large_truss_is_measured_to_first_order() -> None:
    # A truss of triangles on one pin turns about it and does nothing else (triangles are rigid).
    bays = 400
    places = [(float(k // 2), float(k % 2)) for k in range(2 * bays)]
    edges = [(2 * k, 2 * k + 1) for k in range(bays)]
    for k in range(bays - 1):
        edges += [(2 * k, 2 * k + 2), (2 * k + 1, 2 * k + 3), (2 * k, 2 * k + 3)]
    report = check(bars(places, edges, (0,)))
    assert freedoms(report) == (1, 1, 1)
    assert report.measured
    braced = check(bars(places, [*edges, (1, 2)], (0,)))
    assert freedoms(braced) == (1, 1, 0)
    assert not braced.measured
    assert "first order only" in braced.why[0]
