"""The steps of a plan in plain numbers, for one pose at a time.

Each step is made into a function of the state once; lengths, targets and drives of the frame are
put in then. The formulas and bounds are those of `run`, `runspace` and `fitting`.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import replace
from functools import singledispatch
from math import sqrt
from typing import NamedTuple

import numpy as np

from rigpose.ground.tolerance import EPS
from rigpose.kernels.plain import (
    Crossing,
    Place,
    circle_circle,
    distance,
    fitted,
    line_circle,
    three_spheres,
)
from rigpose.solve.fitting import NEAR
from rigpose.solve.flow import reads, writes
from rigpose.solve.measure import FORGIVEN, LEAST
from rigpose.solve.plan import (
    Aim,
    Carry,
    Check,
    Circle,
    Fit,
    Given,
    Hang,
    Hinge,
    Junction,
    Length,
    Line,
    Meet,
    Orient,
    Point,
    Ride,
    Seat,
    Shift,
    Slide,
    Step,
)
from rigpose.solve.run import CAREFUL, ONE_PLACE, run_steps
from rigpose.solve.table import Table


class Choice(NamedTuple):
    """Two ways to place a point."""

    dst: int
    bit: int
    one: Place
    other: Place
    bound: float
    margin: float


class State:
    """Places and error bounds by point, and the least margin so far."""

    __slots__ = ("bound", "margin", "place")

    def __init__(self, place: list[Place], bound: list[float], margin: float) -> None:
        self.place, self.bound, self.margin = place, bound, margin


Taker = Callable[[State], "Choice | bool | None"]
"""Takes a step: its two ways, whether it can be taken, or None where plain numbers can't tell."""
BY_ARRAYS = (Aim, Carry, Check, Given, Hang, Hinge, Meet, Junction, Orient, Ride, Seat, Shift,
             Slide)
"""Steps that place each of their points in one way, or one point in two."""


@singledispatch
def taker_of(step: Step, table: Table) -> Taker | None:
    """A step made ready, or None where there is no way to take it alone; ``table`` holds what is
    known."""
    return _by_arrays(step, table) if isinstance(step, BY_ARRAYS) else None


def _by_arrays(step: Step, table: Table) -> Taker:
    """A step that has no plain form, run on arrays of one pose."""
    read, made = sorted(reads(step)), writes(step)
    levels: dict[Point | tuple[str, int], int] = {
        ("v", v): table.level_of["v", v] for v in table.values}

    def take(state: State) -> Choice | bool | None:
        one = replace(table, points={}, made={}, level_of=dict(levels), bounds={}, bound_level={},
                      maps=[], codes=[], sines=[], sine_bounds=[], alive=None, margin=None,
                      flagged=None, turning=set(), careful=True)
        for p in read:
            one.put(p, np.array(state.place[p]).reshape(-1, 1, 1), state.bound[p])
        run_steps((step,), one, None)
        if one.turning:
            return None
        if one.branches == 0 or (one.alive is not None and not one.alive.any()):
            return False
        margin = 1.0 if one.margin is None else float(one.margin.min())
        if one.branches == 2:
            both = one.points[made[0]]
            return Choice(made[0], getattr(step, "bit", 0), tuple(both[:, 0, 0].tolist()),
                          tuple(both[:, 1, 0].tolist()), float(np.max(one.bound(made[0]))), margin)
        for p in made:
            state.place[p] = tuple(one.points[p][:, 0, 0].tolist())
            state.bound[p] = float(np.max(one.bound(p)))
        state.margin = min(state.margin, margin)
        return True

    return take


def _length(length: Length, table: Table) -> float | None:
    if length.points is not None:
        return None
    return float(table.value(length.value)[0, 0]) if length.value >= 0 else length.constant


def _choice(step: Meet | Junction, crossing: Crossing, delta: float,
            rate: tuple[float, float, float], table: Table, held: bool = False) -> Choice | bool:
    """As `run.choose`: touching surfaces within their error bound hold both ways. Where a fit
    follows (``held``), that knows the margin."""
    base, side, sine2, sine = crossing
    per_place, radius, own = rate
    limit = FORGIVEN * table.reach
    if abs(sine2) <= min(per_place * min(delta, table.sure) + own, CAREFUL):
        return Choice(step.dst, step.bit, base, base, min(sqrt(2 * radius * delta), limit),
                      1.0 if held else 0.0)
    if not sine2 > 0.0:
        return False
    bound = min(delta / sine, sqrt(2 * radius * delta), limit)
    margin = 1.0 if held else sine
    if len(base) == 2:
        (x, y), (u, v) = base, side
        return Choice(step.dst, step.bit, (x + u, y + v), (x - u, y - v), bound, margin)
    (x, y, z), (u, v, w) = base, side
    return Choice(step.dst, step.bit, (x + u, y + v, z + w), (x - u, y - v, z - w), bound,
                  margin)


@taker_of.register
def _(step: Meet, table: Table) -> Taker | None:
    if not isinstance(step.second, Circle) or step.bit < 0:
        return _by_arrays(step, table)
    radius = _length(step.second.radius, table)
    if radius is None or radius <= 0.0:
        return _by_arrays(step, table)
    if isinstance(step.first, Circle):
        other = _length(step.first.radius, table)
        return _two_circles(step, table, other, radius) if other and other > 0.0 else (
            _by_arrays(step, table))
    return _line(step, table, step.first, radius)


def _two_circles(step: Meet, table: Table, r1: float, r2: float) -> Taker:
    assert isinstance(step.first, Circle) and isinstance(step.second, Circle)
    a, b = step.first.centre, step.second.centre
    rounding, sure, small = table.rounding, table.sure, min(r1, r2)
    far, near, scale = (r1 + r2) ** 2, (r1 - r2) ** 2, EPS / (r1 * r2) ** 2

    def take(state: State) -> Choice | bool | None:
        c1, c2 = state.place[a], state.place[b]
        crossing = circle_circle(c1, r1, c2, r2)
        delta = rounding + state.bound[a] + state.bound[b]
        long = distance(c1, c2)
        if crossing is None or long <= ONE_PLACE * min(delta, sure):
            return None
        d2 = long * long
        own = (abs(far - d2) * (d2 + near) + abs(d2 - near) * (far + d2)) * scale
        return _choice(step, crossing, delta, (2 * long / (r1 * r2), small, own), table)

    return take


def _line(step: Meet, table: Table, line: Line, radius: float) -> Taker | None:
    """A line that stands where the file or a target puts it."""
    if line.moved is not None or line.kind not in ("fixed", "axis", "across"):
        return _by_arrays(step, table)
    assert isinstance(step.second, Circle)
    centre, rounding = step.second.centre, table.rounding
    through, direction = line.through, line.direction
    if line.kind == "axis":
        given = float(table.inputs.targets[line.joint, line.axis][0])
        through = tuple(given if k == line.axis else 0.0 for k in range(2))
        direction = (1.0 - (line.axis == 0), float(line.axis == 0))
    elif line.kind == "across":
        way = float(table.value(line.value)[0, 0])
        through = tuple(p + d * way for p, d in zip(through, direction, strict=True))
        direction = (-direction[1], direction[0])

    def take(state: State) -> Choice | bool | None:
        crossing = line_circle(through, direction, state.place[centre], radius)
        delta = rounding + state.bound[centre]
        return None if crossing is None else _choice(
            step, crossing, delta, (2.0 / radius, radius, 16 * EPS), table)

    return take


@taker_of.register
def _(step: Carry, table: Table) -> Taker | None:
    base = step.base
    if not isinstance(base[0], tuple) or not isinstance(base[1], tuple):
        return _by_arrays(step, table)
    (p, q), (s, t) = step.placed, base[0]
    g, h = base[1][0] - s, base[1][1] - t
    square = g * g + h * h
    shares = []
    for dst, local in zip(step.dst, step.local, strict=True):
        if not isinstance(local, tuple):
            return _by_arrays(step, table)
        i, j = local[0] - s, local[1] - t
        shares.append((dst, (i * g + j * h) / square, (g * j - h * i) / square))
    rounding, own = table.rounding, sqrt(square)
    limit = FORGIVEN * table.reach

    def take(state: State) -> bool:
        (x, y), (u, v) = state.place[p], state.place[q]
        e, f = u - x, v - y
        # The base may be off by rounding: the body is turned, never stretched.
        true = own / sqrt(e * e + f * f)
        e, f = e * true, f * true
        bound = min(2 * (rounding + state.bound[p] + state.bound[q]), limit)
        for dst, along, across in shares:
            state.place[dst] = (x + along * e - across * f, y + along * f + across * e)
            state.bound[dst] = bound
        return True

    return take


@taker_of.register
def _(step: Junction, table: Table) -> Taker | None:
    if step.bit < 0 or not all(isinstance(c, Circle) for c in step.curves):
        return _by_arrays(step, table)
    circles = [c for c in step.curves if isinstance(c, Circle)]
    radii = [_length(c.radius, table) for c in circles]
    if len(circles) != 3 or not all(r is not None and r > 0.0 for r in radii):
        return _by_arrays(step, table)
    (a, b, c), (r1, r2, r3) = (c.centre for c in circles), (r for r in radii if r is not None)
    rounding, sure, product = table.rounding, table.sure, r1 * r2 * r3

    def take(state: State) -> Choice | bool | None:
        made = three_spheres(state.place[a], r1, state.place[b], r2, state.place[c], r3)
        delta = rounding + state.bound[a] + state.bound[b] + state.bound[c]
        if made is None or made[1] <= (ONE_PLACE * min(delta, sure)) ** 2 * made[2]:
            return None
        crossing, area2, _, lever = made
        share = area2 / (product * product)
        rate = (2 * r1 * (1 + lever) * share, r1 * (1 + lever), 16 * EPS * r1 * r1 * (1 + lever)
                * share)
        return _choice(step, crossing, delta, rate, table, step.fitted)

    return take


@taker_of.register
def _(step: Fit, table: Table) -> Taker | None:
    spheres = [(c.centre, c.radius.constant) for c in step.circles]
    dst, near, rounding = step.dst, NEAR * table.reach, table.rounding
    least = min(r for _, r in spheres)

    def take(state: State) -> bool | None:
        place = state.place
        made = fitted(place[dst], [(place[c], r) for c, r in spheres])
        if made is None:
            return None
        moved, volume2, worst = made
        margin = sqrt(volume2)
        state.margin = min(state.margin, margin)
        if worst < near:
            place[dst] = moved
            left = worst * worst / least  # what a step from so near leaves
            state.bound[dst] = min((left + rounding) / margin, state.bound[dst])
        return True

    return take


@taker_of.register
def _(step: Check, table: Table) -> Taker | None:
    if step.kind != "distance":
        return _by_arrays(step, table)
    d, (a, b) = table.eqs.distances, step.points
    value = int(d.value[step.index])
    want = float(table.value(value)[0, 0]) if value >= 0 else float(d.length[step.index])
    allowed = max(table.slack, LEAST) * table.reach + float(d.play[step.index])
    most = FORGIVEN * table.reach

    def take(state: State) -> bool:
        off = abs(distance(state.place[a], state.place[b]) - want)
        return off <= allowed or off <= allowed + min(state.bound[a] + state.bound[b], most)

    return take
