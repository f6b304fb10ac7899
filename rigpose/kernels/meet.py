"""Meetings of circles and lines in the plane.

Points are arrays ``(2, ...)``: coordinates lead, any batch axes follow and broadcast. Every
meeting with two ways returns ``(base, side, sine2, sine)``: the two points are ``base + side`` and
``base - side``, and ``sine2`` is the squared sine of the angle at which the two curves cross.
It is zero where they touch and negative where they do not meet; ``side`` and ``sine`` are NaN
there.
"""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

Array = NDArray[np.float64]
Crossing = tuple[Array, Array, Array, Array]


def perp(v: Array) -> Array:
    """The vectors ``(2, ...)`` turned by a quarter, counter-clockwise."""
    out = np.empty_like(v)
    np.negative(v[1], out=out[0])
    out[1] = v[0]
    return out


def dot(a: Array, b: Array) -> Array:
    """Scalar products along the leading axis: ``(dim, ...)`` to ``(...)``."""
    total: Array = a[0] * b[0]
    for k in range(1, len(a)):
        total += a[k] * b[k]
    return total


def cross(a: Array, b: Array) -> Array:
    """``a[0] b[1] - a[1] b[0]`` for vectors ``(2, ...)``."""
    out: Array = a[0] * b[1]
    out -= a[1] * b[0]
    return out


def circle_circle(
    c1: Array, r1: Array | float, c2: Array, r2: Array | float
) -> Crossing:
    """Circles about ``c1`` and ``c2``; ``base + side`` lies left of the way from c1 to c2.

    The squared height comes from Heron's product of sums, which keeps its digits where the
    circles nearly touch; the difference ``r1**2 - a**2`` does not.
    """
    d = c2 - c1
    d2 = d[0] * d[0]
    d2 += d[1] * d[1]
    far = (r1 + r2) * (r1 + r2)
    near = (r1 - r2) * (r1 + r2)
    thin = (r1 - r2) * (r1 - r2)
    product = r1 * r2
    sine2 = (far - d2) * (d2 - thin)
    sine2 *= 0.25 / (product * product)
    inverse = 1.0 / d2
    along = 0.5 + (0.5 * near) * inverse
    sine = np.sqrt(sine2)
    height = sine * inverse
    height *= product
    base = d * along
    base += c1
    side = np.empty_like(base)
    np.multiply(d[1], height, out=side[0])
    np.negative(side[0], out=side[0])
    np.multiply(d[0], height, out=side[1])
    return base, side, sine2, sine


def line_circle(
    through: Array, direction: Array, centre: Array, radius: Array | float
) -> Crossing:
    """A line (unit ``direction``) with a circle; ``base + side`` is the later one on the line."""
    w = centre - through
    off = cross(direction, w)
    ratio = off / radius
    sine2 = (1.0 - ratio) * (1.0 + ratio)
    base = through + direction * dot(direction, w)
    sine = np.sqrt(sine2)
    side = direction * (sine * radius)
    return base, side, sine2, sine


def line_line(p: Array, u: Array, q: Array, v: Array) -> tuple[Array, Array]:
    """Lines with unit directions; their point and the sine of the angle between them."""
    sine = cross(u, v)
    point = p + u * (cross(q - p, v) / sine)
    return point, np.abs(sine)


def turn(a: Array, b: Array, c: Array) -> Crossing:
    """Solves ``a cos t + b sin t = c``; points are ``(cos t, sin t)``.

    ``base + side`` is the solution that lies counter-clockwise of the direction (a, b).
    """
    r2 = a * a + b * b
    inverse = 1.0 / r2
    sine2 = 1.0 - (c * c) * inverse
    along = c * inverse
    sine = np.sqrt(sine2)
    height = sine * np.sqrt(inverse)
    base = np.stack(np.broadcast_arrays(a * along, b * along))
    side = np.stack(np.broadcast_arrays(-b * height, a * height))
    return base, side, sine2, sine


def unit(v: Array) -> Array:
    """Vectors ``(dim, ...)`` at length one; zero vectors become NaN."""
    return v / np.sqrt(dot(v, v))


def rotated(v: Array, angle: Array | float) -> Array:
    """Vectors ``(2, ...)`` turned counter-clockwise by ``angle`` (radians)."""
    c, s = np.cos(angle), np.sin(angle)
    return np.stack(np.broadcast_arrays(c * v[0] - s * v[1], s * v[0] + c * v[1]))
