"""The smallest block of joints that must be solved together.

Rows are made independent numerically first (at a pose close to rest, the first in the file's
order kept), then matched with unknowns and split into strongly connected components: a perfect
matching of a regular matrix splits it into regular blocks (Dulmage and Mendelsohn 1958).
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray
from scipy.linalg import qr
from scipy.sparse import csr_array, csr_matrix
from scipy.sparse.csgraph import (
    breadth_first_order,
    connected_components,
    maximum_bipartite_matching,
)

from rigpose.model.equations import Array, Ints
from rigpose.model.gauges import measure
from rigpose.model.system import System

DEPENDENT = 1e-7
"""A row that adds less than this to the span of the earlier ones is a check."""


DENSE = 1500
"""Open coordinates above which the pattern of the rows says where to look for a block."""
LARGEST = 600
"""Coordinates of a block that is found so: it is measured as the others are."""
TRIED = 8


@dataclass(frozen=True)
class Block:
    """Joints of a block, all its rows, a regular choice of them, and the placed joints around."""

    joints: tuple[int, ...]
    rows: tuple[int, ...]
    square: tuple[int, ...]
    around: tuple[int, ...]


def independent_rows(matrix: Array, tolerance: float = DEPENDENT) -> Ints:
    """Rows that raise the rank, taken in order (Gram and Schmidt, twice for orthogonality)."""
    basis = np.zeros((0, matrix.shape[1]))
    kept: list[int] = []
    for k, row in enumerate(matrix):
        long = float(np.linalg.norm(row))
        if long == 0.0 or len(kept) == matrix.shape[1]:
            continue
        rest = row / long
        for _ in range(2):
            rest = rest - basis.T @ (basis @ rest)
        left = float(np.linalg.norm(rest))
        if left > tolerance:
            kept.append(k)
            basis = np.vstack([basis, rest / left])
    return np.array(kept, dtype=np.intp)


def _columns(joints: NDArray[np.intp], dim: int) -> Ints:
    return (joints[:, None] * dim + np.arange(dim)).ravel()


def jacobian_near(system: System, poses: Array) -> Array:
    """The Jacobian at the pose close to rest, ``(M, n * dim)``."""
    values = measure(system.eqs, poses[1:2], np.arange(len(system.eqs.values)))
    with np.errstate(invalid="ignore"):
        _, jacobian = system.both(poses[1:2], values)
    near: Array = np.nan_to_num(jacobian[0])
    return near


def determined(jacobian: Array, joints: Ints, dim: int) -> NDArray[np.bool_]:
    """Which joints no first-order motion moves; ``jacobian`` has just their columns."""
    if len(jacobian) > jacobian.shape[1]:
        triangle = qr(jacobian, mode="r", check_finite=False)[0]
        jacobian = np.asarray(triangle[:jacobian.shape[1]], dtype=np.float64)
    _, s, vt = np.linalg.svd(jacobian, full_matrices=True)
    rank = int((s > DEPENDENT * max(1.0, s[0] if len(s) else 1.0)).sum())
    moves = np.abs(vt[rank:]).reshape(-1, len(joints), dim)
    still: NDArray[np.bool_] = ~(moves > 1e-6).any(axis=(0, 2))
    return still


def smallest_block(system: System, poses: Array, placed: frozenset[int]) -> Block | None:
    """The smallest regular block among the joints that are not placed, or None."""
    eqs = system.eqs
    open_joints = np.array([j for j in range(eqs.n) if j not in placed], dtype=np.intp)
    if not len(open_joints):
        return None
    if len(open_joints) * eqs.dim > DENSE:
        return large_block(system, poses, open_joints)
    full = jacobian_near(system, poses)
    touched = np.abs(full).reshape(len(full), eqs.n, eqs.dim).max(axis=2) > 1e-13
    fixed = determined(full[:, _columns(open_joints, eqs.dim)], open_joints, eqs.dim)
    joints = open_joints[fixed]
    if not len(joints):
        return None
    others = np.setdiff1d(open_joints, joints)
    rows = np.flatnonzero(touched[:, joints].any(axis=1) & ~touched[:, others].any(axis=1))
    part = full[np.ix_(rows, _columns(joints, eqs.dim))]
    rows = rows[independent_rows(part)]
    square = full[np.ix_(rows, _columns(joints, eqs.dim))]
    if len(rows) < square.shape[1]:
        return None
    members, mine = _component(square, len(joints), eqs.dim)
    chosen = joints[members]
    outside = np.setdiff1d(open_joints, chosen)
    every = np.flatnonzero(touched[:, chosen].any(axis=1) & ~touched[:, outside].any(axis=1))
    around = np.flatnonzero(touched[every].any(axis=0))
    return Block(tuple(map(int, chosen)), tuple(map(int, every)), tuple(map(int, rows[mine])),
                 tuple(int(j) for j in around if int(j) in placed))


def _component(square: Array, n: int, dim: int) -> tuple[Ints, Ints]:
    """Joints of the smallest component that leans on no other, and the rows matched to it."""
    pattern = csr_matrix(np.abs(square) > 1e-13)
    row_of = maximum_bipartite_matching(pattern, perm_type="row")
    joint_of_column = np.arange(n * dim) // dim
    rows, cols = np.nonzero(np.abs(square) > 1e-13)
    column_of_row = np.empty(len(square), dtype=np.intp)
    column_of_row[row_of] = np.arange(len(square))
    tail, head = joint_of_column[column_of_row[rows]], joint_of_column[cols]
    graph = csr_array((np.ones(len(tail)), (tail, head)), shape=(n, n))
    count, label = connected_components(graph, directed=True, connection="strong")
    leans = np.zeros(count, dtype=bool)
    cross = label[tail] != label[head]
    leans[label[tail[cross]]] = True
    sizes = np.bincount(label, minlength=count).astype(float)
    sizes[leans] = np.inf
    best = int(np.argmin(sizes))
    members = np.flatnonzero(label == best)
    columns = (members[:, None] * dim + np.arange(dim)).ravel()
    return members, np.sort(row_of[columns])


def large_block(system: System, poses: Array, open_joints: Ints) -> Block | None:
    """As `smallest_block`, found by the pattern of the rows and then measured.

    The pattern alone takes dependent rows for independent ones, so a block that it misses or that
    the measure refuses is left open.
    """
    eqs, dim = system.eqs, system.eqs.dim
    values = measure(eqs, poses[1:2], np.arange(len(eqs.values)))[0]
    with np.errstate(invalid="ignore"):
        rows, cols, entries = system.triplets(poses[1], values)
    entries = np.nan_to_num(entries)
    some = np.abs(entries) > 1e-13
    full = csr_array((entries[some], (rows[some], cols[some])),
                     shape=(int(rows.max(initial=-1)) + 1, eqs.n * dim))
    part = full[:, _columns(open_joints, dim)]
    for members in _closed(part, dim):
        chosen = open_joints[members]
        mine = np.zeros(len(open_joints), dtype=bool)
        mine[members] = True
        every = np.setdiff1d(_rows_on(part, np.repeat(mine, dim)),
                             _rows_on(part, np.repeat(~mine, dim)))
        matrix = full[every][:, _columns(chosen, dim)].toarray()
        square = independent_rows(matrix)
        if len(square) == matrix.shape[1]:
            around = np.setdiff1d(full[every].indices // dim, chosen)
            return Block(tuple(map(int, chosen)), tuple(map(int, every)),
                         tuple(map(int, every[square])), tuple(map(int, around)))
    return None


def _rows_on(part: csr_array, columns: NDArray[np.bool_]) -> Ints:
    """Rows with an entry in some of the columns."""
    found: Ints = np.flatnonzero(np.diff(part[:, np.flatnonzero(columns)].indptr) > 0)
    return found


def _closed(part: csr_array, dim: int) -> list[Ints]:
    """Small sets of joints that as many rows as they have coordinates hold, and that lean on no
    other: strongly connected parts of a maximum matching, where it leaves nothing free."""
    width = part.shape[1]
    row_of = maximum_bipartite_matching(csr_matrix(part), perm_type="row")
    matched = np.full(part.shape[0], -1, dtype=np.intp)
    held = row_of >= 0
    matched[row_of[held]] = np.flatnonzero(held)
    entries = part.tocoo()
    keep = matched[entries.row] >= 0
    tail, head = matched[entries.row[keep]], entries.col[keep]
    # What a free column touches is free as well: along rows to the columns matched to them.
    source = width
    ways = csr_array((np.ones(len(tail) + int((~held).sum())), (
        np.concatenate([head, np.full(int((~held).sum()), source)]),
        np.concatenate([tail, np.flatnonzero(~held)]))), shape=(width + 1, width + 1))
    free = np.zeros(width + 1, dtype=bool)
    free[breadth_first_order(ways, source, return_predecessors=False)] = True
    joints: NDArray[np.bool_] = ~np.any(free[:width].reshape(-1, dim), axis=1)
    graph = csr_array((np.ones(len(tail)), (tail // dim, head // dim)),
                      shape=(len(joints), len(joints)))
    count, label = connected_components(graph, directed=True, connection="strong")
    leans = np.zeros(count, dtype=bool)
    cross = label[tail // dim] != label[head // dim]
    leans[label[tail[cross] // dim]] = True
    sizes = np.bincount(label, minlength=count)
    good = ~leans & (sizes * dim <= LARGEST)
    good[label[~joints]] = False
    some = np.flatnonzero(good)
    some = some[np.argsort(sizes[some], kind="stable")][:TRIED]
    return [np.flatnonzero(label == k) for k in some]
