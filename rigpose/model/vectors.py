"""Vectors of space as plain tuples: what reading a rig file needs, to the last bit the same."""

from __future__ import annotations

import math

from rigpose.model.rig import Coordinates


def less(a: Coordinates, b: Coordinates) -> Coordinates:
    """The way from b to a."""
    return (a[0] - b[0], a[1] - b[1], a[2] - b[2])


def along(a: Coordinates, way: Coordinates, far: float) -> Coordinates:
    """``a`` moved by ``far`` times ``way``.

    >>> along((1.0, 2.0, 3.0), (0.0, 0.0, 1.0), 0.5)
    (1.0, 2.0, 3.5)
    """
    return (a[0] + far * way[0], a[1] + far * way[1], a[2] + far * way[2])


def dot(a: Coordinates, b: Coordinates) -> float:
    """The inner product."""
    return math.fsum((a[0] * b[0], a[1] * b[1], a[2] * b[2]))


def cross(a: Coordinates, b: Coordinates) -> Coordinates:
    """The vector product.

    >>> cross((1.0, 0.0, 0.0), (0.0, 1.0, 0.0))
    (0.0, 0.0, 1.0)
    """
    return (a[1] * b[2] - a[2] * b[1], a[2] * b[0] - a[0] * b[2], a[0] * b[1] - a[1] * b[0])


def unit(a: Coordinates) -> Coordinates:
    """The vector at length 1; it must have a length."""
    long = math.hypot(*a)
    return tuple(x / long for x in a)


def off(point: Coordinates, start: Coordinates, axis: Coordinates) -> Coordinates:
    """The way from the line through ``start`` along the unit ``axis`` to a point, square to it."""
    away = less(point, start)
    return along(away, axis, -dot(away, axis))


def normal_to(axis: Coordinates) -> Coordinates:
    """A unit vector at a right angle to a unit one: seen from the axis of coordinates that lies
    farthest from it, so that it is exact for directions along the axes.

    >>> normal_to((1.0, 0.0, 0.0))
    (0.0, 0.0, 1.0)
    """
    least = min(range(3), key=lambda k: abs(axis[k]))
    return unit(cross(axis, tuple(float(k == least) for k in range(3))))
