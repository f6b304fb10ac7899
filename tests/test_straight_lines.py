"""Exact and approximate straight-line linkages, and the pantograph.

Where a line is exact it must be so to rounding; where it is not, its published deviation must
come out. Numbers marked "worked out again" were found by separate calculations.
"""

from __future__ import annotations

import math

import numpy as np
import pytest
from linkages import angle
from numpy.typing import NDArray

import rigpose as rp
from rigpose.model.equations import Array

PIN = {"pin": True}


def path(found: rp.Branches, joint: str) -> Array:
    """``(n_branches, n_frames, 2)`` of one joint."""
    way: Array = found.positions[:, :, found.joints.index(joint)]
    return way


def about_the_middle(mask: NDArray[np.bool_]) -> NDArray[np.bool_]:
    """The stretch of a mask that holds its middle."""
    middle = len(mask) // 2
    assert mask[middle]
    low = middle - int(np.argmin(np.append(mask[middle::-1], False))) + 1
    high = middle + int(np.argmin(np.append(mask[middle:], False)))
    out = np.zeros_like(mask)
    out[low:high] = True
    return out


def at_rest(found: rp.Branches, joint: str, frame: int) -> Array:
    """A joint's way, ``(n_frames, 2)``, in the row that is at rest at this frame."""
    rest = rp.find_rest(found.rig).positions
    away = np.abs(found.positions[:, frame] - rest).max(axis=(1, 2))
    assert np.nanmin(away) < 1e-9
    way: Array = path(found, joint)[int(np.nanargmin(away))]
    return way


def bar(joints: list[str], places: list[float]) -> dict[str, object]:
    """A straight bar that carries joints at these places along it."""
    return {"joints": joints, "shape": [[x, 0.0] for x in places]}


# -- exact lines ----------------------------------------------------------------------------------

def inversor(arm: float, side: float, lead: float, drawn: bool = True) -> rp.Rig:
    """Peaucellier's cell with its near corner led round a circle through the pivot."""
    corners = {"near": [2 * lead, 0], "upper": [lead, 1], "lower": [lead, -1], "far": [4 * lead, 0]}
    return rp.make_rig(
        {"pivot": {"at": [0, 0], **PIN}, "centre": {"at": [lead, 0], **PIN},
         **(corners if drawn else {n: {} for n in corners})},
        {"lead": {"ends": ["centre", "near"], "length": lead},
         "arm_1": {"ends": ["pivot", "upper"], "length": arm},
         "arm_2": {"ends": ["pivot", "lower"], "length": arm},
         **{f"side_{k}": {"ends": ends, "length": side} for k, ends in enumerate(
             [["near", "upper"], ["near", "lower"], ["upper", "far"], ["lower", "far"]])}},
        cranks={"turn": {"turns": "lead", "about": "centre"}})


def test_peaucelliers_line_is_exact_over_the_whole_reach() -> None:
    """OP * OP' = l^2 - r^2 and x = (l^2 - r^2) / (2 e): Peaucellier 1864, Lipkin 1871.

    With l = 5, r = 3, e = 2 the line is x = 4, and P' is out of reach past |OP'| = l + r = 8,
    which is where the lead has turned by 120 degrees.
    """
    turn = np.linspace(-120 + 1e-4, 120 - 1e-4, 4001)
    found = rp.find_branches(inversor(5, 3, 2), {"turn": turn})
    near, far = path(found, "near"), path(found, "far")
    cell = np.linalg.norm(near - far, axis=2).max(axis=1) > 1e-6
    # Two hands of the cell; in two other rows the far corner has folded back onto the near one.
    assert (cell.sum(), len(found)) == (2, 4)
    assert (found.state == rp.State.MET).all()
    assert all(abs(e.frame - 2000) < 1e-6 for row in found.events for e in row)
    assert np.ptp(far[cell, :, 1], axis=1) == pytest.approx(2 * math.sqrt(48), abs=1e-2)
    # In mid-stroke P and P' meet: a dead centre, close to which rounding grows.
    rounding = 1e-15 * found.size / np.maximum(found.margin[cell], 1e-7)
    assert (np.abs(far[cell, :, 0] - 4) < rounding).all()
    assert (np.abs((near * far).sum(axis=2)[cell] - 16) < 4 * rounding).all()
    # P and P' are on one ray.
    across = near[..., 0] * far[..., 1] - near[..., 1] * far[..., 0]
    assert np.abs(across[cell]).max() < 1e-11
    assert len(rp.find_branches(inversor(5, 3, 2), {"turn": 120.01})) == 0


def test_peaucelliers_cell_is_posed_by_its_lengths_alone() -> None:
    """Though it can fold so that its far corner turns freely: the drawn cell has the same poses."""
    drawn, bare = (rp.find_branches(inversor(5, 3, 2, d), {"turn": 30.0}) for d in (True, False))
    assert len(drawn) == len(bare) == 4
    apart = np.abs(drawn.positions[:, None, 0] - bare.positions[None, :, 0]).max(axis=(2, 3))
    assert apart.min(axis=0).max() < 1e-12
    assert apart.min(axis=1).max() < 1e-12


@pytest.mark.parametrize("m", [0.4, 0.3])
def test_harts_line_is_exact(m: float) -> None:
    """Hart 1874: on an antiparallelogram AB = CD = a, BC = DA = b, points at one fraction m of
    AD, AB and CD are on a line with OP * OQ = m (1 - m) (a^2 - b^2)."""
    a, b, lead = 5.0, 3.0, 1.0
    product = m * (1 - m) * (a * a - b * b)
    rig = rp.make_rig(
        {"O": {"at": [0, 0], **PIN}, "centre": {"at": [lead, 0], **PIN}, "P": {}, "A": {}, "B": {},
         "C": {}, "D": {}, "Q": {}},
        {"lead": {"ends": ["centre", "P"], "length": lead},
         "CB": {"ends": ["C", "B"], "length": b}},
        plates={"AD": bar(["A", "O", "D"], [0, m * b, b]),
                "AB": bar(["A", "P", "B"], [0, m * a, a]),
                "CD": bar(["C", "Q", "D"], [0, m * a, a])},
        cranks={"turn": {"turns": "lead", "about": "centre"}})
    # P's reach is where A still closes over O and P: |OP| from m (a - b) on.
    most = 2 * math.degrees(math.acos(m * (a - b) / (2 * lead))) - 1
    found = rp.find_branches(rig, {"turn": np.linspace(-most, most, 1001)})
    gone = np.linalg.norm(path(found, "C") - path(found, "A"), axis=2)
    # AC * BD = a^2 - b^2 tells the antiparallelogram from the parallelogram.
    other = np.linalg.norm(path(found, "B") - path(found, "D"), axis=2)
    anti = (np.abs(gone * other - (a * a - b * b)) < 1e-9).all(axis=1)
    assert (anti.sum(), len(found)) == (2, 4)
    o_p, q = path(found, "P")[anti], path(found, "Q")[anti]
    assert np.abs((o_p * q).sum(axis=2) - product).max() < 1e-13
    assert np.abs(q[..., 0] - product / (2 * lead)).max() < 1e-13
    assert np.ptp(q[..., 1], axis=1).min() > 2


def test_scott_russells_line_is_exact_and_goes_through_its_dead_centres() -> None:
    """OA = AB = AC = r, B on a line through O: B = 2 r cos t, C = 2 r sin t square to it.

    Twice a turn B comes to O, where the rod could begin to turn with the crank instead; that
    other motion keeps B at O for ever.
    """
    r = 1.5
    rig = rp.make_rig(
        {"O": {"at": [0, 0], **PIN}, "A": {}, "B": {}, "C": {}},
        {"crank": {"ends": ["O", "A"], "length": r}},
        plates={"rod": bar(["B", "A", "C"], [0, r, 2 * r])},
        rails={"line": {"joint": "B", "through": [0, 0], "direction": [1, 0]}},
        cranks={"turn": {"turns": "crank", "about": "O"}})
    turn = np.linspace(0, 1080, 1081)
    found = rp.find_branches(rig, {"turn": turn})
    assert len(found) == 2
    assert (found.state == rp.State.MET).all()
    moving = int(np.argmax(np.ptp(path(found, "B")[..., 0], axis=1)))
    t = np.radians(turn)
    want = 2 * r * np.stack([np.cos(t), np.zeros_like(t)], axis=1)
    assert np.abs(path(found, "B")[moving] - want).max() < 1e-14 * found.size * 4
    assert np.abs(path(found, "C")[moving] - 2 * r * np.stack(
        [np.zeros_like(t), np.sin(t)], axis=1)).max() < 1e-14 * found.size * 4
    assert np.abs(path(found, "B")[1 - moving]).max() < 1e-14 * found.size
    passed = [e for e in found.events[moving] if e.kind == "passed"]
    assert [e.frame for e in passed] == pytest.approx([90, 270, 450, 630, 810, 990], abs=1e-9)


# -- Watt -----------------------------------------------------------------------------------------

def watt(b: float, c: float) -> rp.Rig:
    """Equal arms b, coupler 2 c, arms parallel in mid-position."""
    return rp.make_rig(
        {"one": {"at": [-b, c], **PIN}, "two": {"at": [b, -c], **PIN}, "top": [0, c],
         "trace": [0, 0], "bottom": [0, -c]},
        {"arm_1": ["one", "top"], "arm_2": ["two", "bottom"]},
        plates={"coupler": ["top", "trace", "bottom"]},
        cranks={"turn": {"turns": "arm_1", "about": "one"}})


WATT = [  # c, y, largest |x| for |y| up to it, with b = 1 (worked out again)
    (0.25, 0.2, 1.669e-4), (0.25, 0.4, 6.285e-3), (0.25, 0.5, 2.2956e-2),
    (0.5, 0.2, 8.336e-5), (0.5, 0.4, 3.066e-3), (0.5, 0.5, 1.0601e-2),
]


@pytest.mark.parametrize(("c", "y", "most"), WATT)
def test_watts_line_leaves_the_straight_by_the_fifth_power(c: float, y: float, most: float) -> None:
    """Watt 1784. Leading error x = y^5 / (8 c b^3), y along the line (worked out again)."""
    rig = watt(1.0, c)
    trace = at_rest(rp.find_branches(rig, {"turn": np.linspace(-36, 36, 7201)}), "trace", 3600)
    inside = about_the_middle(np.abs(trace[:, 1]) <= y)
    assert np.abs(trace[inside, 0]).max() == pytest.approx(most, rel=2e-3)
    # The same by asking for the height itself: the pose nearest to rest has this x.
    asked = rp.find_branches(rig, targets={"trace": {"y": y}})
    assert abs(asked.positions[0, 0, rig.index["trace"], 0]) == pytest.approx(most, rel=5e-4)
    near = 3600 + np.abs(trace[3600:6000, 1] - 0.05).argmin()
    lead = trace[near, 1] ** 5 / (8 * c)
    assert abs(trace[near, 0]) == pytest.approx(abs(lead), rel=2e-2)


@pytest.mark.parametrize(("b", "c"), [(1.0, 0.25), (1.0, 0.5), (0.8, 0.7)])
def test_watts_curve(b: float, c: float) -> None:
    """r^2 = b^2 - [a sin f +/- sqrt(c^2 - a^2 cos^2 f)]^2 (from memory, worked out again)."""
    found = rp.find_branches(watt(b, c), {"turn": np.linspace(-180, 180, 1001)})
    a = math.hypot(b, c)
    trace = path(found, "trace").reshape(-1, 2)
    trace = trace[np.isfinite(trace[:, 0]) & (np.hypot(*trace.T) > 1e-3)]
    f = np.arctan2(trace[:, 1], trace[:, 0]) - math.atan2(-c, b)
    share, under = a * np.sin(f), c * c - (a * np.cos(f)) ** 2
    # Squared, so that both signs of the root are in it and nothing is lost where it vanishes.
    left = (trace**2).sum(axis=1) - b * b + share**2 + under
    assert len(trace) > 400
    assert np.abs(left**2 - 4 * share**2 * under).max() < 1e-12


def test_watts_curve_can_be_bernoullis_lemniscate() -> None:
    """With a = c and b = a sqrt 2: r^2 = 2 a^2 cos 2 f (elementary, from the curve above)."""
    a, b = 1.0, math.sqrt(2)
    rig = rp.make_rig(
        {"one": {"at": [-a, 0], **PIN}, "two": {"at": [a, 0], **PIN},
         "top": {}, "trace": {}, "bottom": {}},
        {"arm_1": {"ends": ["one", "top"], "length": b},
         "arm_2": {"ends": ["two", "bottom"], "length": b}},
        plates={"coupler": bar(["top", "trace", "bottom"], [-a, 0, a])},
        cranks={"turn": {"turns": "arm_1", "about": "one"}})
    found = rp.find_branches(rig, {"turn": np.linspace(1, 359, 500)})
    trace = path(found, "trace").reshape(-1, 2)
    trace = trace[np.isfinite(trace[:, 0])]
    r2, f = (trace**2).sum(axis=1), np.arctan2(trace[:, 1], trace[:, 0])
    # The other way to close is a parallelogram, whose mid-point runs on a circle.
    on_curve = np.abs(r2 - 2 * a * a * np.cos(2 * f))
    on_circle = np.abs(r2 - b * b)
    assert np.minimum(on_curve, on_circle).max() < 1e-12
    assert min((on_curve < 1e-12).sum(), (on_circle < 1e-12).sum()) > 100


# -- Chebyshev, Hoeken, Roberts -------------------------------------------------------------------

def test_chebyshevs_line() -> None:
    """Crossed arms, frame : arms : coupler = 4 : 5 : 2: the coupler's middle is at height 4 for
    x = 0, 2, 4 and between 4 and 4.0097537 over the stroke of 4 (worked out again)."""
    rig = rp.make_rig(
        {"left": {"at": [0, 0], **PIN}, "right": {"at": [4, 0], **PIN}, "a": [3, 4],
         "middle": [2, 4], "b": [1, 4]},
        {"arm_1": ["left", "a"], "arm_2": ["right", "b"]}, plates={"coupler": ["a", "middle", "b"]},
        cranks={"turn": {"turns": "arm_1", "about": "left"}})
    found = rp.find_branches(rig, {"turn": np.linspace(35, 91, 20001)})
    x, y = path(found, "middle")[0].T
    inside = (x >= 0) & (x <= 4)
    assert np.ptp(x[inside]) > 3.99
    assert y[inside].min() == pytest.approx(4, abs=1e-12)
    assert y[inside].max() == pytest.approx(4.0097537, abs=5e-8)
    for place in (0.0, 2.0, 4.0):
        # Asked for its x the coupler's middle is at height 4 exactly.
        asked = rp.find_branches(rig, targets={"middle": {"x": place}})
        height = path(asked, "middle")[:, 0, 1]
        assert np.abs(height - 4).min() < 1e-12


def hoeken(frame: float, coupler: float) -> rp.Rig:
    """Crank 1, coupler and follower equal, and the tracing point as far beyond again."""
    return rp.make_rig(
        {"hub": {"at": [0, 0], **PIN}, "post": {"at": [frame, 0], **PIN}, "pin": {}, "knee": {},
         "trace": {}},
        {"crank": {"ends": ["hub", "pin"], "length": 1},
         "follower": {"ends": ["post", "knee"], "length": coupler}},
        plates={"coupler": bar(["pin", "knee", "trace"], [0, coupler, 2 * coupler])},
        cranks={"turn": {"turns": "crank", "about": "hub"}})


def traced(frame: float, coupler: float, degrees: float) -> Array:
    """The way of the tracing point, (n, 2), over so much of the crank's turn about 180."""
    turn = 180 + np.linspace(-degrees / 2, degrees / 2, 20001)
    way: Array = path(rp.find_branches(hoeken(frame, coupler), {"turn": turn}), "trace")[0]
    return way


@pytest.mark.parametrize(("degrees", "stroke", "spread"), [
    (180, 4.00000, 0.2438), (200, 4.31820, 0.2259), (220, 4.55859, 0.4728), (240, 4.69042, 1.3223)])
def test_hoekens_line(degrees: float, stroke: float, spread: float) -> None:
    """1 : 2 : 2.5: stroke, and height's spread in % of it (worked out again)."""
    x, y = traced(2.0, 2.5, degrees).T
    assert np.ptp(x) == pytest.approx(stroke, abs=6e-6)
    assert np.ptp(y) / np.ptp(x) * 100 == pytest.approx(spread, abs=6e-5)


BEST = [  # degrees, L1 / L2, L3 / L2, stroke / L2, height's spread and speed's spread in %
    (20, 2.975, 3.9625, 0.6013, 0.000011, 0.378), (40, 2.950, 3.925, 1.1930, 0.000044, 1.527),
    (60, 2.900, 3.850, 1.7629, 0.000265, 3.479), (80, 2.825, 3.7375, 2.2991, 0.001169, 6.264),
    (100, 2.725, 3.5875, 2.7898, 0.003671, 9.892), (120, 2.625, 3.4375, 3.2380, 0.010310, 14.661),
    (140, 2.500, 3.250, 3.6226, 0.023091, 20.432), (160, 2.350, 3.025, 3.9331, 0.047440, 27.074),
    (180, 2.200, 2.800, 4.1808, 0.096308, 35.194),
]


@pytest.mark.parametrize(("degrees", "frame", "coupler", "stroke", "height", "speed"), BEST)
def test_hoekens_line_at_its_straightest(
    degrees: float, frame: float, coupler: float, stroke: float, height: float, speed: float,
) -> None:
    """The table of proportions for most straightness (Norton, Design of Machinery; from memory,
    and reproduced)."""
    assert coupler == pytest.approx((3 * frame - 1) / 2)
    x, y = traced(frame, coupler, degrees).T
    assert np.ptp(x) == pytest.approx(stroke, abs=6e-5)
    assert np.ptp(y) / np.ptp(x) * 100 == pytest.approx(height, abs=6e-7)
    rate = np.abs(np.diff(x))
    assert np.ptp(rate) / rate.mean() * 100 == pytest.approx(speed, abs=5e-3)


@pytest.mark.parametrize(("r", "most"), [(1.0, 0.0319292), (1.2, 0.0136420), (1.5, 0.0058737)])
def test_roberts_line(r: float, most: float) -> None:
    """Frame 2, coupler 1, arms and the apex's sides r: through both pivots and the middle, and
    off the line between by ``most`` (worked out again)."""
    deep = -math.sqrt(r * r - 0.25)
    rig = rp.make_rig(
        {"left": {"at": [0, 0], **PIN}, "right": {"at": [2, 0], **PIN}, "a": [0.5, -deep],
         "b": [1.5, -deep], "apex": [1, 0]},
        {"arm_1": ["left", "a"], "arm_2": ["right", "b"]}, plates={"coupler": ["a", "b", "apex"]},
        cranks={"turn": {"turns": "arm_1", "about": "left"}})
    rest = math.degrees(math.atan2(-deep, 0.5))
    found = rp.find_branches(rig, {"turn": rest + np.linspace(-60, 60, 24001)})
    x, y = at_rest(found, "apex", 12000).T
    # With r = 1 the arm turns back before the far pivot is reached; both halves are alike.
    inside = about_the_middle((x > 0.9) & (x <= 2)) & (x >= 1)
    assert np.ptp(x[inside]) > 0.999
    assert np.abs(y[inside]).max() == pytest.approx(most, abs=1e-6)
    asked = rp.find_branches(rig, targets={"apex": {"x": 2.0}})
    assert np.abs(path(asked, "apex")[:, 0, 1]).min() < 1e-7  # r = 1: a dead centre


# -- pantograph -----------------------------------------------------------------------------------

@pytest.mark.parametrize("seed", range(6))
def test_a_pantographs_pen_draws_k_times_the_tracers_figure(seed: int) -> None:
    """Similar triangles: fixed point, tracer and pen on one line in the ratio 1 : k."""
    rng = np.random.default_rng(seed)
    k, p, q = rng.uniform(1.3, 3.0), rng.uniform(0.5, 1.0), rng.uniform(0.5, 1.0)
    rig = rp.make_rig(
        {"fixed": {"at": [0, 0], **PIN}, "tracer": {}, "shoulder": {}, "elbow": {}, "wrist": {},
         "pen": {}},
        {"trace_bar": {"ends": ["shoulder", "tracer"], "length": q},
         "side_bar": {"ends": ["tracer", "wrist"], "length": p * (k - 1)}},
        plates={"long_bar": bar(["fixed", "shoulder", "elbow"], [0, p, k * p]),
                "pen_bar": bar(["elbow", "wrist", "pen"], [0, q, k * q])})
    t = np.linspace(0, 2 * np.pi, 181)
    reach = (abs(p - q) + p + q) / 2
    figure = np.stack([reach + 0.2 * (p + q - reach) * np.cos(t), 0.1 * np.sin(3 * t)], axis=1)
    found = rp.find_branches(rig, targets={"tracer": figure})
    pen = path(found, "pen")
    similar = np.abs(pen - k * figure).max(axis=(1, 2)) < 1e-13 * found.size
    # For each side of the elbow: the parallelogram, and the same bars folded over.
    assert (similar.sum(), len(found)) == (2, 4)
    assert angle(found, "fixed", "elbow")[similar].std(axis=0).min() > 0
