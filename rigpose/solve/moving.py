"""Which joints still move, and in which groups that move without one another."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from scipy.sparse import csr_array
from scipy.sparse.csgraph import connected_components

from rigpose.model.equations import Array, Ints
from rigpose.solve.mobility import Motions
from rigpose.solve.pieces import slopes_at

MOVES = 1e-6
ROUGHLY_MOVES = 1e-4
"""A joint moves when it goes this fraction of what the farthest goes; the larger one where the
motion is known from trial steps only."""


@dataclass(frozen=True)
class Mover:
    """Joints that move together: ``freedoms`` of them at ``pose (n, dim)``.

    joints (j,) rising; tangents (j * dim, freedoms) : the motions, orthonormal
    """

    joints: Ints
    freedoms: int
    pose: Array
    tangents: Array


def movers(motion: Motions) -> tuple[Mover, ...]:
    """Split a piece's real motions into groups that share no moving joint."""
    piece, dim = motion.piece, motion.piece.system.eqs.dim
    if not motion.finite:
        return ()
    far = np.linalg.norm(motion.tangents.reshape(len(piece.joints), -1), axis=1)
    least = MOVES if motion.exact else ROUGHLY_MOVES
    going = np.flatnonzero(far > least * far.max())
    groups = []
    for some in _connected(motion, going):
        columns = (some[:, None] * dim + np.arange(dim)).ravel()
        u, s, _ = np.linalg.svd(motion.tangents[columns], full_matrices=False)
        count = int((s > max(least, 1e-6) * s[0]).sum())
        groups.append(Mover(piece.joints[some], count, motion.pose, u[:, :count]))
    return tuple(groups)


def _connected(motion: Motions, going: Ints) -> list[Ints]:
    """Positions ``going`` among the piece's joints, split where no row holds two together."""
    piece, dim = motion.piece, motion.piece.system.eqs.dim
    slopes = slopes_at(piece.system, motion.pose)[piece.rows][:, piece.columns].tocoo()
    place = np.full(len(piece.joints), -1, dtype=np.intp)
    place[going] = np.arange(len(going))
    joint = place[slopes.col // dim]
    keep = (joint >= 0) & (slopes.data != 0)
    n, m = len(going), len(piece.rows)
    graph = csr_array((np.ones(int(keep.sum())), (joint[keep], n + slopes.row[keep])),
                      shape=(n + m, n + m))
    label = connected_components(graph, directed=False)[1][:n]
    groups = [going[label == k] for k in np.unique(label)]
    return sorted(groups, key=lambda g: int(g[0]))
