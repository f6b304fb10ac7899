"""Whether a crossing at height zero is a dead centre of the machine, or one of its choice of
lengths only: surplus lengths may hold the joints there.

Two wheels with quartered rods are never at a dead centre together, though either rod alone is one
twice a turn. Which side the crossing takes then changes with nothing happening to the machine.
"""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np
from numpy.typing import NDArray

from rigpose.model.equations import Array, Ints
from rigpose.model.system import System
from rigpose.solve.clock import Clock
from rigpose.solve.search import Context, shared_base
from rigpose.solve.table import Inputs, Table

if TYPE_CHECKING:
    from rigpose.solve.rows import Rows

HELD = 1e-4
"""A margin above this, where the height is zero, is that of no dead centre: places are known
there to 1e-8 of the size at worst, and so is the margin."""
LOW = 0.05
"""In groups of more than `FEW` coordinates only margins below this are measured again."""
FEW = 24
MANY = 1 << 16
LEAST = 1e-12
"""Squared singular values below this are rounding."""
POOR = 1e9
"""Condition of normal equations from which on they are looked at axis by axis."""
WIDEST = 400
"""Coordinates of a group above which dense rows cost too much."""
MOST = 1 << 31
"""So many multiplications are spent on it at most."""
BATCH = 256


def may_hold(context: Context, joints: int) -> bool:
    """Whether surplus lengths take part in solving a group of so many joints."""
    agree = context.rest.misfit <= 1e-13
    return agree and bool(context.plan.redundant) and joints * context.plan.eqs.dim <= WIDEST


def full_margin(context: Context, joints: Ints, x: Array, values: Array, goal: Array) -> Array:
    """The margin that all lengths together give a group, ``(m,)``.

    x : (m, n, dim) places, NaN where a joint belongs to another group; values ``(m, n_values)``
    and goal ``(m, n, dim)``: what is known. One over the largest movement of any of the joints
    per unit change of any length, cut at 1; 0 where they can't hold the joints.
    """
    eqs = context.plan.eqs
    known = frozenset(eqs.value_index[d] for d in context.plan.drives)
    system = System(eqs, known, context.plan.targets)
    placed = ~np.isnan(x).any(axis=(0, 2))
    mine = np.zeros(eqs.n, dtype=bool)
    mine[joints] = True
    rows = ~system.touched[:, ~placed].any(axis=1) & system.touched[:, mine].any(axis=1)
    columns = (joints[:, None] * eqs.dim + np.arange(eqs.dim)).ravel()
    out = np.zeros(len(x))
    for start in range(0, len(x), BATCH):
        part = slice(start, start + BATCH)
        filled = np.where(np.isnan(x[part]), 0.25, x[part])
        with np.errstate(invalid="ignore", divide="ignore"):
            jac = system.both(filled, values[part], goal[part])[1]
        out[part] = _least(jac[:, rows][:, :, columns], eqs.dim)
    return out


def _least(jac: Array, dim: int) -> Array:
    """From normal equations: they tell margins down to `HELD`, and less is told as none."""
    m, rows, columns = jac.shape
    out = np.zeros(m)
    good = np.isfinite(jac).all(axis=(1, 2))
    if rows < columns or not good.any():
        return out
    a = jac[good]
    turned = a.transpose(0, 2, 1)
    square = turned @ a
    try:
        own = np.linalg.inv(square)
    except np.linalg.LinAlgError:
        own = np.full(square.shape, np.inf)
    full = np.abs(square).max(axis=(1, 2)) * np.abs(own).max(axis=(1, 2)) < POOR
    poor = np.flatnonzero(~full)
    if len(poor):
        own[poor], full[poor] = _by_axes(square[poor])
    each = (own @ turned).reshape(len(a), -1, dim, rows)
    moved = np.sqrt(np.einsum("mjdr,mjdr->mjr", each, each).max(axis=(1, 2)))
    least = np.minimum(1.0 / moved, 1.0)
    out[good] = np.where(full & (least > HELD), least, 0.0)
    return out


def _by_axes(square: Array) -> tuple[Array, NDArray[np.bool_]]:
    """Inverses of symmetric matrices through their own axes, and which have full rank."""
    values, axes = np.linalg.eigh(square)
    inverse = (axes / np.maximum(values, LEAST)[:, None]) @ axes.transpose(0, 2, 1)
    return inverse, values[:, 0] > LEAST


def poses_of(context: Context, base: Table, rows: Rows, row: Ints, frame: Ints,
             ) -> tuple[Array, Array, Array]:
    """``x, values, goal`` of some cells of a group's rows; ``base`` and rows share the frames."""
    eqs = context.plan.eqs
    x = np.full((len(row), eqs.n, eqs.dim), np.nan)
    sources = {p: a for p, a in base.points.items() if 0 <= p < eqs.n}
    sources.update(zip(rows.group.joints, rows.places, strict=True))
    for p, place in sources.items():
        x[:, p] = place[:, row if place.shape[1] > 1 else 0, frame if place.shape[2] > 1 else 0].T
    return x, *knowns_at(context, base.inputs, {**base.values, **rows.values}, row, frame)


def knowns_at(context: Context, inputs: Inputs, read: dict[int, Array], row: Ints, frame: Ints,
              ) -> tuple[Array, Array]:
    """``values, goal`` of some cells; ``read`` are values ``(B or 1, F or 1)`` read on the way."""
    eqs = context.plan.eqs
    values = np.full((len(row), len(eqs.values)), np.nan)
    for v, array in {**inputs.values, **read}.items():
        wide = np.atleast_2d(array)
        values[:, v] = wide[row if len(wide) > 1 else 0, frame if wide.shape[1] > 1 else 0]
    goal = np.zeros((len(row), eqs.n, eqs.dim))
    for (j, axis), array in inputs.targets.items():
        goal[:, j, axis] = array[frame]
    return values, goal


def shown_margin(context: Context, rows: Rows, clock: Clock) -> Array:
    """The margin to tell of a group's rows ``(B, F)``: where surplus lengths hold the joints better
    than those that place them, it is that of all."""
    joints = np.array(rows.group.joints, dtype=np.intp)
    if not len(rows.alive) or not may_hold(context, len(joints)):
        return rows.margin
    few = len(joints) * context.plan.eqs.dim <= FEW and rows.alive.size <= MANY
    with np.errstate(invalid="ignore"):
        row, frame = np.nonzero(rows.alive & (rows.margin < (1.0 if few else LOW)))
    if not len(row) or len(row) * (len(joints) * context.plan.eqs.dim) ** 3 > MOST:
        return rows.margin
    base = shared_base(context, clock.whole(slice(0, clock.count)))
    margin = np.array(rows.margin)
    for start in range(0, len(row), MANY):
        cell = row[start:start + MANY], frame[start:start + MANY]
        full = full_margin(context, joints, *poses_of(context, base, rows, *cell))
        margin[cell] = np.fmax(margin[cell], full)
    return margin
