"""Measuring a check over branches and frames."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from rigpose.kernels.meet import Array, cross, dot
from rigpose.kernels.space import cross3, turn_about
from rigpose.model.equations import GROUND
from rigpose.solve.hanging import body_misfit
from rigpose.solve.plan import Check
from rigpose.solve.table import Table

Mask = NDArray[np.bool_]
FORGIVEN = 1e-6
"""Part of the reach that error bounds may add to what a check forgives. At a dead centre places
are known to 1e-8; bounds that have grown beyond this tell nothing."""
LEAST = 1e-11
"""With slack set to zero, rounding still must pass."""


def check_passes(step: Check, table: Table) -> Mask:
    """Cells ``(B or 1, F)`` in which the condition holds."""
    if step.kind in ("ram", "track", "fence", "hand"):
        return _inequality(step, table)
    allowed = _allowance(step, table)
    off = misfit(step, table)
    ok: Mask = np.abs(off) <= allowed
    return ok


def _allowance(step: Check, table: Table) -> Array | float:
    allowed: Array | float = max(table.slack, LEAST) * table.reach
    if step.kind == "target":
        allowed = max(table.close, LEAST) * table.reach
    if step.kind == "distance":
        allowed = allowed + float(table.eqs.distances.play[step.index])
    if table.careful:
        bound: Array | float = 0.0
        for p in step.points:
            bound = bound + table.bound(p)
        allowed = allowed + np.minimum(bound, FORGIVEN * table.reach)
    return allowed


def misfit(step: Check, table: Table) -> Array:
    """By how much an equation is off, as a length ``(B or 1, F)``."""
    return {
        "distance": _distance, "body": _body, "rail": _rail, "way": _way, "angle": _angle,
        "target": _target, "tie": _tie, "plane": _plane,
    }[step.kind](step, table)


def _plane(step: Check, table: Table) -> Array:
    planes, k = table.eqs.planes, step.index
    away = table.point(step.points[0]) - planes.through[k].reshape(-1, 1, 1)
    return dot(away, planes.normal[k].reshape(-1, 1, 1))


def _distance(step: Check, table: Table) -> Array:
    d = table.eqs.distances
    e = table.point(step.points[1]) - table.point(step.points[0])
    value = int(d.value[step.index])
    want = table.value(value) if value >= 0 else float(d.length[step.index])
    return np.asarray(np.sqrt(dot(e, e)) - want)


def _body(step: Check, table: Table) -> Array:
    """Largest distance of a joint from where the body's base carries it, and of the base."""
    body = table.eqs.bodies[step.index]
    if table.eqs.dim == 3:
        return body_misfit(body, [table.point(p) for p in step.points])
    i, j = body.base
    p, q = table.point(step.points[i]), table.point(step.points[j])
    e, w = q - p, body.shape[j] - body.shape[i]
    long = float(np.hypot(*w))
    worst = np.abs(np.sqrt(dot(e, e)) - long)
    for k, point in enumerate(step.points):
        if k not in (i, j):
            v = body.shape[k] - body.shape[i]
            along, off = (v @ w) / long**2, (w[0] * v[1] - w[1] * v[0]) / long**2
            x = table.point(point) - p
            gap0 = x[0] - along * e[0] + off * e[1]
            gap1 = x[1] - along * e[1] - off * e[0]
            worst = np.maximum(worst, np.hypot(gap0, gap1))
    return worst


def _rail(step: Check, table: Table) -> Array:
    lines, k = table.eqs.lines, step.index
    p = table.point(step.points[0])
    if lines.along[k, 0] == GROUND:
        d = lines.direction[k].reshape(-1, 1, 1)
        return _across(d, p - lines.through[k].reshape(-1, 1, 1))
    a, b = table.point(step.points[1]), table.point(step.points[2])
    e = b - a
    return np.asarray(_across(e, p - a) / np.sqrt(dot(e, e)))


def _across(e: Array, w: Array) -> Array:
    """How much of w is square to e, times e's length; signed in the plane."""
    if len(e) == 2:
        return cross(e, w)
    n = cross3(e, w)
    return np.asarray(np.sqrt(dot(n, n)))


def _along(step: Check, table: Table) -> Array:
    """The way along a rail."""
    lines, k = table.eqs.lines, step.index
    p = table.point(step.points[0])
    if lines.along[k, 0] == GROUND:
        return dot(lines.direction[k].reshape(-1, 1, 1), p - lines.through[k].reshape(-1, 1, 1))
    a, b = table.point(step.points[1]), table.point(step.points[2])
    e = b - a
    return np.asarray(dot(e, p - a) / np.sqrt(dot(e, e)))


def _way(step: Check, table: Table) -> Array:
    return np.asarray(_along(step, table) - table.value(int(table.eqs.lines.value[step.index])))


def _angle(step: Check, table: Table) -> Array:
    angles, k = table.eqs.angles, step.index
    if table.eqs.dim == 3:
        return _hinge_angle(step, table)
    e = table.point(step.points[1]) - table.point(step.points[0])
    turn = np.arctan2(e[1], e[0])
    if len(step.points) == 4:
        f = table.point(step.points[3]) - table.point(step.points[2])
        turn = turn - np.arctan2(f[1], f[0])
    off = turn - angles.zero[k] - table.value(int(angles.value[k]))
    return np.asarray((np.remainder(off + np.pi, 2 * np.pi) - np.pi) * np.sqrt(dot(e, e)))


def _hinge_angle(step: Check, table: Table) -> Array:
    """A driven angle about an axis; points are axis, pointer and, unless on the ground, start."""
    angles, k = table.eqs.angles, step.index
    p, q, s = (table.point(x) for x in step.points[:3])
    f = p + angles.toward[k].reshape(3, 1, 1) if len(step.points) == 3 else (
        table.point(step.points[3]))
    off = turn_about(f, p, q, s) - angles.zero[k] - table.value(int(angles.value[k]))
    arm = s - p
    return np.asarray((np.remainder(off + np.pi, 2 * np.pi) - np.pi) * np.sqrt(dot(arm, arm)))


def _target(step: Check, table: Table) -> Array:
    joint, axis = divmod(step.index, table.eqs.dim)
    return np.asarray(table.point(joint)[axis] - table.inputs.targets[joint, axis][None])


def _tie(step: Check, table: Table) -> Array:
    row = table.eqs.ties[step.index]
    total = np.asarray(-float(table.eqs.tie_equals[step.index])).reshape(1, 1)
    for v in np.flatnonzero(row):
        total = total + row[v] * table.value(int(v))
    return total


def _inequality(step: Check, table: Table) -> Mask:
    room = LEAST * table.reach
    if table.careful:
        room = room + sum((np.max(table.bound(p)) for p in step.points), 0.0)
    eqs = table.eqs
    if step.kind == "hand":
        a, b, c = (table.point(p) for p in step.points)
        return np.asarray(cross(b - a, c - a) * eqs.hands[step.index][2] >= -room)
    if step.kind == "fence":
        return _fence(step, table, room)
    if step.kind == "ram":
        e = table.point(step.points[1]) - table.point(step.points[0])
        value, number = np.sqrt(dot(e, e)), step.index
    else:
        value, number = _along(step, table), int(eqs.lines.value[step.index])
    low, high = eqs.span[number]
    return np.asarray((value >= low - room) & (value <= high + room))


def _fence(step: Check, table: Table, room: float) -> Mask:
    fences, k = table.eqs.fences, step.index
    p, q, r, s = (table.point(x) for x in step.points[:4])
    u, v = q - p, s - r
    if table.eqs.dim == 2:
        angle = np.arctan2(cross(u, v), dot(u, v))
    elif fences.axis[k, 0] == GROUND:
        n = cross3(u, v)
        angle = np.arctan2(np.sqrt(dot(n, n)), dot(u, v))
    else:
        a, b = (table.point(x) for x in step.points[4:])
        angle = turn_about(a + u, a, b, a + v)
    low, width = float(fences.low[k]), float(fences.width[k])
    if fences.either[k]:
        wide = np.abs(angle)
        return np.asarray((wide >= low - room) & (wide <= low + width + room))
    past = np.remainder(angle - low + room, 2 * np.pi)
    return np.asarray(past <= width + 2 * room)
