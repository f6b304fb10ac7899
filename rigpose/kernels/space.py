"""Meetings of spheres, planes and lines in space.

Points are arrays ``(3, ...)``: coordinates lead, any batch axes follow and broadcast. Meetings
with two ways return ``(base, side, sine2, sine)`` as those of the plane: the two points are
``base + side`` and ``base - side``, and ``sine2`` is the squared volume that the unit normals of
the three surfaces span there: zero where they touch, negative where they don't meet.
"""

from __future__ import annotations

import numpy as np

from rigpose.kernels.meet import Array, Crossing, dot


def cross3(a: Array, b: Array) -> Array:
    """Cross products of vectors ``(3, ...)``."""
    return np.stack(np.broadcast_arrays(
        a[1] * b[2] - a[2] * b[1], a[2] * b[0] - a[0] * b[2], a[0] * b[1] - a[1] * b[0]))


def three_spheres(c1: Array, r1: Array | float, c2: Array, r2: Array | float, c3: Array,
                  r3: Array | float) -> Crossing:
    """Spheres about three centres; ``base + side`` lies where the centres turn counter-clockwise
    as seen from it (the normal is ``(c2 - c1) x (c3 - c1)``)."""
    e, f = c2 - c1, c3 - c1
    n = cross3(e, f)
    n2 = dot(n, n)
    # Along e and f the point is where the differences of the spheres' equations put it.
    p = 0.5 * (dot(e, e) + (r1 - r2) * (r1 + r2))
    q = 0.5 * (dot(f, f) + (r1 - r3) * (r1 + r3))
    w = (p * cross3(f, n) + q * cross3(n, e)) / n2
    height2 = _square_gap(r1, w)
    sine2 = height2 * n2 / (r1 * r2 * r3) ** 2
    side = n * np.sqrt(height2 / n2)
    return c1 + w, side, sine2, np.sqrt(sine2)


def _square_gap(radius: Array | float, w: Array) -> Array:
    """``radius^2 - |w|^2`` as a product, which keeps its digits near zero."""
    far = np.sqrt(dot(w, w))
    gap: Array = (radius - far) * (radius + far)
    return gap


def spheres_plane(c1: Array, r1: Array | float, c2: Array, r2: Array | float, through: Array,
                  normal: Array) -> Crossing:
    """Two spheres with a plane of unit normal; ``base + side`` lies to the left of the way from
    c1 to c2 as seen from the tip of the normal."""
    e = c2 - c1
    t = dot(through - c1, normal)
    ahead = cross3(normal, e)
    a2 = dot(ahead, ahead)
    p = 0.5 * (dot(e, e) + (r1 - r2) * (r1 + r2))
    # w = t normal + s (ahead x normal) with w . e = p; ahead x normal = e - (e . normal) normal.
    flat = cross3(ahead, normal)
    s = (p - t * dot(normal, e)) / a2
    w = t * normal + s * flat
    height2 = _square_gap(r1, w)
    sine2 = height2 * a2 / (r1 * r2) ** 2
    side = ahead * np.sqrt(height2 / a2)
    return c1 + w, side, sine2, np.sqrt(sine2)


def line_sphere(through: Array, direction: Array, centre: Array, radius: Array | float) -> Crossing:
    """A line (unit ``direction``) with a sphere; ``base + side`` is the later one on the line."""
    w = centre - through
    along = dot(direction, w)
    off = w - direction * along
    height2 = _square_gap(radius, off)
    sine2 = height2 / (radius * radius)
    sine = np.sqrt(sine2)
    return through + direction * along, direction * (sine * radius), sine2, sine


def line_plane(p: Array, d: Array, through: Array, normal: Array) -> tuple[Array, Array]:
    """A line (unit d) with a plane: their point and the sine of the angle between them."""
    sine = dot(d, normal)
    return p + d * (dot(through - p, normal) / sine), np.abs(sine)


def planes_line(p1: Array, n1: Array, p2: Array, n2: Array) -> tuple[Array, Array, Array]:
    """The line of two planes: a point, its unit direction, the sine between the planes."""
    d = cross3(n1, n2)
    long2 = dot(d, d)
    t1, t2 = dot(p1, n1), dot(p2, n2)
    point = (t1 * cross3(n2, d) + t2 * cross3(d, n1)) / long2
    sine = np.sqrt(long2)
    return point, d / sine, sine


def about(axis: Array, reference: Array) -> tuple[Array, Array]:
    """Two unit vectors square to a unit axis: towards ``reference`` and a quarter turn on."""
    flat = reference - axis * dot(axis, reference)
    first = flat / np.sqrt(dot(flat, flat))
    return first, cross3(axis, first)


def frame(e: Array, f: Array) -> tuple[Array, Array, Array]:
    """The right-handed orthonormal frame of two vectors not in line, the first along e."""
    x = e / np.sqrt(dot(e, e))
    y, z = about(x, f)
    return x, y, z


def turn_about(f: Array, p: Array, q: Array, s: Array) -> Array:
    """The angle about the axis p to q from f to s, by the right hand, in radians."""
    u = q - p
    u = u / np.sqrt(dot(u, u))
    first, second = about(u, f - p)
    w = s - p
    return np.asarray(np.arctan2(dot(second, w), dot(first, w)))
