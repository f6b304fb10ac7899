"""`check`: freedoms, redundancy, rounding."""

from __future__ import annotations

from collections.abc import Iterable, Iterator
from dataclasses import replace
from itertools import combinations

import numpy as np
import pytest
from trusses import (
    K33,
    LOOP,
    PRISM,
    RISE,
    TRIANGLE,
    bars,
    four_bar,
    freedoms,
    nearly,
    on_ellipse,
    wheels,
)

from rigpose.model.make import make_rig
from rigpose.solve.report import check

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
