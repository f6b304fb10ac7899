"""Reading off the values of cranks, rams and rails from a pose, with their derivatives."""

from __future__ import annotations

import numpy as np

from rigpose.model.equations import GROUND, Array, Equations, Ints
from rigpose.model.torsion import torsion, torsion_slopes


def line_angle(x: Array, pair: Ints) -> Array:
    """Directions ``(N, m)`` in radians of the lines ``pair (m, 2)``; zero for the ground."""
    e = x[:, pair[:, 1]] - x[:, pair[:, 0]]
    angle: Array = np.arctan2(e[..., 1], e[..., 0])
    angle[:, pair[:, 0] == GROUND] = 0.0
    return angle


def zeros_at(eqs: Equations, rest: Array) -> Array:
    """The cranks' zero angles ``(c,)`` in radians, those counted from rest filled in."""
    a = eqs.angles
    if eqs.dim == 3:
        raw = np.array([_torsion(eqs, rest[None], c)[0][0] for c in range(len(a.zero))])
    else:
        raw = line_angle(rest[None], a.line)[0] - line_angle(rest[None], a.base)[0]
    return np.where(np.isnan(a.zero), raw, a.zero)


def measure(eqs: Equations, x: Array, numbers: Ints, zeros: Array | None = None) -> Array:
    """Values ``(N, len(numbers))`` read off poses ``(N, n, dim)``; angles in (-pi, pi]."""
    return gauge_gradients(eqs, x, numbers, zeros)[0]


def gauge_gradients(
    eqs: Equations, x: Array, numbers: Ints, zeros: Array | None = None
) -> tuple[Array, Ints, Array]:
    """Values ``(N, m)``, the columns they depend on ``(m, 4 dim)``, slopes ``(N, m, 4 dim)``."""
    n, m = len(x), len(numbers)
    value = np.zeros((n, m))
    cols = np.zeros((m, 4 * eqs.dim), dtype=np.intp)
    slopes = np.zeros((n, m, 4 * eqs.dim))
    zero = eqs.angles.zero if zeros is None else zeros
    crank = {int(v): k for k, v in enumerate(eqs.angles.value)}
    rail = {int(v): k for k, v in enumerate(eqs.lines.value)}
    for k, number in enumerate(map(int, numbers)):
        if number in crank:
            c = crank[number]
            value[:, k] = _angle(eqs, x, c, float(zero[c]), cols[k], slopes[:, k])
        elif number in rail:
            value[:, k] = _way(eqs, x, rail[number], cols[k], slopes[:, k])
        else:
            ends = eqs.distances.ends[eqs.ram_of[number]]
            value[:, k] = _length(x, ends, cols[k], slopes[:, k])
    return value, cols, slopes


def _place(cols: Ints, slopes: Array, slot: int, joint: int, slope: Array) -> None:
    dim = slope.shape[1]
    cols[dim * slot : dim * slot + dim] = dim * joint + np.arange(dim)
    slopes[:, dim * slot : dim * slot + dim] = slope


def _length(x: Array, ends: Ints, cols: Ints, slopes: Array) -> Array:
    a, b = map(int, ends)
    e = x[:, b] - x[:, a]
    long: Array = np.sqrt(np.einsum("nd,nd->n", e, e))
    _place(cols, slopes, 0, a, -e / long[:, None])
    _place(cols, slopes, 1, b, e / long[:, None])
    return long


def _angle(eqs: Equations, x: Array, c: int, zero: float, cols: Ints, slopes: Array) -> Array:
    if not np.isfinite(zero):
        return np.zeros(len(x))  # counted from rest, and the rest pose is still being looked for
    if eqs.dim == 3:
        angle, joints, by = _torsion(eqs, x, c)
        for slot, (joint, slope) in enumerate(zip(joints, by, strict=True)):
            _place(cols, slopes, slot, joint, slope)
        about: Array = np.remainder(angle - zero + np.pi, 2 * np.pi) - np.pi
        return about
    total = np.full(len(x), -zero)
    for slot, (pair, sign) in enumerate(((eqs.angles.line[c], 1.0), (eqs.angles.base[c], -1.0))):
        if pair[0] == GROUND:
            continue
        a, b = map(int, pair)
        e = x[:, b] - x[:, a]
        total += sign * np.arctan2(e[:, 1], e[:, 0])
        slope = sign * np.stack([-e[:, 1], e[:, 0]], axis=1) / np.einsum("nd,nd->n", e, e)[:, None]
        _place(cols, slopes, 2 * slot, a, -slope)
        _place(cols, slopes, 2 * slot + 1, b, slope)
    wrapped: Array = np.remainder(total + np.pi, 2 * np.pi) - np.pi
    return wrapped


def _torsion(eqs: Equations, x: Array, c: int) -> tuple[Array, list[int], list[Array]]:
    """A crank's angle in space ``(N,)``, the joints it hangs on and the derivatives by each."""
    p, q = map(int, eqs.angles.axis[c])
    s, f = int(eqs.angles.line[c, 1]), int(eqs.angles.base[c, 1])
    start = x[:, p] + eqs.angles.toward[c] if f == GROUND else x[:, f]
    points = (start, x[:, p], x[:, q], x[:, s])
    by_f, by_p, by_q, by_s = torsion_slopes(*points)
    if f == GROUND:
        return torsion(*points), [p, q, s], [by_p + by_f, by_q, by_s]
    return torsion(*points), [f, p, q, s], [by_f, by_p, by_q, by_s]


def _way(eqs: Equations, x: Array, r: int, cols: Ints, slopes: Array) -> Array:
    lines, p = eqs.lines, int(eqs.lines.joint[r])
    if lines.along[r, 0] == GROUND:
        d = lines.direction[r]
        _place(cols, slopes, 0, p, np.broadcast_to(d, (len(x), eqs.dim)))
        way: Array = (x[:, p] - lines.through[r]) @ d
        return way
    a, b = map(int, lines.along[r])
    e, w = x[:, b] - x[:, a], x[:, p] - x[:, a]
    long = np.sqrt(np.einsum("nd,nd->n", e, e))
    u = e / long[:, None]
    way = np.einsum("nd,nd->n", w, u)
    across = (w - way[:, None] * u) / long[:, None]
    _place(cols, slopes, 0, a, -u - across)
    _place(cols, slopes, 1, b, across)
    _place(cols, slopes, 2, p, u)
    return way
