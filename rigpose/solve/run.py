"""Runs the steps of a plan on arrays over branches and frames.

Each step is a function of the table; a step with two ways either doubles the branches (dead ones
are dropped at once) or takes the way that ``ways`` names for each branch and frame.
"""

from __future__ import annotations

from collections.abc import Callable, Mapping, Sequence
from functools import singledispatch

import numpy as np
from numpy.typing import NDArray

from rigpose.ground.tolerance import EPS
from rigpose.kernels.meet import (
    Array,
    Crossing,
    circle_circle,
    cross,
    dot,
    line_circle,
    line_line,
    perp,
    turn,
)
from rigpose.model.gauges import measure
from rigpose.solve.measure import FORGIVEN, check_passes
from rigpose.solve.newton import cluster_branches, cluster_follow
from rigpose.solve.plan import (
    Aim,
    Carry,
    Check,
    Circle,
    Cluster,
    Gauge,
    Given,
    Heading,
    Length,
    Level,
    Line,
    Local,
    Meet,
    Orient,
    Point,
    Seat,
    Shift,
    Slide,
    Step,
    Swing,
    Tied,
)
from rigpose.solve.table import Table
from rigpose.solve.values import joints_of_value

Ways = Mapping[int, Array] | None
"""For every choice ``(B or 1, F or 1)`` of +1 and -1; None tries both."""
Rate = Callable[[], tuple[Array | float, Array | float, Array | float]]
"""How fast a squared sine and a squared height change with the places read, and the rounding of
the squared sine."""
CAREFUL = 1e-7
ONE_PLACE = 64.0
"""Centres nearer than so many error bounds can't be told apart."""


def run_steps(steps: Sequence[Step], table: Table, ways: Ways, first: int = 0) -> None:
    """Run steps in order, numbered from ``first``; the table holds the result."""
    with np.errstate(invalid="ignore", divide="ignore", over="ignore"):
        for number, step in enumerate(steps, first):
            execute(step, table, ways, number)
            if table.branches == 0:
                return


@singledispatch
def execute(step: Step, table: Table, ways: Ways, number: int) -> None:
    """Run one step."""
    raise TypeError(f"no way to run {type(step).__name__}")


def local_of(table: Table, local: Local) -> Array:
    """A place of a body's own frame, ``(dim, B or 1, F or 1)``."""
    if isinstance(local, tuple):
        return np.array(local).reshape(-1, 1, 1)
    return table.point(local)


def length_of(table: Table, length: Length) -> Array | float:
    """A length as a number, or ``(B or 1, F or 1)``."""
    if length.points is not None:
        d = table.point(length.points[1]) - table.point(length.points[0])
        return np.sqrt(dot(d, d))
    if length.value >= 0:
        return table.value(length.value)
    return length.constant


def _heading(table: Table, heading: Heading) -> Array:
    """Unit vectors ``(2, B, F)``."""
    angle = heading.sign * (table.value(heading.value) + heading.zero)
    u = np.stack([np.cos(angle), np.sin(angle)])
    if heading.base is None:
        return u
    e = table.point(heading.base[1]) - table.point(heading.base[0])
    e = e / np.sqrt(dot(e, e))
    return np.stack(np.broadcast_arrays(
        u[0] * e[0] - u[1] * e[1], u[0] * e[1] + u[1] * e[0]))


def line_of(table: Table, line: Line) -> tuple[Array, Array]:
    """A point and a unit direction."""
    p, d = _plain_line(table, line)
    if line.moved is not None:
        p = p + table.point(line.moved[1]) - table.point(line.moved[0])
    return p, d


def _plain_line(table: Table, line: Line) -> tuple[Array, Array]:
    if line.kind == "slot":
        p, a, b = (table.point(k) for k in line.points)
        e = b - a
        return p, e / np.sqrt(dot(e, e))
    if line.kind == "points":
        p, q = (table.point(k) for k in line.points)
        e = q - p
        return p, e / np.sqrt(dot(e, e))
    if line.kind == "axis":
        given = table.inputs.targets[line.joint, line.axis][None]
        p = np.zeros((table.eqs.dim, *given.shape))
        p[line.axis] = given
        return p, np.array([1.0 - (line.axis == 0), float(line.axis == 0)]).reshape(2, 1, 1)
    if line.kind == "ray":
        return table.point(line.points[0]), _heading(table, line.heading)  # type: ignore[arg-type]
    p = np.array(line.through).reshape(-1, 1, 1)
    d = np.array(line.direction).reshape(-1, 1, 1)
    if line.kind == "across":
        return p + d * table.value(line.value), perp(d)
    return p, d


@execute.register
def _(step: Given, table: Table, ways: Ways, number: int) -> None:
    table.put(step.dst, np.stack(
        [table.inputs.targets[step.joint, axis][None] for axis in range(table.eqs.dim)]))


@execute.register
def _(step: Meet, table: Table, ways: Ways, number: int) -> None:
    first, second = step.first, step.second
    if isinstance(first, Circle) and isinstance(second, Circle):
        r1, r2 = length_of(table, first.radius), length_of(table, second.radius)
        c1, c2 = table.point(first.centre), table.point(second.centre)
        crossing = circle_circle(c1, r1, c2, r2)
        if table.careful:
            crossing = _without_free(step, table, crossing, c2 - c1, np.abs(r1 - r2))
        choose(step.dst, step.bit, crossing, table, ways, number,
               (first.centre, second.centre), lambda: _circle_rate(c1, r1, c2, r2))
    elif isinstance(first, Line) and isinstance(second, Circle):
        p, d = line_of(table, first)
        radius, centre = length_of(table, second.radius), table.point(second.centre)
        crossing = line_circle(p, d, centre, radius)
        choose(step.dst, step.bit, crossing, table, ways, number,
               (second.centre, *_line_points(first)), lambda: (2.0 / radius, radius, 16 * EPS))
    elif isinstance(first, Line) and isinstance(second, Line):
        point, sine = line_line(*line_of(table, first), *line_of(table, second))
        parents = (*_line_points(first), *_line_points(second))
        bound = parents_bound(table, parents) / sine if table.careful else 0.0
        table.put(step.dst, point, bound)
        table.kill(np.isfinite(point[0]), number)
        table.narrow(sine)


def _line_points(line: Line) -> tuple[Point, ...]:
    return (*line.points, *(line.moved or ()))


def _without_free(step: Meet, table: Table, crossing: Crossing, way: Array,
                  difference: Array | float) -> Crossing:
    """Equal circles about one point meet everywhere: the joint turns freely, which is told."""
    assert isinstance(step.first, Circle) and isinstance(step.second, Circle)
    bound = parents_bound(table, (step.first.centre, step.second.centre))
    room = ONE_PLACE * np.minimum(bound, table.sure)
    free = (np.sqrt(dot(way, way)) <= room) & (difference <= room)
    base, side, sine2, sine = crossing
    alive = free if table.alive is None else free & table.alive
    if not alive.any():
        return crossing
    table.turning.add((step.dst, step.parts))
    return base, side, np.where(free, -1.0, sine2), np.where(free, np.nan, sine)


def _circle_rate(
    c1: Array, r1: Array | float, c2: Array, r2: Array | float
) -> tuple[Array | float, Array | float, Array | float]:
    """How fast the squared sine and the squared height change with the centres' places, and the
    rounding of the squared sine itself: of its two factors far^2 - d^2 and d^2 - near^2."""
    d = c2 - c1
    d2 = dot(d, d)
    far, near = (r1 + r2) ** 2, (r1 - r2) ** 2
    own = (np.abs(far - d2) * (d2 + near) + np.abs(d2 - near) * (far + d2)) / (4 * (r1 * r2) ** 2)
    return 2 * np.sqrt(d2) / (r1 * r2), np.minimum(r1, r2), 4 * EPS * own


def parents_bound(table: Table, points: Sequence[Point]) -> Array | float:
    """The error bound that some points hand on."""
    total: Array | float = table.rounding
    for p in points:
        total = total + table.bound(p)
    return total


def choose(
    dst: Point, bit: int, crossing: tuple[Array, Array, Array, Array], table: Table, ways: Ways,
    number: int, parents: Sequence[Point], rate: Rate,
) -> None:
    """Take one way or both at a crossing; touching ones within their error bound hold both."""
    base, side, sine2, sine = crossing
    bound: Array | float = 0.0
    if table.careful:
        per_place, radius, own = rate()
        delta = parents_bound(table, parents)
        allowed = np.minimum(per_place * np.minimum(delta, table.sure) + own, CAREFUL)
        touch = np.abs(sine2) <= allowed
        if touch.any():
            side = np.where(touch, 0.0, side)
            sine = np.where(touch, 0.0, sine)
            sine2 = np.where(touch, 0.0, sine2)
        bound = np.minimum(delta / np.maximum(sine, 1e-300), np.sqrt(2 * radius * delta))
        bound = np.minimum(bound, FORGIVEN * table.reach)
        table.sine_bounds.append(np.broadcast_to(allowed, sine2.shape))
    else:
        near = np.abs(sine2) < CAREFUL
        if near.any():
            columns: NDArray[np.bool_] = np.asarray(near.any(axis=0))
            table.flagged = columns if table.flagged is None else table.flagged | columns
    if ways is not None:
        way = ways[bit]
        if table.guess is not None and dst >= 0 and dst < table.eqs.n:
            # Followed frame by frame: the side that continues the motion.
            away = table.guess[:, :, dst].transpose(2, 0, 1) - base
            way = np.where(dot(away, side) < 0, -1.0, 1.0)
        place = base + side * way
        table.sines.append(sine2)
        table.kill(sine2 >= 0, number)
        table.narrow(sine)
        table.put(dst, place, bound)
        return
    both(dst, base, side, sine2, sine, table, number, bound)


def both(
    dst: Point, base: Array, side: Array, sine2: Array, sine: Array, table: Table, number: int,
    bound: Array | float,
) -> None:
    """Double the branches."""
    b = table.branches
    place = np.empty((len(base), 2 * b, base.shape[2]))
    np.add(base, side, out=place[:, :b])
    np.subtract(base, side, out=place[:, b:])
    if table.heights_wanted:
        table.sines.append(sine2)
    table.kill(sine2 >= 0, number)
    table.narrow(sine)
    sign = np.repeat(np.array([1, -1], dtype=np.int16), b)
    assert table.alive is not None  # killing has just made it
    alive = _some(table.alive)
    if len(alive) != b:
        alive = np.broadcast_to(alive, (b,))
    index: NDArray[np.intp] | int = b
    if not alive.all():
        keep = np.flatnonzero(np.concatenate([alive, alive]))
        index, sign, place = keep % b, sign[keep], place[:, keep]
        if isinstance(bound, np.ndarray):
            bound = np.broadcast_to(bound, (b, bound.shape[-1]))[index]
    elif isinstance(bound, np.ndarray) and bound.shape[0] != 1:
        bound = np.concatenate([bound, bound])
    _widen(table, b)
    table.renumber(index)
    table.codes.append((sign, table.level))
    table.put(dst, place, bound)


def _some(alive: NDArray[np.bool_]) -> NDArray[np.bool_]:
    """``(B or 1,)`` whether a branch lives in any frame."""
    return alive[:, 0] if alive.shape[1] == 1 else np.asarray(alive.any(axis=1))


def _widen(table: Table, b: int) -> None:
    """Tables with a branch axis of one are spread where branches differ from now on."""
    frames = table.inputs.frames
    if table.alive is not None and len(table.alive) != b:
        table.alive = np.broadcast_to(table.alive, (b, table.alive.shape[-1]))
    if table.margin is not None and len(table.margin) != b:
        table.margin = np.broadcast_to(table.margin, (b, table.margin.shape[-1]))
    if table.killer is not None and len(table.killer) != b:
        table.killer = np.broadcast_to(table.killer, (b, frames))
    table.sines = [s if len(s) == b else np.broadcast_to(s, (b, s.shape[-1]))
                   for s in table.sines]


def _spin(step: Carry | Aim | Swing, table: Table, cos: Array, sin: Array, pivot: Array,
          local: Array, bound: Array | float) -> None:
    """Place all joints of a body turned by (cos, sin) about a placed point."""
    shape = np.broadcast_shapes(cos.shape, pivot.shape[1:], local.shape[1:])
    for dst, place in zip(step.dst, step.local, strict=True):
        w = local_of(table, place) - local
        one = w.shape[1:] == (1, 1)
        out = np.empty((2, *(shape if one else np.broadcast_shapes(shape, w.shape[1:]))))
        np.multiply(cos, w[0], out=out[0])
        out[0] -= sin * w[1]
        np.multiply(sin, w[0], out=out[1])
        out[1] += cos * w[1]
        out += pivot
        table.put(dst, out, bound)


@execute.register
def _(step: Carry, table: Table, ways: Ways, number: int) -> None:
    p, q = (table.point(k) for k in step.placed)
    a, b = (local_of(table, k) for k in step.base)
    e, w = q - p, b - a
    scale = 1.0 / dot(w, w)
    # Turned by placed / local as complex numbers; the length of the base is a check elsewhere.
    cos, sin = dot(w, e) * scale, cross(w, e) * scale
    long = 1.0 / np.sqrt(cos * cos + sin * sin)
    bound = parents_bound(table, step.placed) * 2.0 if table.careful else 0.0
    _spin(step, table, cos * long, sin * long, p, a, bound)


@execute.register
def _(step: Aim, table: Table, ways: Ways, number: int) -> None:
    u = _heading(table, step.heading)
    a, b = (local_of(table, k) for k in step.line)
    e = b - a
    e = e / np.sqrt(dot(e, e))
    pivot = table.point(step.pivot)
    bound = parents_bound(table, (step.pivot, *(step.heading.base or ()))) if table.careful else 0.0
    _spin(step, table, dot(e, u), cross(e, u), pivot, local_of(table, step.pivot_local), bound)


@execute.register
def _(step: Swing, table: Table, ways: Ways, number: int) -> None:
    a, b = (local_of(table, k) for k in step.slot)
    pivot, c = table.point(step.pivot), local_of(table, step.pivot_local)
    e = b - a
    normal = perp(e / np.sqrt(dot(e, e)))
    w = table.point(step.through) - pivot
    offset = dot(normal, a - c)
    crossing = turn(dot(normal, w), cross(normal, w), offset)
    long = np.sqrt(dot(w, w))
    helper = -1 - number
    choose(helper, step.bit, crossing, table, ways, number, (step.pivot, step.through),
           lambda: (2.0 / long, 1.0, 16 * EPS))
    heading = table.point(helper)
    pivot, c = table.point(step.pivot), local_of(table, step.pivot_local)
    arms = [np.sqrt(dot(v, v)) for v in (local_of(table, k) - c for k in step.local)]
    reach = np.max(np.stack(np.broadcast_arrays(*arms)), axis=0)
    w = table.point(step.through) - pivot
    # The slot's offset turns the body by its change over the way along the slot.
    along = np.sqrt(np.maximum(dot(w, w) - _slot_offset(table, step) ** 2, 0.0))
    table.narrow(np.minimum(along / reach, 1.0))
    _spin(step, table, heading[0], heading[1], pivot, c, table.bound(helper))


def _slot_offset(table: Table, step: Swing) -> Array:
    a, b = (local_of(table, k) for k in step.slot)
    e = b - a
    return cross(e / np.sqrt(dot(e, e)), local_of(table, step.pivot_local) - a)


@execute.register
def _(step: Slide, table: Table, ways: Ways, number: int) -> None:
    p, q = (table.point(k) for k in step.line)
    e = q - p
    table.put(step.dst, p + e * (table.value(step.value) / np.sqrt(dot(e, e))),
              parents_bound(table, step.line) if table.careful else 0.0)


@execute.register
def _(step: Seat, table: Table, ways: Ways, number: int) -> None:
    for dst, place in zip(step.dst, step.local, strict=True):
        table.put(dst, local_of(table, place))


@execute.register
def _(step: Shift, table: Table, ways: Ways, number: int) -> None:
    place = table.point(step.point) + table.point(step.plus) - table.point(step.minus)
    table.put(step.dst, place, parents_bound(table, (step.point,)) if table.careful else 0.0)


@execute.register
def _(step: Orient, table: Table, ways: Ways, number: int) -> None:
    u = _heading(table, step.heading)
    a, b = (local_of(table, k) for k in step.line)
    e = b - a
    e = e / np.sqrt(dot(e, e))
    cos, sin = dot(e, u), cross(e, u)
    for dst, place in zip(step.dst, step.local, strict=True):
        w = local_of(table, place) - a
        table.put(dst, np.stack(np.broadcast_arrays(
            cos * w[0] - sin * w[1], sin * w[0] + cos * w[1])))


@execute.register
def _(step: Level, table: Table, ways: Ways, number: int) -> None:
    a, b = (local_of(table, k) for k in step.pair)
    e = b - a
    long = np.sqrt(dot(e, e))
    d = np.array(step.direction).reshape(2, 1, 1)
    rise = np.broadcast_to(step.offset / long, (len(long), table.inputs.frames))
    sine2 = (1.0 - rise) * (1.0 + rise)
    sine = np.sqrt(sine2)
    choose(-1 - number, step.bit, (perp(d) * rise, d * sine, sine2, sine), table, ways, number, (),
           lambda: (2.0 / long, 1.0, 16 * EPS))
    # The choice has doubled the branches: what was read before is read again.
    heading = table.point(-1 - number)
    a, b = (local_of(table, k) for k in step.pair)
    e = (b - a) / np.sqrt(dot(b - a, b - a))
    cos, sin = dot(e, heading), cross(e, heading)
    for dst, place in zip(step.dst, step.local, strict=True):
        w = local_of(table, place) - a
        table.put(dst, np.stack(np.broadcast_arrays(
            cos * w[0] - sin * w[1], sin * w[0] + cos * w[1])), table.bound(-1 - number))


@execute.register
def _(step: Gauge, table: Table, ways: Ways, number: int) -> None:
    eqs = table.eqs
    joints = joints_of_value(eqs, step.value)
    arrays = np.broadcast_arrays(*(table.point(j) for j in joints))
    b, f = arrays[0].shape[1:]
    x = np.zeros((b * f, eqs.n, eqs.dim))
    for j, array in zip(joints, arrays, strict=True):
        x[:, j] = array.reshape(eqs.dim, -1).T
    value = measure(eqs, x, np.array([step.value]))[:, 0].reshape(b, f)
    if step.value in table.eqs.angles.value:
        value = _unwrapped(table, step.value, value)
    table.put_value(step.value, value)


def _unwrapped(table: Table, number: int, value: Array) -> Array:
    """Angles that go on from one frame to the next, or lie next to the hint."""
    hint = table.hints.get(number)
    if table.consecutive and value.shape[1] > 1:
        value = _unrolled(value)
        hint = None if hint is None else hint[:, :1]
    if hint is None:
        return value
    first = value[:, :1] if hint.shape[1] == 1 else value
    shifted: Array = value + 2 * np.pi * np.rint((hint - first) / (2 * np.pi))
    return shifted


def _unrolled(value: Array) -> Array:
    """Angles without jumps along the frames; frames without a pose are passed over."""
    last = np.maximum.accumulate(np.where(np.isnan(value), 0, np.arange(value.shape[1])), axis=1)
    filled = np.take_along_axis(value, last, axis=1)
    turns = np.nan_to_num(np.rint(np.diff(filled, axis=1) / (2 * np.pi)))
    out = value.copy()
    out[:, 1:] -= 2 * np.pi * np.cumsum(turns, axis=1)
    return out


@execute.register
def _(step: Tied, table: Table, ways: Ways, number: int) -> None:
    row = table.eqs.ties[step.tie]
    total: Array | float = float(table.eqs.tie_equals[step.tie])
    for v in np.flatnonzero(row):
        if v != step.value:
            total = total - row[v] * table.value(int(v))
    table.put_value(step.value, np.asarray(total / row[step.value]))


@execute.register
def _(step: Check, table: Table, ways: Ways, number: int) -> None:
    ok = check_passes(step, table)
    table.kill(ok, number)
    if ways is None and ok.shape[0] > 1 and table.alive is not None:
        alive: NDArray[np.bool_] = np.asarray(table.alive.any(axis=1))
        if not alive.all():
            _widen(table, table.branches)
            table.renumber(np.flatnonzero(np.broadcast_to(alive, (table.branches,))))


@execute.register
def _(step: Cluster, table: Table, ways: Ways, number: int) -> None:
    if ways is None:
        cluster_branches(step, table, number)
    else:
        cluster_follow(step, table, number)
