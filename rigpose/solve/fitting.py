"""Taking rounding out of long chains on the way: a joint that more lengths hold than place it is
moved onto all of them at once.

Placed by three earlier joints each, the points of a long chain hand their rounding on enlarged by
one over the margin at every step; surplus lengths, which would only check, hold it down. Only where
the file's lengths agree to rounding: others are measured and never solved for.
"""

from __future__ import annotations

from collections.abc import Iterable

import numpy as np

from rigpose.kernels.meet import Array, dot
from rigpose.solve.flow import writes
from rigpose.solve.plan import Check, Circle, Fit, Junction, Length, Step
from rigpose.solve.run import Ways, execute
from rigpose.solve.table import Table

NEAR = 1e-9
"""A branch whose lengths are off by more than this part of the reach is a wrong one, for the
checks to find; only rounding is taken out."""


def with_fits(steps: list[Step], checks: Iterable[Check], lengths: Array) -> list[Step]:
    """The steps with a fit after each junction that surplus lengths come to.

    lengths : (n_distances,) of the equations, NaN where one is driven
    """
    maker = {p: k for k, step in enumerate(steps) for p in writes(step)}
    more: dict[int, list[Circle]] = {}
    for check in checks:
        if check.kind != "distance" or not np.isfinite(lengths[check.index]):
            continue
        a, b = check.points
        first, last = sorted((a, b), key=lambda p: maker.get(p, -1))
        k = maker.get(last, -1)
        if k >= 0 and isinstance(steps[k], Junction):
            circle = Circle(first, Length(constant=float(lengths[check.index])))
            more.setdefault(k, []).append(circle)
    out: list[Step] = []
    for k, step in enumerate(steps):
        out.append(step)
        if k in more and isinstance(step, Junction):
            own = [c for c in step.curves if isinstance(c, Circle) and c.radius.constant]
            if len(own) == 3:
                out.append(Fit(dst=step.dst, circles=(*own, *more[k]), parts=step.parts))
    return out


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
    move = _solved(normal, right)
    good = (worst < NEAR * table.reach) & np.isfinite(move[0])
    table.put(step.dst, np.where(good, x + move, x), table.bound(step.dst))


def _solved(a: list[list[Array]], b: list[Array]) -> Array:
    """Symmetric 3 by 3 systems by Cramer's rule; ``a`` holds the lower triangle."""
    p, q, r = a[1][1] * a[2][2] - a[2][1] ** 2, a[2][1] * a[2][0] - a[1][0] * a[2][2], (
        a[1][0] * a[2][1] - a[1][1] * a[2][0])
    s, t = a[0][0] * a[2][2] - a[2][0] ** 2, a[1][0] * a[2][0] - a[0][0] * a[2][1]
    w = a[0][0] * a[1][1] - a[1][0] ** 2
    size = a[0][0] * p + a[1][0] * q + a[2][0] * r
    return np.stack([p * b[0] + q * b[1] + r * b[2], q * b[0] + s * b[1] + t * b[2],
                     r * b[0] + t * b[1] + w * b[2]]) / size
