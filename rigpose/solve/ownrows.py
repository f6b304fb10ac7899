"""A block's own rows and columns: what Newton's method needs of a rig, and nothing else of it.

The parts behind the block's rows are taken into equations of their own, with just the joints that
they touch: thousands of starts then cost what the block costs, however large the rig is.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, field, replace
from functools import cached_property
from typing import TypeVar

import numpy as np

from rigpose.model.equations import (
    GROUND,
    Angles,
    Array,
    Body,
    Distances,
    Equations,
    Ints,
    Lines,
    Planes,
)
from rigpose.model.gauges import measure
from rigpose.model.system import Family, System
from rigpose.solve.blocksystem import BlockSystem
from rigpose.solve.plan import Cluster

Parts = TypeVar("Parts", Distances, Lines, Angles, Planes)
AGREE = 1e-13
"""Lengths that disagree by less do so by rounding."""
DISTANCE, BODY, LINE, PLANE, ANGLE, TARGET, TIE = range(7)


@dataclass(frozen=True)
class OwnRows:
    """The rows of one block in numbers of its own.

    system : of the block's parts alone; keep ``(k,)`` the rig's joints that it touches, placed
    ones too; inside ``(w / dim,)`` which of these the block places; rows ``(m,)`` all rows that
    hold them, choice ``(w,)`` which of ``rows`` are the independent ones, and agreed those that
    are solved for: all of them where the rig's own numbers agree to rounding at rest. ``wished``
    says that surplus rows hold given numbers, which need not agree so well. ``scatters`` keeps
    where slopes go.
    """

    system: System
    keep: Ints
    inside: Ints
    rows: Ints
    choice: Ints
    agreed: Ints
    wished: bool
    scatters: dict[bytes, list[list[tuple[Ints, Ints]]]] = field(default_factory=dict)

    @cached_property
    def columns(self) -> Ints:
        """The unknowns' columns among the coordinates of the joints kept."""
        return _wide(self.inside, self.system.eqs.dim)

    @property
    def width(self) -> int:
        """How many unknowns."""
        return len(self.inside) * self.system.eqs.dim

    def residual(self, x: Array, values: Array, goal: Array) -> Array:
        """Of all rows, ``(N, m)``; poses ``x (N, k, dim)``, ``values (N, v)``, ``goal`` as x."""
        return self.system.residual(x, values, goal)[:, self.rows]

    def both(self, x: Array, values: Array, goal: Array, which: Ints | None = None) -> (
        tuple[Array, Array]
    ):
        """Residual ``(N, m)`` and Jacobian ``(N, m, w)`` of all rows or of some of them."""
        families = list(self.system.families(x, values, goal))
        rows = self.rows if which is None else self.rows[which]
        jacobian = np.zeros((len(x), len(rows) * self.width))
        for (_, _, slopes), parts in zip(families, self._scatter(families, rows), strict=True):
            entries = slopes.reshape(len(x), -1)
            for source, target in parts:
                jacobian[:, target] += entries[:, source]
        residual = np.concatenate([f[0] for f in families], axis=1)[:, rows]
        return residual, jacobian.reshape(len(x), len(rows), self.width)

    def _scatter(self, families: Sequence[Family], rows: Ints) -> list[list[tuple[Ints, Ints]]]:
        """Where each family's slopes go in the Jacobian, made once: numbers of slopes and of
        entries, in pieces none of which adds to an entry twice."""
        key = rows.tobytes()
        if key not in self.scatters:
            row_at = _places(sum(f[0].shape[1] for f in families), rows)
            column_at = _places(len(self.keep) * self.system.eqs.dim, self.columns)
            start = 0
            made = []
            for residual, cols, _ in families:
                row = row_at[start:start + residual.shape[1]]
                start += residual.shape[1]
                made.append(self._pieces(row, column_at[cols]))
            self.scatters[key] = made
        return self.scatters[key]

    def _pieces(self, row: Ints, column: Ints) -> list[tuple[Ints, Ints]]:
        """Of one family: its rows' places ``(m,)`` and its slopes' columns ``(m, s)``, -1: none."""
        mine = np.flatnonzero((row[:, None] >= 0) & (column >= 0))
        target = (row[:, None] * self.width + column).ravel()[mine]
        pieces = []
        while len(mine):
            _, first = np.unique(target, return_index=True)
            pieces.append((mine[first], target[first]))
            mine, target = np.delete(mine, first), np.delete(target, first)
        return pieces


def own_rows(step: Cluster) -> OwnRows:
    """The block's own rows; made once, and kept as long as the system that they are of."""
    kept: dict[object, OwnRows] = vars(step.system).setdefault("_own_rows", {})
    key = step.joints, step.rows, step.square
    if key not in kept:
        kept[key] = _made(step)
    return kept[key]


def _made(step: Cluster) -> OwnRows:
    system, rows = step.system, np.array(step.rows, dtype=np.intp)
    kind = _kinds(system)
    names = np.array(system.row_names, dtype=object)
    of_tie, of_target = (np.isin(np.flatnonzero(kind == k), rows) for k in (TIE, TARGET))
    ties = np.array(system._open_ties, dtype=np.intp)[of_tie]
    targets = np.array(system.targets, dtype=np.intp).reshape(-1, 2)[of_target]
    eqs = _parts_of(system.eqs, {(int(k), str(n)) for k, n in zip(kind[rows], names[rows],
                                                                  strict=True)}, ties)
    # A part comes with all its rows.
    mine = _rows_of(eqs, kind, names)
    mine[kind == TIE], mine[kind == TARGET] = of_tie, of_target
    joints = np.array(step.joints, dtype=np.intp)
    keep = np.unique(np.concatenate([_joints_of(eqs), joints, targets[:, 0]]))
    new = _places(system.eqs.n, keep)
    small = BlockSystem(_renumbered(eqs, keep, new), system.drives,
                        tuple((int(new[j]), int(axis)) for j, axis in targets), system.ties,
                        system.without)
    at = np.searchsorted(np.flatnonzero(mine), rows)
    choice = np.searchsorted(rows, np.array(step.square))
    agreed = np.arange(len(rows)) if _misfit(small, at) <= AGREE else choice
    surplus = np.setdiff1d(np.arange(len(rows)), choice)
    wished = bool(np.isin(names[rows[surplus]].astype(str), _given_names(system)).any())
    return OwnRows(small, keep, new[joints], at, choice, agreed, wished)


def _given_names(system: System) -> list[str]:
    """The names of rows that hold what is given."""
    e = system.eqs
    names = [e.rig.joint_names[j] for j, _ in system.targets]
    for part in (e.distances, e.lines, e.angles):
        names += [n for n, v in zip(part.names, part.value, strict=True) if int(v) in system.drives]
    return names


def _misfit(system: System, rows: Ints) -> float:
    """By how much the rig's own numbers disagree in some rows at rest."""
    eqs = system.eqs
    values = np.ones((1, len(eqs.values)))
    parts = eqs.distances.value, eqs.lines.value, eqs.angles.value
    numbers = np.unique(np.concatenate([v[v >= 0] for v in parts]))
    values[:, numbers] = measure(eqs, eqs.at[None], numbers)
    with np.errstate(invalid="ignore", divide="ignore"):
        off = np.abs(system.residual(eqs.at[None], values)[0, rows])
    return float(np.nan_to_num(off, nan=np.inf).max(initial=0.0))


def _places(count: int, chosen: Ints) -> Ints:
    """For each of ``count`` things its place among the chosen, or -1."""
    at = np.full(count, -1, dtype=np.intp)
    at[chosen] = np.arange(len(chosen))
    return at


def _wide(joints: Ints, dim: int) -> Ints:
    return (joints[:, None] * dim + np.arange(dim)).ravel()


def _kinds(system: System) -> Ints:
    """The kind of part behind each row, ``(M,)``, in the order of `System.families`."""
    x = np.where(np.isnan(system.eqs.at), 0.5, system.eqs.at)[None]
    values = np.ones((1, len(system.eqs.values)))
    with np.errstate(all="ignore"):
        counts = [f[0].shape[1] for f in system.families(x, values, None)]
    bodies = [BODY, BODY, BODY] if system.eqs.dim == 3 else [BODY, BODY]
    order = [DISTANCE, *bodies, LINE, LINE, PLANE, LINE, ANGLE, TARGET, TIE]
    return np.repeat(np.array(order, dtype=np.intp), counts)


def _parts_of(eqs: Equations, held: set[tuple[int, str]], ties: Ints) -> Equations:
    """The parts of some kinds and names, some ties, and the parts that these measure."""
    used = set(np.flatnonzero((eqs.ties[ties] != 0).any(axis=0)).tolist())

    def some(parts: Parts, kind: int, value: Ints | None = None) -> Parts:
        which = [k for k, name in enumerate(parts.names)
                 if (kind, name) in held or (value is not None and int(value[k]) in used)]
        return _some(parts, np.array(which, dtype=np.intp))

    d, lines, angles = eqs.distances, eqs.lines, eqs.angles
    return replace(
        eqs, bodies=tuple(b for b in eqs.bodies if (BODY, b.name) in held),
        distances=some(d, DISTANCE, d.value), lines=some(lines, LINE, lines.value),
        angles=some(angles, ANGLE, angles.value), planes=some(eqs.planes, PLANE),
        ties=eqs.ties[ties], tie_names=tuple(eqs.tie_names[t] for t in ties),
        tie_equals=eqs.tie_equals[ties])


def _some(parts: Parts, which: Ints) -> Parts:
    arrays = {name: value[which] for name, value in vars(parts).items()
              if isinstance(value, np.ndarray)}
    return replace(parts, names=tuple(parts.names[k] for k in which), **arrays)


def _rows_of(eqs: Equations, kind: Ints, names: Array) -> Array:
    """Which rows are those of the parts left in ``eqs``, ``(M,)``."""
    left: dict[int, Sequence[str]] = {
        DISTANCE: eqs.distances.names, BODY: [b.name for b in eqs.bodies],
        LINE: eqs.lines.names, PLANE: eqs.planes.names, ANGLE: eqs.angles.names}
    mine = np.zeros(len(kind), dtype=bool)
    for k, some in left.items():
        mine |= (kind == k) & np.isin(names.astype(str), list(some))
    return mine


def _joints_of(eqs: Equations) -> Ints:
    """Every joint that some part names."""
    a = eqs.angles
    tables = [eqs.distances.ends, eqs.lines.joint, eqs.lines.along, a.line, a.base, a.axis,
              eqs.planes.joint, *(b.joints for b in eqs.bodies)]
    every: Ints = np.concatenate([t.ravel() for t in tables])
    return np.unique(every[every != GROUND])


def _renumbered(eqs: Equations, keep: Ints, new: Ints) -> Equations:
    """The same parts between the joints kept."""
    # The ground's number stays as it is.
    to = np.append(new, GROUND)
    d, lines, a, planes = eqs.distances, eqs.lines, eqs.angles, eqs.planes
    return replace(
        eqs, at=eqs.at[keep], pinned=eqs.pinned[keep],
        bodies=tuple(Body(b.name, to[b.joints], b.shape) for b in eqs.bodies),
        distances=replace(d, ends=to[d.ends]),
        lines=replace(lines, joint=to[lines.joint], along=to[lines.along]),
        angles=replace(a, line=to[a.line], base=to[a.base], axis=to[a.axis]),
        planes=replace(planes, joint=to[planes.joint]))
