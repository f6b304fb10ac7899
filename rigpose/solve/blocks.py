"""The smallest block of joints that must be solved together.

Rows are made independent numerically first (at a pose close to rest, the first in the file's
order kept), then matched with unknowns and split into strongly connected components: a perfect
matching of a regular matrix splits it into regular blocks (Dulmage and Mendelsohn 1958).
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray
from scipy.sparse import csr_array, csr_matrix
from scipy.sparse.csgraph import connected_components, maximum_bipartite_matching

from rigpose.model.equations import Array, Ints
from rigpose.model.gauges import measure
from rigpose.model.system import System

DEPENDENT = 1e-7
"""A row that adds less than this to the span of the earlier ones is a check."""


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
