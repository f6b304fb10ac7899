"""The four-bar and the slider-crank against their handbooks.

Symbols as there: crank a, coupler b, follower c, frame d; t2, t3, t4 are the directions of crank,
coupler and follower. Data of the two worked examples are from memory (R. L. Norton, Design of
Machinery); their results were worked out again by other means.
"""

from __future__ import annotations

import math

import numpy as np
import pytest
from linkages import angle, circuits, four_bar, slider_crank, turned

import rigpose as rp
from rigpose.model.equations import Array

TURN = np.linspace(0.0, 360.0, 3601)
FINE = np.linspace(0.0, 360.0, 36001)


def lengths_of(seed: int) -> tuple[float, float, float, float]:
    """d, a, b, c drawn so that the bars can close."""
    rng = np.random.default_rng(seed)
    while True:
        d, a, b, c = rng.uniform(0.3, 3.0, 4)
        if 2 * max(d, a, b, c) < 0.98 * (d + a + b + c):
            return float(d), float(a), float(b), float(c)


def followers(d: float, a: float, b: float, c: float, t2: Array) -> Array:
    """t4 ``(2, n)`` in degrees, NaN where there is none, by the tangent of the half angle.

    Freudenstein's equation K1 cos t4 - K2 cos t2 + K3 = cos(t2 - t4) as a quadratic in
    tan(t4 / 2) (Norton, Design of Machinery, from memory).
    """
    k1, k2, k3 = d / a, d / c, (a * a - b * b + c * c + d * d) / (2 * a * c)
    co = np.cos(np.radians(t2))
    one = co - k1 - k2 * co + k3
    two = -2 * np.sin(np.radians(t2))
    three = k1 - (k2 + 1) * co + k3
    with np.errstate(invalid="ignore"):
        under = np.sqrt(two * two - 4 * one * three)
    out: Array = np.degrees(2 * np.arctan2(np.stack([-two - under, -two + under]), 2 * one))
    return out


def off_freudenstein(found: rp.Branches, bars: tuple[float, ...], t2: Array) -> float:
    """How badly Freudenstein's equation and its form for the coupler fail, at most."""
    d, a, b, c = bars
    r2, r3, r4 = (np.radians(x) for x in (
        t2, angle(found, "tip", "knee"), angle(found, "right", "knee")))
    k3 = (a * a - b * b + c * c + d * d) / (2 * a * c)
    k5 = (c * c - d * d - a * a - b * b) / (2 * a * b)
    one = d / a * np.cos(r4) - d / c * np.cos(r2) + k3 - np.cos(r2 - r4)
    two = d / a * np.cos(r3) + d / b * np.cos(r2) + k5 - np.cos(r2 - r3)
    return float(np.nanmax(np.abs([one, two]), initial=0.0)) * a * min(b, c) / sum(bars) ** 2


@pytest.mark.parametrize("seed", range(10))
def test_both_assemblies_are_the_roots_of_freudensteins_equation(seed: int) -> None:
    """F. Freudenstein, Approximate synthesis of four-bar linkages, Trans. ASME 77, 1955."""
    d, a, b, c = lengths_of(seed)
    rig = four_bar(d, a, b, c)
    t2 = np.random.default_rng(seed).uniform(-180, 180, 60)
    gap = np.sqrt(a * a + d * d - 2 * a * d * np.cos(np.radians(t2)))
    closes = (gap > abs(b - c)) & (gap < b + c)
    want = followers(d, a, b, c, t2)
    for k in range(len(t2)):
        found = rp.find_branches(rig, {"input": t2[k]})
        assert found.found is rp.Found.COMPLETE
        assert len(found) == (2 if closes[k] else 0)
        if closes[k]:
            apart = turned(angle(found, "right", "knee"), want[:, k])
            assert min(apart[0, 0] + apart[1, 1], apart[0, 1] + apart[1, 0]) < 1e-6
            assert off_freudenstein(found, (d, a, b, c), t2[k:k + 1]) < 1e-14


@pytest.mark.parametrize("seed", range(30))
def test_freudensteins_equation_over_sweeps(seed: int) -> None:
    bars = lengths_of(seed + 100)
    found = rp.find_branches(four_bar(*bars), {"input": TURN})
    want = followers(*bars, TURN)
    assert len(found) == 2
    got = angle(found, "right", "knee")
    assert np.array_equal(np.isnan(got), np.isnan(want))
    same, other = turned(got, want), turned(got, want[::-1])
    assert np.nanmax(np.minimum(same.max(axis=0), other.max(axis=0)) * found.margin) < 1e-9
    assert off_freudenstein(found, bars, TURN) < 1e-14


@pytest.mark.parametrize("seed", range(6))
def test_a_sweep_is_the_same_as_its_frames_one_by_one(seed: int) -> None:
    d, a, b, c = lengths_of(seed)
    rig, t2 = four_bar(d, a, b, c), np.linspace(3, 357, 40)
    rows = rp.find_branches(rig, {"input": t2})
    for k, value in enumerate(t2):
        alive = rows.state[:, k] == rp.State.MET
        one = rp.find_branches(rig, {"input": value})
        assert alive.sum() == len(one)
        if not len(one):
            continue
        apart = np.abs(rows.positions[alive, k][:, None] - one.positions[:, 0]).max(axis=(2, 3))
        assert (apart.min(axis=1) < 1e-12 * rows.size).all()


def test_a_worked_four_bar() -> None:
    """a = 40, b = 120, c = 80, d = 100 mm at t2 = 40 degrees (Norton; data from memory)."""
    found = rp.find_branches(four_bar(100, 40, 120, 80), {"input": 40})
    by_name = {name: k for k, name in enumerate(found.names)}
    t3, t4 = angle(found, "tip", "knee")[:, 0], angle(found, "right", "knee")[:, 0]
    knee = found.positions[:, 0, found.joints.index("knee")]
    opened, crossed = by_name["knee:left"], by_name["knee:right"]
    assert t3[opened] == pytest.approx(20.297883, abs=6e-7)
    assert t4[opened] == pytest.approx(57.324880, abs=6e-7)
    assert knee[opened] == pytest.approx([143.189988, 67.339624], abs=6e-7)
    assert t3[crossed] == pytest.approx(-60.977967, abs=6e-7)
    assert t4[crossed] == pytest.approx(-98.004964, abs=6e-7)
    assert knee[crossed] == pytest.approx([88.859288, -79.220481], abs=6e-7)


def test_a_worked_slider_crank() -> None:
    """a = 40, b = 120, offset -20 at t2 = 60 degrees (Norton; data from memory).

    There t3 is the direction from the block to the crank's tip.
    """
    found = rp.find_branches(slider_crank(40, 120, -20), {"input": 60})
    t3 = angle(found, "block", "tip")[:, 0]
    way = found.positions[:, 0, found.joints.index("block"), 0]
    order = np.argsort(-way)
    assert len(found) == 2
    assert t3[order] == pytest.approx([152.913072, 27.086928], abs=6e-7)
    assert way[order] == pytest.approx([126.838005, -86.838005], abs=6e-7)
    assert found.pick(int(order[0])).motion().value("guide")[0] == pytest.approx(126.838005)


@pytest.mark.parametrize("seed", range(20))
def test_a_random_slider_crank_has_its_closed_form(seed: int) -> None:
    """x = a cos t2 +/- sqrt(b^2 - (a sin t2 - e)^2), elementary geometry."""
    rng = np.random.default_rng(seed)
    a, b, e = rng.uniform(0.3, 1.0), rng.uniform(1.0, 3.0), rng.uniform(-0.8, 0.8)
    found = rp.find_branches(slider_crank(a, b, e), {"input": TURN})
    with np.errstate(invalid="ignore"):
        root = np.sqrt(b * b - (a * np.sin(np.radians(TURN)) - e) ** 2)
    x = found.positions[:, :, found.joints.index("block"), 0]
    assert len(found) == 2
    for row, sign in enumerate((1, -1) if x[0, 0] > x[1, 0] else (-1, 1)):
        want = a * np.cos(np.radians(TURN)) + sign * root
        assert np.array_equal(np.isnan(x[row]), np.isnan(want))
        assert np.nanmax(np.abs(x[row] - want)) < 1e-12 * (a + b) / max(np.nanmin(root), 1e-2)


def test_margin_is_the_sine_of_the_transmission_angle() -> None:
    """cos mu = (b^2 + c^2 - q^2) / (2 b c), q from the crank's tip to the follower's ground joint.

    Extremes where crank and frame lie in line: cos mu = (b^2 + c^2 - (d -/+ a)^2) / (2 b c);
    for the worked four-bar 26.384330 and 86.416678 degrees (worked out again, no source).
    """
    found = rp.find_branches(four_bar(100, 40, 120, 80), {"input": TURN})
    q2 = 100**2 + 40**2 - 2 * 100 * 40 * np.cos(np.radians(TURN))
    mu = np.degrees(np.arccos((120**2 + 80**2 - q2) / (2 * 120 * 80)))
    assert np.abs(found.margin - np.sin(np.radians(mu))).max() < 1e-7  # margins are float32
    measured = turned(angle(found, "knee", "tip"), angle(found, "knee", "right"))
    assert np.abs(measured - mu).max() < 1e-10
    assert measured.min() == pytest.approx(26.384330, abs=6e-7)
    assert measured.max() == pytest.approx(86.416678, abs=6e-7)
    assert TURN[np.argmin(measured[0])] in (0.0, 360.0)
    assert TURN[np.argmax(measured[0])] == 180.0


def test_the_followers_dead_centres_and_its_time_ratio() -> None:
    """Coupler in line with the crank: |O2 B| = b + a and b - a, by the cosine law.

    For the worked four-bar t2 = 24.146848 with t4 = 54.900368 and t2 = 231.317813 with
    t4 = 128.682187: swing 73.781820 degrees, time ratio 1.355573 (worked out again, no source).
    """
    a, b, c, d = 40.0, 120.0, 80.0, 100.0
    rig = four_bar(d, a, b, c)
    t4 = [180 - math.degrees(math.acos((c * c + d * d - r * r) / (2 * c * d)))
          for r in (b + a, b - a)]
    t2 = []
    for value in t4:
        found = rp.find_branches(rig, {"output": value})
        # Two assemblies meet in one pose.
        assert len(found) == 1
        assert found.meets.all()
        assert found.margin[0, 0] < 1e-6
        t2.append(float(angle(found, "left", "tip")[0, 0]) % 360)
    assert t4 == pytest.approx([54.900368, 128.682187], abs=6e-7)
    assert t2 == pytest.approx([24.146848, 231.317813], abs=2e-6)
    out = t2[1] - t2[0]
    assert out / (360 - out) == pytest.approx(1.355573, abs=1e-6)
    # The crank's whole turn swings the follower just so far, and a little more is no pose.
    swing = angle(rp.find_branches(rig, {"input": np.linspace(0, 360, 36001)}), "right", "knee")[0]
    assert np.ptp(swing) == pytest.approx(73.781820, abs=1e-5)
    assert len(rp.find_branches(rig, {"output": t4[0] - 1e-5})) == 0
    assert len(rp.find_branches(rig, {"output": t4[0] + 1e-5})) == 2


GRASHOF = [
    ((100, 40, 120, 80), 2),   # crank and rocker
    ((40, 100, 80, 120), 2),   # double crank
    ((100, 80, 40, 120), 2),   # double rocker whose coupler turns
    ((100, 80, 120, 40), 2),   # rocker and crank
    ((150, 80, 110, 70), 1),   # s + l = 220 > 190: nothing turns fully
]


@pytest.mark.parametrize(("bars", "count"), GRASHOF)
@pytest.mark.parametrize("drive", ["input", "output"])
def test_circuits_by_grashofs_law(bars: tuple[float, ...], count: int, drive: str) -> None:
    """s + l < p + q: two circuits, else one, whichever bar is driven (Grashof; from memory)."""
    assert circuits(rp.find_branches(four_bar(*bars), {drive: FINE})) == count


@pytest.mark.parametrize("seed", range(30))
def test_grashofs_law_over_random_bars(seed: int) -> None:
    bars = lengths_of(seed + 1000)
    s, p, q, longest = sorted(bars)
    if abs(s + longest - p - q) < 0.02 * longest:
        pytest.skip("close to a change point")
    found = rp.find_branches(four_bar(*bars), {"input": FINE})
    grashof = s + longest < p + q
    assert circuits(found) == (2 if grashof else 1)
    # The crank turns fully if it or the frame is the shortest bar.
    assert (found.state == rp.State.MET).all() == (grashof and min(bars[:2]) == s)


def test_a_rocker_reaches_two_circuits_over_two_arcs_of_its_own() -> None:
    """A Grashof double rocker: the input can't turn fully, and yet there are two circuits."""
    found = rp.find_branches(four_bar(100, 80, 40, 120), {"input": FINE})
    alive = (found.state == rp.State.MET).all(axis=0)
    assert np.count_nonzero(np.diff(alive.astype(int))) == 4
    assert circuits(found) == 2


def test_stroke_and_time_ratio_of_a_slider_crank() -> None:
    """S = sqrt((l + r)^2 - e^2) - sqrt((l - r)^2 - e^2), Q = (180 + beta) / (180 - beta) with
    beta = asin(e / (l - r)) - asin(e / (l + r)): elementary geometry.

    For r = 1, l = 4, e = 0.5: S = 2.0168972940 with extremes at asin(e / (l + r)) and
    180 + asin(e / (l - r)) degrees, Q = 1.0437695707 (worked out again).
    """
    r, rod, e = 1.0, 4.0, 0.5
    rig = slider_crank(r, rod, e)
    ends = [math.sqrt((rod + r) ** 2 - e * e), math.sqrt((rod - r) ** 2 - e * e)]
    assert ends[0] - ends[1] == pytest.approx(2.0168972940, abs=5e-11)
    turns = []
    for x in ends:
        found = rp.find_branches(rig, {"guide": x})
        assert len(found) == 1
        assert found.margin[0, 0] < 1e-6
        turns.append(float(angle(found, "hub", "tip")[0, 0]) % 360)
    want = [math.degrees(math.asin(e / (rod + r))), 180 + math.degrees(math.asin(e / (rod - r)))]
    assert turns == pytest.approx(want, abs=1e-5)  # at a dead centre: the root of rounding
    out = turns[1] - turns[0]
    assert out / (360 - out) == pytest.approx(1.0437695707, abs=1e-7)
    row = rp.find_branches(rig, {"input": np.linspace(0, 360, 360001)}).positions[0, :, 2, 0]
    assert np.ptp(row) == pytest.approx(ends[0] - ends[1], abs=1e-9)


def test_stroke_in_line_is_twice_the_throw() -> None:
    rig = slider_crank(0.7, 1.9)
    row = rp.find_branches(rig, {"input": TURN}).positions[0, :, 2, 0]
    assert np.ptp(row) == pytest.approx(1.4, abs=1e-14)


def cognate(lam: complex, a: float, b: float, c: float, pivots: tuple[complex, complex]) -> rp.Rig:
    """The first cognate: crank |lam| b about the left pivot, and the third pivot."""
    left, right = pivots
    third = left + lam * (right - left)
    joints = {"left": {"at": [left.real, left.imag], "pin": True},
              "third": {"at": [third.real, third.imag], "pin": True},
              "tip": {}, "knee": {}, "point": {}}
    # On the coupler: point - tip is the old crank's direction, knee - tip is lam times it.
    tip, knee, point = 0j, lam * a, complex(a)
    return rp.make_rig(
        joints, {"crank": {"ends": ["left", "tip"], "length": abs(lam) * b},
                 "follower": {"ends": ["third", "knee"], "length": abs(lam) * c}},
        plates={"coupler": {"joints": ["tip", "knee", "point"],
                            "shape": [[z.real, z.imag] for z in (tip, knee, point)]}},
        cranks={"input": {"turns": "crank", "about": "left"}})


def test_a_cognate_draws_the_same_curve() -> None:
    """Roberts and Chebyshev (from memory): a coupler curve is drawn by three four-bars.

    With complex lam = (C - A) / (B - A) the first cognate's bars are |lam| times frame, follower,
    crank and coupler, and its crank stays parallel to the line from A to C.
    """
    a, b, c, lam = 1.1, 2.9, 2.4, 0.6 + 0.45j
    pivots = (0j, 3 + 0.4j)
    rig = rp.make_rig(
        {"left": {"at": [0, 0], "pin": True}, "right": {"at": [3, 0.4], "pin": True},
         "tip": {}, "knee": {}, "point": {}},
        {"crank": {"ends": ["left", "tip"], "length": a},
         "follower": {"ends": ["right", "knee"], "length": c}},
        plates={"coupler": {"joints": ["tip", "knee", "point"],
                            "shape": [[0, 0], [b, 0], [b * lam.real, b * lam.imag]]}},
        cranks={"input": {"turns": "crank", "about": "left"}})
    other = cognate(lam, a, b, c, pivots)
    assert [x.length for x in other.bones] == pytest.approx([2.175, 1.8])
    assert abs(lam * (pivots[1] - pivots[0])) == pytest.approx(2.269912, abs=5e-7)
    first = rp.find_branches(rig, {"input": TURN})
    for row in first:
        curve = row.motion()["point"]
        arm = np.unwrap(angle(row, "tip", "point")[0], period=360)
        second = rp.find_branches(other, {"input": arm})
        drawn = second.positions[:, :, second.joints.index("point")]
        apart = np.abs(drawn - curve).max(axis=2)
        # Its crank rocks and turns back close to dead centres, where rounding grows: frame by
        # frame one of the two assemblies has the point.
        allowed = 1e-15 * first.size / second.margin.min(axis=0)
        assert (apart.min(axis=0) < 10 * allowed).all()


def test_three_cognates_hung_on_one_point_move_together() -> None:
    """Roberts' ten bars: one freedom, though two bars fewer would do (from memory). The second
    cognate's bars are |1 - lam| times frame, coupler, follower and crank."""
    a, b, c, lam = 1.1, 2.9, 2.4, 0.6 + 0.45j
    left, right, mu = 0j, 3 + 0.4j, 1 - lam

    def xy(z: complex) -> list[float]:
        return [z.real, z.imag]

    pins = {"left": left, "right": right, "third": left + lam * (right - left)}
    rig = rp.make_rig(
        {n: {"at": xy(z), "pin": True} for n, z in pins.items()}
        | {n: {} for n in ("A", "B", "point", "A1", "B1", "A2", "B2")},
        {n: {"ends": ends, "length": length} for n, ends, length in (
            ("crank", ["left", "A"], a), ("follower", ["right", "B"], c),
            ("crank1", ["left", "A1"], abs(lam) * b), ("follower1", ["third", "B1"], abs(lam) * c),
            ("crank2", ["right", "A2"], abs(mu) * b), ("follower2", ["third", "B2"], abs(mu) * a))},
        plates={n: {"joints": joints, "shape": [xy(z) for z in shape]} for n, joints, shape in (
            ("coupler", ["A", "B", "point"], (0j, b + 0j, b * lam)),
            ("coupler1", ["A1", "B1", "point"], (0j, lam * a, a + 0j)),
            ("coupler2", ["A2", "B2", "point"], (0j, mu * c, c + 0j)))},
        cranks={"input": {"turns": "crank", "about": "left"}})
    found = rp.find_branches(rig, {"input": np.linspace(0, 360, 721)})
    assert len(found) == 2
    assert (found.state == rp.State.MET).all()
    assert found.redundant == {"follower1", "follower2"}
    assert rp.judge(rig, found.positions, found.size).worst()[0] < 1e-12
