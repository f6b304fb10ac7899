"""Running the steps of space; registered beside those of the plane when imported."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from rigpose.ground.tolerance import EPS
from rigpose.kernels.meet import Array, Crossing, dot
from rigpose.kernels.space import (
    about,
    cross3,
    line_plane,
    line_sphere,
    planes_line,
    spheres_plane,
    three_spheres,
)
from rigpose.solve.hanging import carried
from rigpose.solve.plan import Circle, Hang, Hinge, Junction, Line, Point, Ride, Sheet
from rigpose.solve.run import (
    ONE_PLACE,
    Ways,
    choose,
    execute,
    length_of,
    line_of,
    local_of,
    parents_bound,
)
from rigpose.solve.table import Table

Rate = tuple[Array | float, Array | float, Array | float]


def _sheet(table: Table, sheet: Sheet) -> tuple[Array, Array]:
    """A point and the unit normal."""
    if sheet.kind == "axis":
        given = table.inputs.targets[sheet.joint, sheet.axis][None]
        p, n = np.zeros((3, *given.shape)), np.zeros((3, 1, 1))
        p[sheet.axis], n[sheet.axis] = given, 1.0
        return p, n
    p = np.array(sheet.through).reshape(3, 1, 1)
    n = np.array(sheet.normal).reshape(3, 1, 1)
    return (p + n * table.value(sheet.value) if sheet.kind == "across" else p), n


def _points(step: Junction) -> tuple[Point, ...]:
    found: list[Point] = []
    for curve in step.curves:
        if isinstance(curve, Circle):
            found.append(curve.centre)
        elif isinstance(curve, Line):
            found += curve.points
    return tuple(found)


@execute.register
def _(step: Junction, table: Table, ways: Ways, number: int) -> None:
    lines = [line_of(table, c) for c in step.curves if isinstance(c, Line)]
    sheets = [_sheet(table, c) for c in step.curves if isinstance(c, Sheet)]
    spheres = [(table.point(c.centre), length_of(table, c.radius))
               for c in step.curves if isinstance(c, Circle)]
    sine: Array | float = 1.0
    if not lines and len(sheets) >= 2:
        p, d, sine = planes_line(*sheets[0], *sheets[1])
        lines, sheets = [(p, d)], sheets[2:]
    if lines and sheets:
        _one_way(step, table, number, lines[0], sheets[0], sine)
        return
    crossing, rate = _two_ways(lines, sheets, spheres, sine)
    if not lines:
        crossing = _in_line(step, table, crossing, spheres, sheets)
    before = table.margin
    choose(step.dst, step.bit, crossing, table, ways, number, _points(step), lambda: rate)
    if step.fitted:
        # The fit that follows knows the margin; here it must only keep up with the branches.
        table.margin = before if before is None else table.spread(before, table.level - 1, 0) if (
            ways is None and before.shape[0] != table.branches) else before


def _one_way(step: Junction, table: Table, number: int, line: tuple[Array, Array],
             sheet: tuple[Array, Array], before: Array | float) -> None:
    point, sine = line_plane(*line, *sheet)
    sine = sine * before
    bound = parents_bound(table, _points(step)) / sine if table.careful else 0.0
    table.put(step.dst, point, bound)
    table.kill(np.isfinite(point[0]), number)
    table.narrow(sine)


def _two_ways(lines: list[tuple[Array, Array]], sheets: list[tuple[Array, Array]],
              spheres: list[tuple[Array, Array | float]],
              before: Array | float) -> tuple[Crossing, Rate]:
    """The crossing, and how its squared volume changes with the places that it hangs on."""
    c1, r1 = spheres[0]
    if lines:
        base, side, sine2, sine = line_sphere(*lines[0], c1, r1)
        sine2, sine = sine2 * before * before, sine * before
        return (base, side, sine2, sine), (2.0 / r1, r1, 16 * EPS)
    c2, r2 = spheres[1]
    e = c2 - c1
    if sheets:
        crossing = spheres_plane(c1, r1, c2, r2, *sheets[0])
        flat = cross3(sheets[0][1], e)
        area2, product = dot(flat, flat), r1 * r2
        lever = np.sqrt(dot(e, e) / area2)
    else:
        c3, r3 = spheres[2]
        crossing = three_spheres(c1, r1, c2, r2, c3, r3)
        f = c3 - c1
        n = cross3(e, f)
        area2, product = dot(n, n), r1 * r2 * r3
        lever = np.sqrt(dot(e, e) * dot(f, f) / area2)
    share = area2 / (product * product)
    return crossing, (2.0 * r1 * (1.0 + lever) * share, r1 * (1.0 + lever),
                      16 * EPS * r1 * r1 * (1.0 + lever) * share)


def _in_line(step: Junction, table: Table, crossing: Crossing,
             spheres: list[tuple[Array, Array | float]],
             sheets: list[tuple[Array, Array]]) -> Crossing:
    """Where the surfaces have one axis in common they meet nowhere, in one point of it or in a
    circle, on which the joint turns freely: that is told, and no pose is listed."""
    (c1, r1), (c2, r2) = spheres[:2]
    e = c2 - c1
    room = ONE_PLACE * np.minimum(parents_bound(table, _points(step)), table.sure)
    if sheets:
        through, n = sheets[0]
        off = dot(through - c1, n)
        flat = cross3(n, e)
        alike = np.sqrt(dot(flat, flat)) <= room
        foot, rise2 = c1 + n * off, (r1 - off) * (r1 + off)
        wrong = np.abs(r2 * r2 - rise2 - (dot(e, n) - off) ** 2) > room * (r1 + r2)
    else:
        c3, r3 = spheres[2]
        f = c3 - c1
        n = cross3(e, f)
        long2 = np.maximum(dot(e, e), dot(f, f))
        alike = dot(n, n) <= room * room * long2
        foot, rise2, wrong = _ring(c1, r1, ((e, r2), (f, r3)), room)
    if not alike.any():
        return crossing
    base, side, sine2, sine = crossing
    if not table.careful:
        # Looked at again with error bounds.
        return base, side, np.where(alike, 0.0, sine2), np.where(alike, 0.0, sine)
    free = alike & ~wrong & (rise2 > room * (r1 + room))
    alive = free if table.alive is None else free & table.alive
    if alive.any():
        table.turning.add((step.dst, step.parts))
    single = alike & ~wrong & ~free & (rise2 > -room * (r1 + room))
    sine2 = np.where(alike, np.where(single, 0.0, -1.0), sine2)
    return (np.where(single, foot, base), np.where(single, 0.0, side), sine2,
            np.where(single, 0.0, np.where(alike, np.nan, sine)))


def _ring(c1: Array, r1: Array | float, others: tuple[tuple[Array, Array | float], ...],
          room: Array | float) -> tuple[Array, Array, NDArray[np.bool_]]:
    """Spheres with centres in line: the middle of the circle in which they meet, the square of its
    radius, and whether they don't agree on it."""
    (e, r2), (f, r3) = others
    # The centre farther from the first tells the middle; where both lie on it, any middle does.
    far = dot(e, e) >= dot(f, f)
    d, r = np.where(far, e, f), np.where(far, r2, r3)
    d2 = dot(d, d)
    one = d2 <= room * room
    along = np.where(one, 0.0, 0.5 * (d2 + (r1 - r) * (r1 + r)) / np.where(one, 1.0, d2))
    rise2 = (r1 - along * np.sqrt(d2)) * (r1 + along * np.sqrt(d2))
    wrong = np.zeros(np.shape(rise2), dtype=bool)
    for way, radius in others:
        gap = way - d * along
        off = dot(gap, gap) + rise2 - radius * radius
        wrong = wrong | (np.abs(off) > room * (r1 + radius + np.sqrt(dot(gap, gap))))
    return c1 + d * along, rise2, wrong


@execute.register
def _(step: Hang, table: Table, ways: Ways, number: int) -> None:
    placed = [table.point(p) for p in step.placed]
    base = [local_of(table, b) for b in step.base]
    bound = parents_bound(table, step.placed) * 2.0 if table.careful else 0.0
    for dst, place in zip(step.dst, step.local, strict=True):
        table.put(dst, carried(placed, base, local_of(table, place)), bound)


@execute.register
def _(step: Ride, table: Table, ways: Ways, number: int) -> None:
    pivot = table.point(step.pivot)
    bound = parents_bound(table, (step.pivot,)) if table.careful else 0.0
    for dst, way in zip(step.dst, step.ways, strict=True):
        table.put(dst, pivot + np.array(way).reshape(-1, 1, 1), bound)


@execute.register
def _(step: Hinge, table: Table, ways: Ways, number: int) -> None:
    p, q = (table.point(x) for x in step.axis)
    u = q - p
    u = u / np.sqrt(dot(u, u))
    start = np.array(step.toward).reshape(3, 1, 1) if step.start is None else (
        table.point(step.start) - p)
    first, second = about(u, start)
    angle = step.sign * (table.value(step.value) + step.zero)
    x = np.cos(angle) * first + np.sin(angle) * second
    y = cross3(u, x)
    a, b = (local_of(table, k) for k in step.axis_local)
    own = b - a
    own = own / np.sqrt(dot(own, own))
    own_x, own_y = about(own, local_of(table, step.pointer) - a)
    bound = parents_bound(table, step.axis) * 4.0 if table.careful else 0.0
    for dst, place in zip(step.dst, step.local, strict=True):
        w = local_of(table, place) - a
        table.put(dst, p + u * dot(w, own) + x * dot(w, own_x) + y * dot(w, own_y), bound)
