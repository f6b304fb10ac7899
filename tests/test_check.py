"""`check`: freedoms, redundancy, rounding, what can't close, and what would pose a rig."""

from __future__ import annotations

import json
import re
from collections.abc import Callable, Iterable, Iterator, Mapping
from dataclasses import replace
from itertools import combinations
from pathlib import Path
from typing import Any

import numpy as np
import pytest

from rigpose.files.rigfile import load_rig
from rigpose.model.judge import judge
from rigpose.model.make import make_rig
from rigpose.model.rig import Rig
from rigpose.solve.report import Report, check
from rigpose.solve.rest import find_rest

Places = Iterable[tuple[float, float]]
Edges = Iterable[tuple[int, int]]


def bars(places: Places, edges: Edges, pins: Iterable[int] = (), **more: Any) -> Rig:
    """Joints ``j0, j1, …`` and bones ``0-2, …`` measured from their places."""
    held = set(pins)
    joints = {f"j{k}": {"at": [float(x), float(y)], "pin": k in held}
              for k, (x, y) in enumerate(places)}
    return make_rig(joints, {f"{a}-{b}": [f"j{a}", f"j{b}"] for a, b in edges}, **more)


def freedoms(report: Report) -> tuple[int, int, int]:
    return report.freedoms, report.freedoms_first_order, report.freedoms_counted


LOOP = [(0, 2), (2, 3), (3, 1)]
K33 = [(a, b) for a in (0, 2, 4) for b in (1, 3, 5)]
PRISM = [(0, 1), (1, 2), (0, 2), (3, 4), (4, 5), (3, 5), (0, 3), (1, 4), (2, 5)]
TRIANGLE = np.array([(0, 0), (2, 0), (0.7, 1.5)])
RISE = np.array([0.4, 2.0])


def four_bar(**more: Any) -> Rig:
    joints = {"quay": {"at": [0, 0], "pin": True}, "post": {"at": [3, 0], "pin": True},
              "pin": [0, 1], "knee": [3, 2]}
    bones = {"crank": ["quay", "pin"], "rod": ["pin", "knee"], "rocker": ["knee", "post"]}
    turn = {"turns": "crank", "from": "ground", "about": "quay"}
    return make_rig(joints, bones, cranks={"turn": turn}, **more)


def five_bar() -> Rig:
    joints = {"quay": {"at": [0, 0], "pin": True}, "post": {"at": [3, 0], "pin": True},
              "left": [-0.3, 1], "tip": [1.5, 2.2], "right": [3.4, 1.4]}
    bones = {"crank": ["quay", "left"], "rod": ["left", "tip"], "stay": ["tip", "right"],
             "rocker": ["right", "post"]}
    return make_rig(joints, bones, cranks={
        "west": {"turns": "crank", "from": "ground", "about": "quay"},
        "east": {"turns": "rocker", "from": "ground", "about": "post"}})


def wheels(third: float = 1.0, angle: float = 0.7, **more: Any) -> Rig:
    """Three equal cranks on one stiff rod; the third's length may differ."""
    cos, sin = float(np.cos(angle)), float(np.sin(angle))
    joints: dict[str, Any] = {}
    for k, x in enumerate((0.0, 2.0, 5.0), 1):
        joints[f"hub{k}"] = {"at": [x, 0.0], "pin": True}
        joints[f"pin{k}"] = [x + cos, sin]
    bones = {f"wheel{k}": {"ends": [f"hub{k}", f"pin{k}"], "length": third if k == 3 else 1.0}
             for k in (1, 2, 3)}
    return make_rig(joints, bones, plates={"rod": ["pin1", "pin2", "pin3"]}, **more)


def on_ellipse() -> np.ndarray:
    turn = np.radians([10, 80, 130, 200, 260, 330])
    return np.stack([2 * np.cos(turn), np.sin(turn)], axis=1)


# -- freedoms -------------------------------------------------------------------------------------


def test_a_four_bar_moves_with_one_freedom() -> None:
    # Grübler's count for four bars and four hinges: 3 (4 - 1) - 2 * 4 = 1 (any textbook).
    report = check(four_bar())
    assert freedoms(report) == (1, 1, 1)
    assert [m.joints for m in report.moving] == [("pin", "knee")]
    assert (report.why, report.redundant, report.problems) == ((), (), ())


def test_a_flat_parallelogram_is_a_dead_centre_where_two_motions_meet() -> None:
    # Lengths a, b, a, b flat: the change point of Grashof's law, s + l = p + q (CHECKS A4); the
    # parallel and the crossed motion meet there, and each is single.
    report = check(bars([(0, 0), (3, 0), (1, 0), (4, 0)], LOOP, (0, 1)))
    assert freedoms(report) == (1, 2, 1)
    assert "2 motions meet" in report.why[0]


@pytest.mark.parametrize("crank", [1.0, 0.1, 0.01, 0.001])
def test_a_small_crank_turns_too(crank: float) -> None:
    report = check(bars([(0, 0), (10, 0), (0, crank), (9, 2)], LOOP, (0, 1)))
    assert freedoms(report) == (1, 1, 1)


@pytest.mark.parametrize(("places", "expected"), [
    # Bolker and Roth 1980, Pacific J. Math. 90(1), from memory: K3,3 in the plane loses rank
    # exactly when its six joints lie on a conic. That it is only shaky there was calculated: the
    # stress energy is not zero.
    (on_ellipse(), (0, 1, 0)),
    (on_ellipse() * np.array([[1, 1], [1, 1], [1, 1], [1, 1], [1, 1], [1.2, 1.2]]), (0, 0, 0)),
])
def test_k33_is_shaky_on_a_conic(places: np.ndarray, expected: tuple[int, int, int]) -> None:
    report = check(bars(places, K33, (0, 1)))
    assert freedoms(report) == expected
    assert [r.parts for r in report.redundant] == [("0-1",)]  # between the two pins
    assert bool(report.why) == (expected[1] > 0)


def concurrent() -> np.ndarray:
    apex = np.array([0.5, 5.0])
    return np.concatenate([TRIANGLE, TRIANGLE + np.array([[0.4], [0.5], [0.3]])
                           * (apex - TRIANGLE)])


@pytest.mark.parametrize(("places", "expected"), [
    # The prism (Desargues): rank 8 of 9 exactly when its three legs concur or are parallel; of
    # these only equal parallel legs move (common knowledge of rigidity; ranks calculated).
    (np.concatenate([TRIANGLE, TRIANGLE + RISE]), (1, 1, 0)),
    (concurrent(), (0, 1, 0)),
    (np.concatenate([TRIANGLE, TRIANGLE + np.array([[1.0], [1.3], [0.8]]) * RISE]),
     (0, 1, 0)),
    (np.concatenate([TRIANGLE, TRIANGLE @ np.array([[0.8, 0.6], [-0.6, 0.8]]) + RISE]),
     (0, 0, 0)),
])
def test_a_prism_moves_only_on_equal_parallel_legs(
    places: np.ndarray, expected: tuple[int, int, int]
) -> None:
    assert freedoms(check(bars(places, PRISM, (0, 1)))) == expected


def test_a_prism_of_plates_on_equal_parallel_legs_moves() -> None:
    joints = {f"j{k}": {"at": list(p), "pin": k < 3} for k, p in enumerate(
        np.concatenate([TRIANGLE, TRIANGLE + RISE]).tolist())}
    legs = {f"leg{k}": [f"j{k}", f"j{k + 3}"] for k in range(3)}
    report = check(make_rig(joints, legs, plates={"stage": ["j3", "j4", "j5"]}))
    assert freedoms(report) == (1, 1, 0)
    assert [r.parts for r in report.redundant] == [("leg0", "leg1", "leg2", "stage")]


def test_bones_drawn_taut_do_not_move_though_counting_says_so() -> None:
    # A straight chain is the longest there is: the pose is single (triangle inequality).
    report = check(bars([(0, 0), (3, 0), (1, 0), (2, 0)], LOOP, (0, 1)))
    assert freedoms(report) == (0, 2, 1)
    assert "only just reach" in report.why[-1]


def test_a_joint_on_a_straight_pair_of_bones_shakes_and_goes_nowhere() -> None:
    # The mid joint of the coupler is held by the triangle inequality at its limit; the four-bar
    # that carries it moves all the same.
    places = [(0, 0), (3, 0), (0, 1), (3, 2), (1.5, 1.5)]
    report = check(bars(places, [*LOOP, (2, 4), (4, 3)], (0, 1)))
    assert freedoms(report) == (1, 2, 1)
    assert report.redundant == ()


def test_dixons_bipartite_rig_moves_against_all_counting() -> None:
    # Dixon 1899: joints on two crossed axes; squared lengths a^2 + b^2 stay when a^2 grows and
    # b^2 shrinks by the same (CHECKS E11). K4,4 has 16 bars on 16 coordinates.
    places = [(a, 0) for a in (1, 2, -3, 2.5)] + [(0, b) for b in (1.5, -2, 0.7, 3)]
    report = check(bars(places, [(a, b) for a in range(4) for b in range(4, 8)]))
    assert freedoms(report) == (4, 4, 0)  # 3 of them are the whole rig's
    assert any("Nothing is pinned" in line for line in report.why)


def test_the_exact_inversor_moves_with_one_freedom() -> None:
    # Peaucellier 1864: 7 moving bars, 2 * 4 - 7 = 1 (CHECKS B1, with its lengths 5, 3 and 2).
    near = np.array([2 + 2 * np.cos(0.9), 2 * np.sin(0.9)])
    far = near * 16 / (near @ near)
    half = np.sqrt(9 - ((far - near) ** 2).sum() / 4) * np.array([-near[1], near[0]])
    half /= np.linalg.norm(near)
    middle = (near + far) / 2
    places = [(0, 0), (2, 0), near, middle + half, middle - half, far]
    edges = [(1, 2), (0, 3), (0, 4), (2, 3), (2, 4), (3, 5), (4, 5)]
    report = check(bars([(float(x), float(y)) for x, y in places], edges, (0, 1)))
    assert freedoms(report) == (1, 1, 1)
    # The last joint runs on a line square to the frame, so its x can't be a target.
    targets = {t for s in report.suggestions for t in s.targets}
    assert ("j5", 1) in targets
    assert ("j5", 0) not in targets


def small_graphs(n: int) -> Iterator[tuple[tuple[int, int], ...]]:
    """All graphs with 2n - 3 edges that contain the edge 0-1, labelled."""
    every = list(combinations(range(n), 2))
    for edges in combinations(every, 2 * n - 3):
        if (0, 1) in edges:
            yield edges


def is_laman(edges: Iterable[tuple[int, int]], n: int) -> bool:
    """Laman 1970: 2n - 3 edges, and any k joints span at most 2k - 3 of them."""
    return all(sum(a in some and b in some for a, b in edges) <= 2 * k - 3
               for k in range(2, n + 1) for some in map(set, combinations(range(n), k)))


@pytest.mark.parametrize("n", [3, 4, 5])
def test_generic_rigs_are_rigid_exactly_where_laman_says(n: int) -> None:
    places = np.random.default_rng(3).normal(size=(n, 2))
    for edges in small_graphs(n):
        report = check(bars(places, edges, (0, 1)))
        assert (report.freedoms == 0) == is_laman(edges, n), edges
        assert report.freedoms_counted == 0


@pytest.mark.parametrize("seed", range(40))
def test_random_rigs_have_the_rank_that_numpy_finds(seed: int) -> None:
    """In general position finite and first-order freedoms agree: rows and columns less rank."""
    rng = np.random.default_rng(seed)
    n = int(rng.integers(4, 11))
    x = rng.normal(size=(n, 2))
    every = [e for e in combinations(range(n), 2) if e != (0, 1)]
    count = min(int(rng.integers(n - 2, 2 * n)), len(every))
    edges = [every[k] for k in rng.choice(len(every), count, replace=False)]
    rows = np.zeros((count, n, 2))
    for k, (a, b) in enumerate(edges):
        rows[k, a], rows[k, b] = x[a] - x[b], x[b] - x[a]
    rank = np.linalg.matrix_rank(rows.reshape(count, -1)[:, 4:])
    report = check(bars([(float(p), float(q)) for p, q in x], edges, (0, 1)))
    assert freedoms(report) == (2 * n - 4 - rank, 2 * n - 4 - rank, 2 * n - 4 - count)
    assert len(report.redundant) == count - rank
    assert (report.rounding, report.gaps) == ((), ())


# -- bodies, groups -------------------------------------------------------------------------------


def test_bodies_count_as_bodies() -> None:
    # A plate of k joints has 2k - 3 conditions, also where its joints lie in line.
    joints = {"hub": {"at": [0, 0], "pin": True}, "a": [1, 0], "b": [2, 0], "c": [3, 0]}
    report = check(make_rig(joints, plates={"bar": ["hub", "a", "b", "c"]}))
    assert freedoms(report) == (1, 1, 1)


def test_a_frozen_group_counts_as_a_body() -> None:
    square = [(0, 0), (1, 0), (1, 1), (0, 1)]
    edges = list(combinations(range(4), 2))
    open_rig = bars(square, edges, (0,))
    names = [b.name for b in open_rig.bones]
    assert freedoms(check(open_rig)) == (1, 1, 0)
    frozen = bars(square, edges, (0,), frozen={"truss": names})
    assert freedoms(check(frozen)) == (1, 1, 1)


def test_what_is_on_the_same_ground_moves_in_groups_of_its_own() -> None:
    places = [(0, 0), (3, 0), (0, 1), (3, 2), (6, 0), (9, 0), (6, 1), (9, 2)]
    edges = [*LOOP, *((a + 4, b + 4) for a, b in LOOP)]
    report = check(bars(places, edges, (0, 1, 4, 5)))
    assert [(m.joints, m.freedoms) for m in report.moving] == [
        (("j2", "j3"), 1), (("j6", "j7"), 1)]
    assert all(len(s.names) == 2 for s in report.suggestions)


def test_a_finite_rig_is_told_its_branches_group_by_group() -> None:
    # Two joints each held by two bones from the ground: two circles meet twice (Euclid).
    places = [(0, 0), (2, 0), (1, 1.5), (5, 0), (7, 0), (6, 1.5), (6.5, 3)]
    edges = [(0, 2), (1, 2), (3, 5), (4, 5), (5, 6), (4, 6)]
    report = check(bars(places, edges, (0, 1, 3, 4)))
    assert report.finite
    assert [(g.joints, g.branches) for g in report.groups] == [(("j2",), 2), (("j5", "j6"), 4)]


def test_gears_take_a_freedom_away() -> None:
    joints = {"hub1": {"at": [0, 0], "pin": True}, "hub2": {"at": [2, 0], "pin": True},
              "mark1": [1, 0], "mark2": [3, 0]}
    bones = {"big": ["hub1", "mark1"], "small": ["hub2", "mark2"]}
    cranks = {f"turn{k}": {"turns": b, "from": "ground", "about": f"hub{k}"}
              for k, b in ((1, "big"), (2, "small"))}
    assert freedoms(check(make_rig(joints, bones, cranks=cranks))) == (2, 2, 2)
    mesh = {"mesh": {"sum": {"turn1": 20, "turn2": 12}, "equals": 0}}
    report = check(make_rig(joints, bones, cranks=cranks, ties=mesh))
    assert freedoms(report) == (1, 1, 1)
    assert [m.joints for m in report.moving] == [("mark1", "mark2")]


# -- redundancy -----------------------------------------------------------------------------------


def test_a_square_with_both_braces_has_one_length_too_many() -> None:
    square = [(0, 0), (1, 0), (1, 1), (0, 1)]
    report = check(bars(square, combinations(range(4), 2)))
    # K4 in the plane: 2 * 4 - 3 = 5 of its 6 lengths are enough, and any one may go (Laman).
    assert freedoms(report) == (3, 3, 2)
    (spare,) = report.redundant
    assert sorted(spare.parts) == ["0-1", "0-2", "0-3", "1-2", "1-3", "2-3"]
    assert spare.last == "2-3"


def test_a_double_parallelogram_has_none_too_many_until_its_rods_are_tied() -> None:
    places = [(0, 0), (2, 0), (5, 0), (0.6, 0.8), (2.6, 0.8), (5.6, 0.8)]
    edges = [(0, 3), (1, 4), (2, 5), (3, 4), (4, 5)]
    assert freedoms(check(bars(places, edges, (0, 1, 2)))) == (1, 1, 1)
    report = check(bars(places, [*edges, (3, 5)], (0, 1, 2)))
    assert freedoms(report) == (1, 1, 0)
    assert [r.parts for r in report.redundant] == [("3-4", "4-5", "3-5")]


@pytest.mark.parametrize("angle", [0.7, 2.2, 0.0])
def test_a_third_wheel_is_redundant(angle: float) -> None:
    report = check(wheels(angle=angle))
    assert freedoms(report) == (1, 2 if angle == 0 else 1, 0)
    assert [r.parts for r in report.redundant] == [("wheel1", "wheel2", "wheel3", "rod")]
    assert report.problems == ()


def test_redundant_lengths_within_slack_hide_no_freedom() -> None:
    report = check(wheels(1 + 5e-7))
    assert freedoms(report) == (1, 1, 0)
    assert report.redundant[0].last == "wheel3"
    assert report.redundant[0].off == pytest.approx(-5e-7, rel=1e-3)


def test_redundant_lengths_beyond_slack_are_told_with_what_would_pass() -> None:
    report = check(wheels(1 + 5e-4))
    assert not report.assembles
    # What the third wheel would have to be is known: as long as the others.
    (spare,) = report.redundant
    assert spare.off == pytest.approx(-5e-4, rel=1e-6)
    told = next(p for p in report.problems if p.part == "wheel3")
    assert told.mend == "take one of them out, or make 'wheel3' 1 m long"
    assert check(wheels(1.0)).assembles


def test_a_bone_between_pinned_joints_is_told_as_redundant() -> None:
    report = check(bars([(0, 0), (3, 0), (0, 1), (3, 2)], [(0, 1), *LOOP], (0, 1)))
    assert [r.parts for r in report.redundant] == [("0-1",)]
    assert freedoms(report) == (1, 1, 1)


# -- rounding -------------------------------------------------------------------------------------


def nearly() -> Rig:
    """Three wheels that close exactly as drawn and nowhere else: one hub is a little off."""
    base = wheels()
    joints = {j.name: {"at": j.at, "pin": j.pin} for j in base.joints}
    joints["hub3"] = {"at": (5.0003, 0.0), "pin": True}
    bones = {b.name: list(b.ends) for b in base.bones}
    return make_rig(joints, bones, plates={"rod": ["pin1", "pin2", "pin3"]})


def test_a_rounded_rig_is_told_the_slack_with_which_it_would_move() -> None:
    report = check(nearly())
    assert freedoms(report) == (0, 0, 0)
    (found,) = report.rounding
    assert found.freedoms == 1
    assert 1e-6 < found.slack < 1e-4
    moving = check(replace(nearly(), slack=1.01 * found.slack))
    assert freedoms(moving) == (1, 1, 0)
    assert moving.redundant
    assert "Nearly moves" in str(report)


def test_with_the_mended_length_less_slack_is_enough() -> None:
    rig = nearly()
    (found,) = check(rig).rounding
    better = {m.part: m.better for m in found.mends}
    assert found.left < found.slack
    bones = tuple(replace(b, length=better.get(b.name, b.length)) for b in rig.bones)
    mended = replace(rig, bones=bones, slack=1.01 * found.left)
    assert max(abs(found.left * check(rig).size), 3e-4) == 3e-4  # no more than what is wrong
    assert check(mended).freedoms == 1


def test_a_rig_near_a_dead_centre_is_not_taken_for_rounded() -> None:
    places = [(0, 0), (3, 0), (1, 0.01), (4, 0.02)]
    assert check(bars(places, LOOP, (0, 1))).rounding == ()


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
        keys = [(s.margin < 1e-2, s.block, s.branches is None, s.branches or 0) for s in found]
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
    assert report.freedoms == report.freedoms_first_order >= 1
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
