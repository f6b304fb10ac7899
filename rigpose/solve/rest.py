"""The rest pose: the one that the rig file describes, found once.

Holds every length that has a number and lies nearest to the places written in the file. It is
found by Newton's method on the conditions of the nearest point (Lagrange multipliers; see
Nocedal and Wright 2006, chapter 18) as Gauss-Newton steps through pseudo-inverses, which stay
short in directions that no length fixes. Joints without a place start from many seeds.
"""

from __future__ import annotations

from dataclasses import dataclass, replace
from functools import lru_cache

import numpy as np
from numpy.typing import NDArray
from scipy.sparse import csr_array
from scipy.sparse.linalg import lsmr

from rigpose.ground.tolerance import Tolerances
from rigpose.model.equations import Array, Equations, Ints
from rigpose.model.gauges import zeros_at
from rigpose.model.judge import size_of
from rigpose.model.lower import lower
from rigpose.model.rig import Rig
from rigpose.model.system import System

Mask = NDArray[np.bool_]

DENSE = 900
"""Up to this many coordinates dense linear algebra is faster and exact about ranks."""
SEEDS = 64


@dataclass(frozen=True)
class Rest:
    """The rest pose of a rig.

    positions : (n, dim) in the rig's frame; scaled : the same in the equations' frame
    size : the largest distance between two joints, rig's unit; reach: the same, scaled
    equations : the rig's equations with cranks counted from this pose
    misfit : the largest departure of any length, as a fraction of the size
    worst : the part with that departure
    moved : (n,) how far each joint lies from its written place (NaN: none was written)
    """

    rig: Rig
    positions: Array
    scaled: Array
    size: float
    reach: float
    equations: Equations
    misfit: float
    worst: str
    moved: Array

    @property
    def tolerances(self) -> Tolerances:
        """The rig's own tolerances."""
        return Tolerances(slack=self.rig.slack, close=self.rig.close)

    @property
    def assembles(self) -> bool:
        """Whether all lengths hold within `slack`."""
        return self.misfit <= self.rig.slack


def solve_step(jacobian: Array, residual: Array, cut: float = 1e-9) -> Array:
    """Shortest least-squares steps ``(N, m)`` for ``(N, r, m)``; singular values below the
    fraction ``cut`` of the largest are left out (truncated least squares)."""
    step: Array = -np.einsum("nmr,nr->nm", np.linalg.pinv(jacobian, rcond=cut), residual)
    return step


def assemble(
    system: System, x: Array, values: Array, goal: Array | None = None, steps: int = 60,
    columns: Ints | None = None,
) -> tuple[Array, Array]:
    """Bring poses ``(N, n, dim)`` onto their rows by Gauss-Newton steps with halving.

    Returns the poses and their largest residuals ``(N,)``.
    """
    free = system.free if columns is None else columns
    x = x.copy()
    flat = x.reshape(len(x), -1)
    r, jac = system.both(x, values, goal)
    size = np.abs(r).max(axis=1, initial=0.0)
    active = np.arange(len(x))
    for _ in range(steps):
        active = active[size[active] > 1e-15]
        if not len(active):
            break
        step = solve_step(jac[:, :, free], r)
        tried, gain = 1.0, np.zeros(len(active), dtype=bool)
        old = flat[active][:, free]
        todo = np.arange(len(active))
        new_size = size[active].copy()
        while len(todo) and tried > 1e-3:
            rows = active[todo]
            flat[np.ix_(rows, free)] = old[todo] + tried * step[todo]
            aim = None if goal is None else goal[rows]
            now = np.abs(system.residual(x[rows], values[rows], aim)).max(axis=1, initial=0.0)
            better = now < size[rows]
            new_size[todo[better]] = now[better]
            gain[todo[better]] = True
            todo = todo[~better]
            tried /= 2
        flat[np.ix_(active[~gain], free)] = old[~gain]
        size[active] = new_size
        active = active[gain]
        if not len(active):
            break
        r, jac = system.both(x[active], values[active], None if goal is None else goal[active])
    return x, size


def _nearest(system: System, start: Array, values: Array) -> Array:
    """Slide along the poses that hold all lengths towards ``start`` (n, dim)."""
    x, size = assemble(system, start[None], values)
    free = system.free
    aim = start.reshape(-1)[free]
    for _ in range(30):
        _, jac = system.both(x, values)
        j = jac[0][:, free]
        away = aim - x.reshape(-1)[free]
        inverse = np.linalg.pinv(j, rcond=1e-7)
        slide = away - inverse @ (j @ away)
        if np.linalg.norm(slide) < 1e-10:
            break
        moved = x.copy()
        moved.reshape(-1)[free] += slide
        moved, new = assemble(system, moved, values)
        far = np.linalg.norm(moved.reshape(-1)[free] - aim)
        if new[0] > max(size[0], 1e-13) * 4 or far >= np.linalg.norm(away) * (1 - 1e-12):
            break
        x = moved
    pose: Array = x[0]
    return pose


def _big(system: System, start: Array, values: Array) -> Array:
    """Gauss-Newton with sparse least squares, for rigs too large for dense algebra."""
    x, free = start.copy(), system.free
    for _ in range(30):
        r = system.residual(x[None], values[None])[0]
        if np.abs(r).max(initial=0.0) < 1e-13:
            break
        rows, cols, entries = system.triplets(x, values)
        full = csr_array((entries, (rows, cols)), shape=(len(r), x.size))[:, free]
        x.reshape(-1)[free] -= lsmr(full, r, atol=1e-14, btol=1e-14, maxiter=4 * len(free))[0]
    return x


def _seeded(eqs: Equations) -> Array:
    """Starts for joints without a place: near the joints they are tied to, from one seed."""
    rng = np.random.default_rng(7)
    missing = np.isnan(eqs.at[:, 0])
    known = eqs.at[~missing]
    middle = known.mean(axis=0) if len(known) else np.zeros(eqs.dim)
    starts = np.repeat(eqs.at[None], SEEDS, axis=0)
    starts[:, missing] = middle + rng.normal(size=(SEEDS, int(missing.sum()), eqs.dim))
    return starts


@lru_cache(maxsize=64)
def find_rest(rig: Rig) -> Rest:
    """The rest pose of a rig; a rig that cannot close gets the best misfit and says so."""
    eqs = lower(rig)
    system = System(eqs)
    values = np.full((1, len(eqs.values)), np.nan)
    start = eqs.at.copy()
    missing = np.isnan(start[:, 0])
    if missing.any():
        start = _start_missing(system, eqs, start, missing)
    residual = system.residual(start[None], values)[0]
    if np.abs(residual).max(initial=0.0) > 2e-15:
        big = start.size > DENSE
        start = _big(system, start, values[0]) if big else _nearest(system, start, values)
    return _make(rig, eqs, system, start, values)


def _start_missing(system: System, eqs: Equations, start: Array, missing: Mask) -> Array:
    if start.size > DENSE:
        filled = start.copy()
        filled[missing] = np.nanmean(start, axis=0)
        filled[missing] += np.random.default_rng(7).normal(size=(int(missing.sum()), eqs.dim)) * 0.1
        return filled
    starts = _seeded(eqs)
    values = np.full((SEEDS, len(eqs.values)), np.nan)
    only = np.flatnonzero(np.repeat(missing & ~eqs.pinned, eqs.dim))
    found, size = assemble(system, starts, values, columns=only)
    found, size = assemble(system, found, values) if size.min() > 1e-12 else (found, size)
    good = np.flatnonzero(size < max(10 * size.min(), 1e-11))
    # Without a written place there is no nearest pose: take the one that reads first when
    # coordinates are compared in the file's order, so that every machine takes the same.
    keys = np.round(found[good].reshape(len(good), -1), 9)
    pick: Array = found[good[np.lexsort(-keys.T[::-1])[0]]]
    return pick


def _make(rig: Rig, eqs: Equations, system: System, x: Array, values: Array) -> Rest:
    residual = np.abs(system.residual(x[None], values)[0])
    reach = size_of(x)
    worst = int(np.argmax(residual)) if len(residual) else -1
    exact = bool(residual.max(initial=0.0) <= 2e-15) and not np.isnan(eqs.at).any()
    positions = eqs.outward(x)
    if exact:
        positions = np.array([j.at for j in rig.joints], dtype=float)
    for array in (positions, x):
        array.flags.writeable = False
    zeros = zeros_at(eqs, x)
    settled = replace(eqs, at=x, angles=replace(eqs.angles, zero=zeros))
    return Rest(
        rig=rig, positions=positions, scaled=x, size=reach * eqs.scale, reach=reach,
        equations=settled,
        misfit=float(residual.max(initial=0.0) / reach),
        worst=system.row_names[worst] if worst >= 0 else "",
        moved=np.linalg.norm(x - eqs.at, axis=1) * eqs.scale,
    )
