"""Newton steps on whole poses of large rigs whose long chains have let rounding grow.

All conditions at once by least squares, through sparse normal equations (Björck 1996, section 6;
from memory): a step from 1e-7 of the size ends at rounding, and what the normal equations lose in
digits the next step makes good.
"""

from __future__ import annotations

import numpy as np
from scipy.sparse import csc_array, eye_array
from scipy.sparse.linalg import splu

from rigpose.model.equations import Array, Ints
from rigpose.model.system import System
from rigpose.solve.plan import Plan
from rigpose.solve.rest import AGREE, Rest
from rigpose.solve.search import Cells
from rigpose.solve.table import Inputs, Table

GROWN = 1e-13
"""Conditions that are off by more than this part of the reach are brought back."""
FAR = 1e-3
MOST_POSES = 64
STEPS = 4
DAMPING = 1e-22


def bring_back(rest: Rest, plan: Plan, cells: Cells, base: Table, inputs: Inputs) -> None:
    """Corrects the live poses of one frame in place, where there are few and they need it."""
    eqs, joints = plan.eqs, list(cells.group.joints)
    live = np.flatnonzero(cells.alive[:, 0])
    if not len(live) or len(live) > MOST_POSES or rest.misfit > AGREE or plan.reads_values:
        return
    known = frozenset(eqs.value_index[d] for d in plan.drives)
    system = System(eqs, known, plan.targets, ties=False)
    columns = (np.array(joints)[:, None] * eqs.dim + np.arange(eqs.dim)).ravel()
    values = np.full(len(eqs.values), np.nan)
    for v, array in inputs.values.items():
        values[v] = float(np.ravel(array)[0])
    goal = np.zeros((1, eqs.n, eqs.dim))
    for (j, axis), array in inputs.targets.items():
        goal[0, j, axis] = array[0]
    shape = (eqs.dim, len(cells.codes), 1)
    places = np.stack([p if p.shape == shape else np.broadcast_to(p, shape)
                       for p in cells.places])[..., 0]
    moved = False
    for row in live:
        x = eqs.at.copy()
        for j, place in base.points.items():
            if 0 <= j < eqs.n:
                x[j] = place[:, 0, 0]
        x[joints] = places[:, :, row]
        if _corrected(system, x, values, goal, columns, rest.reach):
            places[:, :, row] = x[joints]
            moved = True
    if moved:
        cells.places = list(places[..., None])


def _corrected(system: System, x: Array, values: Array, goal: Array, columns: Ints,
               reach: float) -> bool:
    """Newton steps on one pose (n, dim), in place; whether any was taken."""
    taken = False
    for _ in range(STEPS):
        r = system.residual(x[None], values[None], goal)[0]
        worst = float(np.abs(r).max(initial=0.0))
        if not GROWN * reach < worst < FAR * reach:
            return taken
        rows, cols, entries = system.triplets(x, values)
        # Only the group's own columns, renumbered.
        place = np.full(x.size, -1)
        place[columns] = np.arange(len(columns))
        mine = place[cols] >= 0
        full = csc_array((entries[mine], (rows[mine], place[cols[mine]])),
                         shape=(len(r), len(columns)))
        normal = csc_array(full.T @ full) + DAMPING * eye_array(len(columns), format="csc")
        x.reshape(-1)[columns] -= splu(csc_array(normal)).solve(full.T @ r)
        taken = True
    return taken
