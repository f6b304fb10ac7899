"""Poses at which independence is measured: rest, and one generic pose close by."""

from __future__ import annotations

import numpy as np

from rigpose.model.equations import Array
from rigpose.model.system import System
from rigpose.solve.rest import DENSE, Rest, assemble

STEP = 0.02


def nearby(rest: Rest, seed: int = 11) -> Array:
    """``(2, n, dim)``: the rest pose, and one moved by a generic motion that keeps all lengths.

    A rig drawn at a dead centre, or with parts in line, has meetings that look singular at rest
    only. Rigs too large for dense algebra give the rest pose twice.
    """
    x = rest.scaled
    if x.size > DENSE:
        return np.stack([x, x])
    system = System(rest.equations)
    values = np.full((1, len(rest.equations.values)), np.nan)
    _, jacobian = system.both(x[None], values)
    free = system.free
    _, s, vt = np.linalg.svd(jacobian[0][:, free], full_matrices=True)
    rank = int((s > max(rest.tolerances.zero, 1e-7)).sum())
    null = vt[rank:]
    if not len(null):
        return np.stack([x, x])
    rng = np.random.default_rng(seed)
    push = null.T @ rng.normal(size=len(null))
    moved = x[None].copy()
    moved.reshape(-1)[free] += STEP * rest.reach * push / np.abs(push).max()
    moved, size = assemble(system, moved, values)
    if size[0] > max(1e-9, 2 * rest.misfit):
        return np.stack([x, x])
    return np.stack([x, moved[0]])
