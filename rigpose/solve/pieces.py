"""The rig cut into pieces that share no unknown, each with its rows linearised.

Pinned joints do not connect: two linkages on the same ground are two pieces. Rows are divided
by their slope's length, so that a singular value means the same for lengths, rails and ties.
"""

from __future__ import annotations

from dataclasses import dataclass
from functools import cached_property

import numpy as np
from numpy.typing import NDArray
from scipy.sparse import csr_array
from scipy.sparse.csgraph import connected_components

from rigpose.model.equations import Array, Ints
from rigpose.model.system import System


@dataclass(frozen=True)
class Piece:
    """Free joints that hang together, and the rows between them.

    joints (j,), columns (c,): coordinates in the whole rig's order, rows (m,) of ``system``,
    weight (m,): what a row is multiplied by
    """

    system: System
    joints: Ints
    columns: Ints
    rows: Ints
    weight: Array

    @cached_property
    def names(self) -> tuple[str, ...]:
        """The part behind each row."""
        every = self.system.row_names
        return tuple(every[r] for r in self.rows)

    @cached_property
    def _local(self) -> tuple[Ints, Ints]:
        eqs = self.system.eqs
        row = np.full(len(self.system.row_names), -1, dtype=np.intp)
        column = np.full(eqs.n * eqs.dim, -1, dtype=np.intp)
        row[self.rows] = np.arange(len(self.rows))
        column[self.columns] = np.arange(len(self.columns))
        return row, column

    def lengths(self, reach: float) -> tuple[float, float]:
        """A typical length of the piece, at most ``reach``, and its shortest one."""
        eqs, dist = self.system.eqs, self.system.dist_rows
        every = np.concatenate([eqs.distances.length[dist],
                                [b.distance(*b.joints[list(b.base)]) for b in eqs.bodies]])
        mine = every[self.rows[self.rows < len(every)]]
        if not len(mine):
            return reach, reach
        return min(reach, 4 * float(np.median(mine))), float(mine.min())

    def both(self, x: Array) -> tuple[Array, Array]:
        """Weighted residuals ``(N, m)`` and Jacobians ``(N, m, c)`` at poses ``(N, n, dim)``."""
        row_of, column_of = self._local
        n = len(x)
        residual = np.zeros((n, len(self.rows)))
        jacobian = np.zeros((n, len(self.rows), len(self.columns)))
        start = 0
        for r, cols, slopes in self.system.families(x, unknown(self.system, n), None):
            mine = row_of[start : start + r.shape[1]]
            start += r.shape[1]
            keep = np.flatnonzero(mine >= 0)
            residual[:, mine[keep]] = r[:, keep]
            for k in range(cols.shape[1]):
                column = column_of[cols[keep, k]]
                inside = column >= 0
                jacobian[:, mine[keep][inside], column[inside]] += slopes[:, keep[inside], k]
        return residual * self.weight, jacobian * self.weight[:, None]

    def shifted(self, x: Array, move: Array) -> Array:
        """Poses ``x (N, n, dim)`` with the piece's coordinates moved by ``move (N, c)``."""
        out = x.copy()
        out.reshape(len(x), -1)[:, self.columns] += move
        return out

    def per_joint(self, move: Array) -> Array:
        """How far each of the piece's joints goes ``(N, j)`` for ``move (N, c)``."""
        dim = self.system.eqs.dim
        far: Array = np.linalg.norm(move.reshape(len(move), len(self.joints), dim), axis=2)
        return far


@dataclass(frozen=True)
class Cut:
    """All pieces, and the rows that touch pinned joints only."""

    pieces: tuple[Piece, ...]
    fixed: Ints


def unknown(system: System, n: int) -> Array:
    """Values of which none is known ``(n, v)``."""
    return np.full((n, len(system.eqs.values)), np.nan)


def slopes_at(system: System, x: Array) -> csr_array:
    """The Jacobian ``(M, n * dim)`` of one pose ``(n, dim)``, sparse."""
    eqs = system.eqs
    rows, cols, entries = system.triplets(x, unknown(system, 1)[0])
    return csr_array((entries, (rows, cols)), shape=(len(system.row_names), eqs.n * eqs.dim))


def cut(system: System, x: Array) -> Cut:
    """Cut a rig at one pose ``(n, dim)``."""
    eqs = system.eqs
    slopes = slopes_at(system, x).tocoo()
    entry = slopes.data != 0
    row, joint = slopes.row[entry], slopes.col[entry] // eqs.dim
    square = np.zeros(slopes.shape[0])
    np.add.at(square, slopes.row, slopes.data**2)
    weight = np.where(square > 0, 1 / np.sqrt(np.where(square > 0, square, 1.0)), 1.0)
    free = np.flatnonzero(~eqs.pinned)
    label, count = _labels(eqs.n, len(square), row, joint, ~eqs.pinned)
    of_joint, of_row = label[:eqs.n], label[eqs.n :]
    order = free[np.argsort(of_joint[free], kind="stable")]
    parts = np.split(order, np.flatnonzero(np.diff(of_joint[order])) + 1) if len(order) else []
    parts.sort(key=lambda part: int(part[0]))
    rows_of = _by_label(of_row, count)
    pieces = []
    for part in parts:
        rows = rows_of[int(of_joint[part[0]])]
        columns = (part[:, None] * eqs.dim + np.arange(eqs.dim)).ravel()
        pieces.append(Piece(system, part, columns, rows, weight[rows]))
    lonely = np.setdiff1d(of_row, of_joint[free])
    return Cut(tuple(pieces), np.flatnonzero(np.isin(of_row, lonely)))


def _labels(
    n: int, m: int, row: Ints, joint: Ints, free: NDArray[np.bool_]
) -> tuple[Ints, int]:
    """Component of every joint and row; an entry of a pinned joint connects nothing."""
    keep = free[joint]
    graph = csr_array((np.ones(int(keep.sum())), (joint[keep], n + row[keep])),
                      shape=(n + m, n + m))
    count, label = connected_components(graph, directed=False)
    return label.astype(np.intp), int(count)


def _by_label(of_row: Ints, count: int) -> list[Ints]:
    order = np.argsort(of_row, kind="stable")
    edges = np.searchsorted(of_row[order], np.arange(count + 1))
    return [order[edges[k] : edges[k + 1]] for k in range(count)]
