"""Poses at which independence is measured: rest, and one generic pose close by."""

from __future__ import annotations

import numpy as np

from rigpose.model.equations import Array
from rigpose.model.system import System
from rigpose.solve.rest import DENSE, Rest, solve_step

STEP = 0.02
TRIES, STEPS = 8, 40


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
    for _ in range(TRIES):
        push = null.T @ rng.normal(size=len(null))
        moved = _carried(system, x, values, push * (STEP * rest.reach / np.abs(push).max()))
        size = float(np.abs(system.residual(moved[None], values)).max(initial=0.0))
        if size <= max(1e-9, 2 * rest.misfit):
            return np.stack([x, moved])
    return np.stack([x, x])


def _carried(system: System, x: Array, values: Array, push: Array) -> Array:
    """A pose that holds all lengths and has gone the given way along the push.

    Without that last condition Newton's method would slide back to where the rig is drawn: at a
    dead centre most pushes belong to no motion.
    """
    free, far = system.free, float(push @ push)
    moved = x[None].copy()
    flat = moved.reshape(-1)
    start = flat[free].copy()
    flat[free] += push
    for _ in range(STEPS):
        r, jacobian = system.both(moved, values)
        gone = float(push @ (flat[free] - start)) / far
        weight = np.sqrt(far)
        rows = np.vstack([jacobian[0][:, free], push / weight])
        right = np.append(r[0], (gone - 1.0) * weight)
        step = solve_step(rows[None], right[None], 1e-12)[0]
        flat[free] += step
        if np.abs(step).max(initial=0.0) < 1e-14:
            break
    pose: Array = moved[0]
    return pose
