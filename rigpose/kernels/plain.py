"""Meetings of one pose in plain numbers: the formulas of `meet` and `space`, for long chains with
few branches, where arrays of one element cost far more than the arithmetic.

Points are tuples. Meetings with two ways return ``(base, side, sine2, sine)`` as there, None where
the centres can't be told apart or lie in line.
"""

from __future__ import annotations

from math import sqrt

Place = tuple[float, ...]
Crossing = tuple[Place, Place, float, float]


def circle_circle(c1: Place, r1: float, c2: Place, r2: float) -> Crossing | None:
    """As `meet.circle_circle`."""
    x, y = c2[0] - c1[0], c2[1] - c1[1]
    d2 = x * x + y * y
    product = r1 * r2
    if d2 == 0.0 or product == 0.0:
        return None
    sine2 = ((r1 + r2) * (r1 + r2) - d2) * (d2 - (r1 - r2) * (r1 - r2)) * (
        0.25 / (product * product))
    along = 0.5 + 0.5 * (r1 - r2) * (r1 + r2) / d2
    sine = sqrt(sine2) if sine2 > 0.0 else 0.0
    height = sine * product / d2
    return ((c1[0] + x * along, c1[1] + y * along), (-y * height, x * height), sine2, sine)


def line_circle(through: Place, direction: Place, centre: Place, radius: float) -> Crossing | None:
    """As `meet.line_circle`."""
    x, y = centre[0] - through[0], centre[1] - through[1]
    u, v = direction
    ratio = (u * y - v * x) / radius
    sine2 = (1.0 - ratio) * (1.0 + ratio)
    along = u * x + v * y
    sine = sqrt(sine2) if sine2 > 0.0 else 0.0
    long = sine * radius
    return ((through[0] + u * along, through[1] + v * along), (u * long, v * long), sine2, sine)


def dot(a: Place, b: Place) -> float:
    """The scalar product of two vectors of space."""
    return a[0] * b[0] + a[1] * b[1] + a[2] * b[2]


def cross(a: Place, b: Place) -> Place:
    """The vector product."""
    return (a[1] * b[2] - a[2] * b[1], a[2] * b[0] - a[0] * b[2], a[0] * b[1] - a[1] * b[0])


def three_spheres(c1: Place, r1: float, c2: Place, r2: float, c3: Place,
                  r3: float) -> tuple[Crossing, float, float, float] | None:
    """As `space.three_spheres`; with the squared area of the centres, the larger of the squared
    ways from the first to the others, and the lever by which the place moves with them."""
    e = (c2[0] - c1[0], c2[1] - c1[1], c2[2] - c1[2])
    f = (c3[0] - c1[0], c3[1] - c1[1], c3[2] - c1[2])
    n = cross(e, f)
    n2, e2, f2 = dot(n, n), dot(e, e), dot(f, f)
    product = r1 * r2 * r3
    if n2 <= 1e-24 * e2 * f2 or n2 == 0.0 or product == 0.0:
        return None
    p = 0.5 * (e2 + (r1 - r2) * (r1 + r2)) / n2
    q = 0.5 * (f2 + (r1 - r3) * (r1 + r3)) / n2
    g, h = cross(f, n), cross(n, e)
    w = (p * g[0] + q * h[0], p * g[1] + q * h[1], p * g[2] + q * h[2])
    far = sqrt(dot(w, w))
    height2 = (r1 - far) * (r1 + far)
    sine2 = height2 * n2 / (product * product)
    up = sqrt(height2 / n2) if height2 > 0.0 else 0.0
    crossing = ((c1[0] + w[0], c1[1] + w[1], c1[2] + w[2]),
                (n[0] * up, n[1] * up, n[2] * up), sine2, sqrt(sine2) if sine2 > 0.0 else 0.0)
    return crossing, n2, max(e2, f2), sqrt(e2 * f2 / n2)


def distance(a: Place, b: Place) -> float:
    """Between two points."""
    if len(a) == 2:
        x, y = b[0] - a[0], b[1] - a[1]
        return sqrt(x * x + y * y)
    x, y, z = b[0] - a[0], b[1] - a[1], b[2] - a[2]
    return sqrt(x * x + y * y + z * z)


def fitted(x: Place, spheres: list[tuple[Place, float]]) -> tuple[Place, float, float] | None:
    """One Gauss-Newton step of a point of space onto spheres (centre, radius), two or more.

    The point moved, the squared volume that the unit normals span, and by how much the worst
    distance was off before; None where they don't hold it.
    """
    a = b = c = d = e = f = u = v = w = worst = 0.0
    for centre, radius in spheres:
        p, q, r = x[0] - centre[0], x[1] - centre[1], x[2] - centre[2]
        far = sqrt(p * p + q * q + r * r)
        if far == 0.0:
            return None
        p, q, r, off = p / far, q / far, r / far, far - radius
        if off > worst or -off > worst:
            worst = abs(off)
        a, b, c = a + p * p, b + p * q, c + p * r
        d, e, f = d + q * q, e + q * r, f + r * r
        u, v, w = u - off * p, v - off * q, w - off * r
    i, j, k = d * f - e * e, c * e - b * f, b * e - c * d
    size = a * i + b * j + c * k
    if size <= 0.0:
        return None
    g, m, n = a * f - c * c, b * c - a * e, a * d - b * b
    moved = (x[0] + (i * u + j * v + k * w) / size, x[1] + (j * u + g * v + m * w) / size,
             x[2] + (k * u + m * v + n * w) / size)
    return moved, size, worst
