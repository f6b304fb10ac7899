"""Taking rounding out of long chains on the way: a joint that more lengths hold than place it is
moved onto all of them at once.

Placed by three earlier joints each, the points of a long chain hand their rounding on enlarged by
one over the margin at every step; surplus lengths, which would only check, hold it down. Only where
the file's lengths agree to rounding: others are measured and never solved for.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import replace

import numpy as np
from numpy.typing import NDArray

from rigpose.kernels.meet import Array, dot
from rigpose.solve.growth import Locus
from rigpose.solve.plan import Circle, Fit, Junction, Step
from rigpose.solve.run import Ways, execute
from rigpose.solve.table import Table

NEAR = 1e-9
"""A branch whose lengths are off by more than this part of the reach is a wrong one, for the
checks to find; only rounding is taken out."""


def with_fits(steps: list[Step], loci: Mapping[int, Sequence[Locus]]) -> list[Step]:
    """The steps with a fit after each junction to which more lengths come than place its joint.

    loci : joint to the surfaces that it was found to lie on, those that place it among them
    """
    out: list[Step] = []
    for step in steps:
        circles = _circles(step, loci)
        if isinstance(step, Junction) and len(circles) > 3:
            out.append(replace(step, fitted=True))
            out.append(Fit(dst=step.dst, circles=circles, parts=step.parts))
        else:
            out.append(step)
    return out


def _circles(step: Step, loci: Mapping[int, Sequence[Locus]]) -> tuple[Circle, ...]:
    """The junction's own three spheres and all others of known length, one about each centre."""
    if not isinstance(step, Junction):
        return ()
    own = [c for c in step.curves if isinstance(c, Circle) and c.radius.constant]
    if len(own) < 3:
        return ()
    more = (x.curve for x in loci.get(step.dst, ()))
    every = {c.centre: c for c in (*own, *more) if isinstance(c, Circle) and c.radius.constant}
    return tuple(every.values())


@execute.register
def _(step: Fit, table: Table, ways: Ways, number: int) -> None:
    x = table.point(step.dst)
    normal = [[0.0 * x[0]] * 3 for _ in range(3)]
    right = [0.0 * x[0]] * 3
    worst = np.zeros((1, 1))
    for circle in step.circles:
        e = x - table.point(circle.centre)
        far = np.sqrt(dot(e, e))
        off = far - circle.radius.constant
        worst = np.maximum(worst, np.abs(off))
        u = e / far
        for i in range(3):
            right[i] = right[i] - off * u[i]
            for j in range(i + 1):
                normal[i][j] = normal[i][j] + u[i] * u[j]
    move, volume2 = _solved(normal, right)
    # The volume that all unit normals span together: with three it is that of the junction.
    table.narrow(np.sqrt(np.clip(volume2, 0.0, 1.0)))
    good = (worst < NEAR * table.reach) & np.isfinite(move[0])
    x = np.where(good, x + move, x)
    table.put(step.dst, x, _bound(step, table, x, volume2, good) if table.careful else 0.0)


def _bound(step: Fit, table: Table, x: Array, volume2: Array, good: NDArray[np.bool_]) -> (
        Array | float):
    """What the lengths show the place to be off by, where that is less than what was handed on:
    bounds handed on grow by one over the margin at every step, however well all lengths hold."""
    left = np.zeros((1, 1))
    for circle in step.circles:
        e = x - table.point(circle.centre)
        left = np.maximum(left, np.abs(np.sqrt(dot(e, e)) - circle.radius.constant))
    shown = (left + table.rounding) / np.sqrt(np.maximum(volume2, 1e-300))
    before = table.bound(step.dst)
    return np.where(good, np.minimum(shown, before), before)


def _solved(a: list[list[Array]], b: list[Array]) -> tuple[Array, Array]:
    """Symmetric 3 by 3 systems by Cramer's rule, and their determinants; ``a`` holds the lower
    triangle."""
    p, q, r = a[1][1] * a[2][2] - a[2][1] ** 2, a[2][1] * a[2][0] - a[1][0] * a[2][2], (
        a[1][0] * a[2][1] - a[1][1] * a[2][0])
    s, t = a[0][0] * a[2][2] - a[2][0] ** 2, a[1][0] * a[2][0] - a[0][0] * a[2][1]
    w = a[0][0] * a[1][1] - a[1][0] ** 2
    size = a[0][0] * p + a[1][0] * q + a[2][0] * r
    return np.stack([p * b[0] + q * b[1] + r * b[2], q * b[0] + s * b[1] + t * b[2],
                     r * b[0] + t * b[1] + w * b[2]]) / size, size
