"""Whole poses over frames from the rows of groups, written in blocks."""

from __future__ import annotations

from collections.abc import Mapping, Sequence

import numpy as np

from rigpose.model.equations import Array, Ints
from rigpose.motion.product import Picks, Sorted
from rigpose.solve.rest import Rest

CELLS = 1 << 11


def assembled(rest: Rest, picks: Sequence[Sorted], mixed: Picks, base: Mapping[int, Array],
              frames: int) -> Array:
    """``(n_branches, n_frames, n_joints, dim)`` in the rig's frame, NaN without a pose.

    Written in blocks that stay in the cache; a joint's places come as rows of their own.
    """
    eqs = rest.equations
    b, width = len(mixed.index), eqs.n * eqs.dim
    out = np.empty((b, frames, eqs.n, eqs.dim))
    rows_step = max(1, min(b, CELLS // max(frames, 1)))
    frames_step = max(1, min(frames, CELLS))
    sources = [(j, place, -1) for j, place in base.items()]
    sources += [(j, place, g) for g, p in enumerate(picks)
                for j, place in zip(p.rows.group.joints, p.rows.places, strict=True)]
    order = [mixed.index[:, g].copy() for g in range(len(picks))]
    block = np.full((width, rows_step, frames_step), np.nan)
    for r in range(0, b, rows_step):
        for f in range(0, frames, frames_step):
            here = out[r:r + rows_step, f:f + frames_step]
            part = block[:, :here.shape[0], :here.shape[1]]
            for j, place, g in sources:
                _gather(part[j * eqs.dim:(j + 1) * eqs.dim], place,
                        order[g][r:r + rows_step] if g >= 0 else None,
                        slice(f, f + frames_step))
            _outward(part, here.reshape(*here.shape[:2], width), eqs.scale,
                     np.tile(eqs.origin, eqs.n))
    if not mixed.alive.all():
        out[~mixed.alive] = np.nan
    return out


def _gather(part: Array, place: Array, which: Ints | None, frames: slice) -> None:
    """One joint's places of some rows and frames."""
    mine = place[:, :, frames] if place.shape[2] > 1 else place
    if which is None or mine.shape[1] == 1:
        part[...] = mine
    elif mine.shape[2] == 1:
        for axis in range(len(part)):
            np.take(mine[axis, :, 0], which, out=part[axis, :, 0], mode="clip")
        part[:, :, 1:] = part[:, :, :1]
    else:
        part[...] = mine[:, which] if len(which) < mine.shape[1] or len(which) > 1 else mine


def _outward(part: Array, here: Array, scale: float, origin: Array) -> None:
    """From ``(width, rows, frames)`` scaled to ``(rows, frames, width)`` in the rig's frame."""
    turned = part.transpose(1, 2, 0)
    if scale == 1.0:
        here[...] = turned
    else:
        np.multiply(turned, scale, out=here)
    if origin.any():
        here += origin
