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
from scipy.linalg import lstsq
from scipy.sparse import csr_array
from scipy.sparse.linalg import lsmr

from rigpose.ground.tolerance import Tolerances
from rigpose.model.equations import Array, Equations, Ints
from rigpose.model.gauges import zeros_at
from rigpose.model.judge import size_of
from rigpose.model.lower import lower
from rigpose.model.rig import Rig
from rigpose.model.system import System
from rigpose.solve.blocks import independent_rows

Mask = NDArray[np.bool_]

DENSE = 900
"""Up to this many coordinates dense linear algebra is faster and exact about ranks."""
SEEDS = 64
AGREE = 1e-13
"""Lengths that disagree by less do so by rounding."""


@dataclass(frozen=True)
class Rest:
    """The rest pose of a rig.

    positions : (n, dim) in the rig's frame; scaled : the same in the equations' frame
    size : the largest distance between two joints, rig's unit; reach: the same, scaled
    equations : the rig's equations with cranks counted from this pose
    misfit : the largest departure of any length, as a fraction of the size
    worst : the part with that departure
    moved : (n,) how far each joint lies from its written place (NaN: none was written)
    surplus : bones that give way because surplus lengths disagree by more than rounding: of each
    dependent set the last in the file
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
    surplus: frozenset[str] = frozenset()

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
    if len(jacobian) == 1:
        # One pose: pivoted QR is many times faster than singular values, and decides as well.
        return -_shortest(jacobian[0], residual[0], cut)[None]
    step: Array = -np.einsum("nmr,nr->nm", np.linalg.pinv(jacobian, rcond=cut), residual)
    return step


def _shortest(matrix: Array, right: Array, cut: float) -> Array:
    """The shortest least-squares solution."""
    if not matrix.size:
        return np.zeros(matrix.shape[1])
    solution: Array = lstsq(matrix, right, cond=cut, lapack_driver="gelsy", check_finite=False)[0]
    return solution


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
    """The pose that holds all lengths and lies nearest to ``start`` (n, dim).

    Each step goes to the nearest point of the linearised conditions; it is halved until distance
    and misfit together fall.
    """
    x, _ = assemble(system, start[None], values)
    free = system.free
    # Joints without a written place have none to be near to.
    aim = system.eqs.at.reshape(-1)[free]
    best = _merit(system, x, values, aim)
    for _ in range(60):
        r, jac = system.both(x, values)
        away = np.nan_to_num(aim - x.reshape(-1)[free])
        step = away - _shortest(jac[0][:, free], jac[0][:, free] @ away + r[0], 1e-7)
        if np.abs(step).max(initial=0.0) < 1e-13:
            break
        x, now = _part_way(system, x, values, aim, step, best)
        if now >= best * (1 - 1e-13):
            break
        best = now
    x, _ = assemble(system, x, values)
    pose: Array = x[0]
    return pose


def _part_way(system: System, x: Array, values: Array, aim: Array, step: Array,
              best: float) -> tuple[Array, float]:
    """As much of a step as lowers the merit; the pose as it was where none does."""
    part = 1.0
    while part > 1e-4:
        tried = x.copy()
        tried.reshape(-1)[system.free] += part * step
        now = _merit(system, tried, values, aim)
        if now < best:
            return tried, now
        part /= 2
    return x, best


def _merit(system: System, x: Array, values: Array, aim: Array) -> float:
    """Distance to the aim, and the misfit weighed so that it can't pay."""
    off = system.residual(x, values)[0]
    far = float(np.linalg.norm(np.nan_to_num(x.reshape(-1)[system.free] - aim)))
    return far + 10.0 * float(np.abs(off).sum())


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
    if missing.any() or np.abs(residual).max(initial=0.0) > 2e-15:
        big = start.size > DENSE
        start = _big(system, start, values[0]) if big else _nearest(system, start, values)
        misfit = np.abs(system.residual(start[None], values)).max(initial=0.0)
        if misfit > AGREE and not big:
            surplus = giving_way(system, start)
            if surplus:
                pose = _nearest(replace(system, without=surplus), start, values)
                return replace(_make(rig, eqs, system, pose, values), surplus=surplus)
    return _make(rig, eqs, system, start, values)


def giving_way(system: System, x: Array) -> frozenset[str]:
    """Bones whose rows at a pose (n, dim) add nothing to the rows before them: bodies and rails
    come first, then bones in the file's order."""
    values = np.full((1, len(system.eqs.values)), np.nan)
    _, jacobian = system.both(x[None], values)
    rows = jacobian[0][:, system.free]
    bones = len(system.dist_rows)
    order = np.concatenate([np.arange(bones, len(rows)), np.arange(bones)])
    kept = order[independent_rows(rows[order])]
    lost = set(range(bones)) - set(kept.tolist())
    return frozenset(system.row_names[k] for k in lost)


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
    good = good[_regular(system, found[good], values[:len(good)])]
    # Without a written place there is no nearest pose: take the one that reads first when
    # coordinates are compared in the file's order, so that every machine takes the same.
    keys = np.round(found[good].reshape(len(good), -1), 9)
    pick: Array = found[good[np.lexsort(-keys.T[::-1])[0]]]
    return pick


def _regular(system: System, poses: Array, values: Array) -> Mask:
    """Poses of the largest rank, and of these the ones in which fewest joints fall together: a
    rig can turn there in ways that it can't elsewhere, and such a pose is no one's rest pose."""
    _, jacobian = system.both(poses, values)
    ranks = (np.linalg.svd(jacobian[:, :, system.free], compute_uv=False) > 1e-7).sum(axis=1)
    gaps = np.linalg.norm(poses[:, :, None] - poses[:, None], axis=-1)
    together = (gaps < 1e-6).sum(axis=(1, 2))
    together = np.where(ranks == ranks.max(initial=0), together, np.iinfo(together.dtype).max)
    best: Mask = together == together.min()
    return best


def _make(rig: Rig, eqs: Equations, system: System, x: Array, values: Array) -> Rest:
    residual = np.abs(system.residual(x[None], values)[0])
    reach = size_of(x)
    worst = int(np.argmax(residual)) if len(residual) else -1
    exact = np.array_equal(x, eqs.at)
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
