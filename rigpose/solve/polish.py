"""Takes out what rounding has left near dead centres: Gauss-Newton on a group's own rows.

At a dead centre a place is known to the square root of rounding only, and a surplus length that
closes there is off by as much. Surplus lengths take part where the rig's numbers agree to
rounding; where they only agree within slack they are measured and left alone.
"""

from __future__ import annotations

from dataclasses import replace
from typing import TYPE_CHECKING

import numpy as np

from rigpose.model.equations import Array, Equations, Ints
from rigpose.model.system import System
from rigpose.solve.plan import Plan
from rigpose.solve.rest import Rest, solve_step

if TYPE_CHECKING:
    from rigpose.solve.search import Cells
    from rigpose.solve.table import Inputs, Table

GOOD, ENOUGH = 2e-15, 1e-13
"""Rows that hold to this are left alone; in wide groups, where a step costs far more, to less."""
WIDE = 48
BATCH = 256


def polish(rest: Rest, plan: Plan, cells: Cells, base: Table, inputs: Inputs) -> None:
    """Correct the places of live cells whose rows are off by more than rounding, in place."""
    rows, frames = np.nonzero(cells.alive)
    joints = list(cells.group.joints)
    if not len(rows) or not joints:
        return
    eqs = plan.eqs
    known = frozenset(eqs.value_index[d] for d in plan.drives)
    whole = System(eqs, known, plan.targets, ties=False)
    if rest.misfit > 1e-13:
        whole = replace(whole, without=frozenset(plan.redundant))
    shape = cells.alive.shape
    places = [np.array(np.broadcast_to(p, (len(p), *shape))) for p in cells.places]
    for start in range(0, len(rows), BATCH):
        b, f = rows[start : start + BATCH], frames[start : start + BATCH]
        x = _poses(eqs, base, b, f)
        for j, place in zip(joints, places, strict=True):
            x[:, j] = place[:, b, f].T
        fixed = _corrected(whole, joints, x, _values(eqs.values, base, inputs, b, f),
                           _goals(eqs, inputs, f))
        for j, place in zip(joints, places, strict=True):
            place[:, b, f] = fixed[:, j].T
    cells.places = places


def _poses(eqs: Equations, base: Table, b: Ints, f: Ints) -> Array:
    x = np.full((len(b), eqs.n, eqs.dim), np.nan)
    for p in range(eqs.n):
        if p in base.points:
            place = base.points[p]
            x[:, p] = place[:, 0, f if place.shape[2] > 1 else np.zeros_like(f)].T
    return x


def _values(names: tuple[str, ...], base: Table, inputs: Inputs, b: Ints, f: Ints) -> Array:
    values = np.full((len(b), len(names)), np.nan)
    for v, array in inputs.values.items():
        values[:, v] = array[b if array.shape[0] > 1 else 0, f] if array.ndim == 2 else array[f]
    return values


def _goals(eqs: Equations, inputs: Inputs, f: Ints) -> Array:
    goal = np.zeros((len(f), eqs.n, eqs.dim))
    for (j, axis), array in inputs.targets.items():
        goal[:, j, axis] = array[f]
    return goal


def _corrected(system: System, joints: list[int], x: Array, values: Array, goal: Array) -> Array:
    """Two Gauss-Newton steps on the rows whose joints are all placed."""
    placed = ~np.isnan(x[0]).any(axis=1)
    mine = np.zeros(system.eqs.n, dtype=bool)
    mine[joints] = True
    rows = ~system.touched[:, ~placed].any(axis=1) & system.touched[:, mine].any(axis=1)
    columns = (np.array(joints)[:, None] * x.shape[2] + np.arange(x.shape[2])).ravel()
    filled = np.where(np.isnan(x), 0.25, x)
    flat = filled.reshape(len(x), -1)
    good = GOOD if len(columns) <= WIDE else ENOUGH
    for _ in range(3):
        with np.errstate(invalid="ignore", divide="ignore"):
            r, jac = system.both(filled, values, goal)
        r = r[:, rows]
        off = np.abs(r).max(axis=1, initial=0.0) > good
        if not off.any():
            break
        a = jac[np.ix_(off, rows)][:, :, columns]
        flat[np.ix_(off, columns)] += solve_step(a, r[off], 1e-9)
    out: Array = np.where(np.isnan(x), np.nan, filled)
    return out
