"""Motions of pieces too large for dense algebra: how many there are, by structure."""

from __future__ import annotations

import numpy as np

from rigpose.model.equations import Array
from rigpose.solve.mobility import Motions
from rigpose.solve.pieces import Piece
from rigpose.solve.structure import Order


def large_motions(piece: Piece, rest: Array, order: Order) -> Motions:
    """How many motions a piece has at rest ``(n, dim)``, or that this is not known.

    Which motions they are is not worked out, nor which of the surplus rows are redundant: with
    such rows the result is marked ``structural``.
    """
    count, mine = len(piece.columns), set(piece.joints.tolist())
    free = sum(s.free for s in order.starts if s.joint in mine)
    none: Array = np.zeros((count, 0))
    unknown = bool(order.doubt[piece.joints].any())
    spare = len(piece.rows) > count - free
    return Motions(piece, free, free, 1, rest, none, none, np.zeros((len(piece.rows), 0)),
                   structural=spare or unknown, unknown=unknown)
