"""Newton's and Gauss-Newton steps of a block, for thousands of poses at once.

Newton's method on an independent choice of rows goes far; what it brings near is then polished on
all rows of the block (Gauss-Newton through pseudo-inverses) until the residual stops falling: a
choice of rows made at rest may be singular elsewhere, though all rows together are not.
"""

from __future__ import annotations

from collections.abc import Callable

import numpy as np

from rigpose.model.equations import Array, Ints
from rigpose.solve.ownrows import OwnRows

STEPS = 40
PATIENCE, CLOSING = 12, 0.1
AGAIN, FALLING = 4, 0.25
"""After so many steps starts that are not so near are given up, and every so many more those whose
residual has not fallen to that part."""
ENTRIES = 1 << 18
"""Entries of the Jacobians in hand at once: few enough to stay in the cache."""
NEAR = 1e-10
"""Residual from which on polishing takes over."""
POLISHING = 30
CUT = 1e-9
"""Singular values below this part of the largest count as zero."""
DEAD = 3e-8
"""A pose whose smallest singular value is below this part of the largest is at a dead centre: it is
known to the square root of rounding only, and so is its margin."""
ALL_BUT = 1e-6
"""Those below this may be: normal equations tell no less."""
POOR = 1e4
"""Condition from which on margins are told by singular values."""
DAMPING = 1e-15
FINE = 1e-15
"""Residual that is rounding."""
STUCK = 1e-8
"""Last steps that are longer have stopped for want of rank, not for being there."""


def _moved(a: Array, r: Array) -> Array:
    """Newton's steps ``(N, w)``, by pseudo-inverse where the matrix is singular to the last bit."""
    try:
        return np.asarray(np.linalg.solve(a, -r[..., None])[..., 0])
    except np.linalg.LinAlgError:
        singular = np.linalg.det(a) == 0
    step = np.empty_like(r)
    step[singular] = _shortest(a[singular], r[singular])
    try:
        step[~singular] = np.linalg.solve(a[~singular], -r[~singular, :, None])[..., 0]
    except np.linalg.LinAlgError:
        step[~singular] = _shortest(a[~singular], r[~singular])
    return step


def _shortest(a: Array, r: Array) -> Array:
    """Least-squares steps ``(N, w)`` through pseudo-inverses."""
    step: Array = -np.einsum("nwm,nm->nw", np.linalg.pinv(a, rcond=CUT), r)
    return step


def _by_squares(a: Array, r: Array) -> Array:
    """Least-squares steps ``(N, w)`` by normal equations, damped a little where rank is lost."""
    turned = a.transpose(0, 2, 1)
    square = turned @ a
    trace = np.einsum("nww->n", square)
    square += (DAMPING * trace)[:, None, None] * np.eye(square.shape[1])
    try:
        return np.asarray(np.linalg.solve(square, -(turned @ r[..., None]))[..., 0])
    except np.linalg.LinAlgError:
        return _shortest(a, r)


def _cut(step: Array) -> Array:
    """A step longer than the whole rig leaves the region in which the slopes mean anything."""
    long = np.abs(step).max(axis=1, keepdims=True)
    part: Array = step * np.minimum(1.0, 1.0 / np.maximum(long, 1e-300))
    return part


def newton(own: OwnRows, x: Array, values: Array, goal: Array) -> tuple[Array, Ints]:
    """Newton's method from poses ``(N, k, dim)``; the poses, and which came near a solution."""
    x = x.copy()
    share = max(1, ENTRIES // own.width**2)
    near = [start + _newton(own, x[start:start + share], values[start:start + share],
                            goal[start:start + share]) for start in range(0, len(x), share)]
    return x, np.concatenate(near) if near else np.zeros(0, dtype=np.intp)


def _newton(own: OwnRows, x: Array, values: Array, goal: Array) -> Ints:
    """Moves the poses in place; which came near a solution."""
    flat = x.reshape(len(x), -1)
    active = np.arange(len(x))
    near: list[Ints] = []
    before = np.full(len(x), np.inf)
    for turn in range(STEPS):
        r, a = own.both(x[active], values[active], goal[active], own.choice)
        size = np.abs(r).max(axis=1)
        near.append(active[size < NEAR])
        going = (size >= NEAR) & (size < 1e6)
        if turn >= PATIENCE and turn % AGAIN == 0:
            # Starts that wander or stick are given up; others lie nearer to what they would find.
            going &= (size < CLOSING) & (size < FALLING * before[active])
            before[active] = size
        active = active[going]
        if not len(active):
            break
        flat[np.ix_(active, own.columns)] += _cut(_moved(a[going], r[going]))
    return np.sort(np.concatenate(near))


def polished(own: OwnRows, x: Array, values: Array, goal: Array, rows: Ints,
             steps: int = POLISHING) -> tuple[Array, Array]:
    """Gauss-Newton on some rows from poses ``(N, k, dim)`` until their residual stops falling;
    the best poses on the way and their largest residuals ``(N,)``."""
    best, size = x.copy(), np.full(len(x), np.inf)
    long = _fall(own, best, size, np.arange(len(x)), (values, goal), rows, _by_squares, steps)
    # Normal equations square the condition: what they leave off is done without them.
    rough = np.flatnonzero(((size > FINE) | (long > STUCK)) & np.isfinite(size))
    if len(rough):
        # A step along what is all but open may raise the residual before it falls again.
        _fall(own, best, size, rough, (values, goal), rows, _shortest, steps, 3)
    return best, size


def _fall(own: OwnRows, best: Array, size: Array, active: Ints, given: tuple[Array, Array],
          rows: Ints, step: Callable[[Array, Array], Array], steps: int,
          patience: int = 1) -> Array:
    """Steps of some poses until their residual has not fallen for ``patience`` steps; keeps the
    best in place, and tells how long the last steps were ``(N,)``."""
    flat, now = best.reshape(len(best), -1), best.reshape(len(best), -1).copy()
    size[active], long, idle = np.inf, np.zeros(len(best)), np.zeros(len(best), dtype=np.intp)
    for _ in range(steps):
        values, goal = given[0][active], given[1][active]
        r, a = own.both(now[active].reshape(-1, *best.shape[1:]), values, goal, rows)
        off = np.nan_to_num(np.abs(r).max(axis=1), nan=np.inf)
        falls = off < size[active]
        flat[active[falls]] = now[active[falls]]
        # Halving is what a step does at worst near a solution, a quarter of the residual.
        idle[active] = np.where(off < 0.7 * size[active], 0, idle[active] + 1)
        going = (idle[active] < patience) & (off > FINE)
        size[active] = np.minimum(size[active], off)
        active = active[going]
        if not len(active):
            break
        move = _cut(step(a[going], r[going]))
        long[active] = np.abs(move).max(axis=1)
        now[np.ix_(active, own.columns)] += move
    return long


def margins(own: OwnRows, x: Array, values: Array, goal: Array, rows: Ints) -> Array:
    """``(N,)``: one over the largest movement of a joint per unit change of a row, cut at 1; 0
    at dead centres, NaN where what the block hangs on is unknown."""
    _, a = own.both(x, values, goal, rows)
    out = np.full(len(x), np.nan)
    known = np.isfinite(a).all(axis=(1, 2))
    if not known.any():
        return out
    out[known] = _least_moves(a[known], x.shape[2])
    return out


def _least_moves(a: Array, dim: int) -> Array:
    """Margins of matrices ``(N, m, w)``."""
    turned = a.transpose(0, 2, 1)
    try:
        inverse = np.linalg.inv(turned @ a) @ turned
    except np.linalg.LinAlgError:
        inverse = np.full(turned.shape, np.inf)
    size = np.abs(a).max(axis=(1, 2)) * np.abs(inverse).max(axis=(1, 2), initial=0.0)
    # Normal equations square the condition: where that is poor, singular values tell.
    poor = np.flatnonzero(~(size < POOR))
    if len(poor):
        u, s, vt = np.linalg.svd(a[poor], full_matrices=False)
        inverse[poor] = (vt.transpose(0, 2, 1) / np.maximum(s, 1e-300)[:, None]) @ (
            u.transpose(0, 2, 1))
    each = inverse.reshape(len(inverse), -1, dim, inverse.shape[2])
    far = np.sqrt((each * each).sum(axis=2).max(axis=(1, 2), initial=0.0))
    out: Array = np.minimum(1.0, 1.0 / np.maximum(far, 1.0))
    if len(poor):
        out[poor[s[:, -1] < DEAD * s[:, 0]]] = 0.0
    return out


def null_vectors(a: Array) -> tuple[Ints, Array]:
    """Which of some matrices ``(N, m, w)`` have lost their rank or all but lost it, and along what:
    numbers of poses ``(p,)`` and unit vectors ``(p, w)``, as many for a pose as its rank lacks."""
    square, axes = np.linalg.eigh(a.transpose(0, 2, 1) @ a)
    pose, which = np.nonzero(square < ALL_BUT**2 * square[:, -1:])
    return pose, axes[pose, :, which]
