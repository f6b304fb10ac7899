"""Bodies in space hung on placed joints: which joints carry them, and where the others go."""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np

from rigpose.kernels.meet import Array, dot
from rigpose.kernels.space import frame
from rigpose.model.equations import Body
from rigpose.model.spacerows import third_of


def carried(placed: Sequence[Array], base: Sequence[Array], local: Array) -> Array:
    """Where a body carries a place of its own frame; all arrays ``(3, ...)``.

    placed : two or three points; base : their places in the body's frame. With two, the place
    lies on their line.
    """
    p, e = placed[0], placed[1] - placed[0]
    b, w = base[0], base[1] - base[0]
    if len(placed) == 2:
        share: Array = dot(local - b, w) / dot(w, w)
        along: Array = p + e * share
        return along
    axes, own = frame(e, placed[2] - p), frame(w, base[2] - b)
    away = local - b
    out = p
    for axis, mine in zip(axes, own, strict=True):
        out = out + axis * dot(away, mine)
    return out


def body_misfit(body: Body, points: Sequence[Array]) -> Array:
    """The largest distance of a joint from where the body's base carries it, and of the base's
    own lengths; a mirrored body is far off. Points ``(3, B, F)`` in the body's order."""
    a, b = body.base
    c = third_of(body.shape, a, b)
    base = [a, b] if c is None else [a, b, c]
    local = [body.shape[k].reshape(3, 1, 1) for k in range(len(points))]
    worst = np.zeros((1, 1))
    for i in range(len(base)):
        for j in range(i):
            e = points[base[i]] - points[base[j]]
            want = float(np.linalg.norm(body.shape[base[i]] - body.shape[base[j]]))
            worst = np.maximum(worst, np.abs(np.sqrt(dot(e, e)) - want))
    for k, point in enumerate(points):
        if k not in base:
            gap = point - carried([points[j] for j in base], [local[j] for j in base], local[k])
            worst = np.maximum(worst, np.sqrt(dot(gap, gap)))
    return worst
