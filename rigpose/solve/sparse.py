"""First-order motions of pieces too large for dense algebra.

The smallest eigenvalues of the slopes' normal matrix, by Lanczos iteration on its sparse inverse,
shifted a little so that it has one (`scipy.sparse.linalg.eigsh` in shift-invert mode; Lehoucq,
Sorensen and Yang 1998, from memory). Squaring halves the digits, so what is below 1e-7 counts as
zero.
"""

from __future__ import annotations

import numpy as np
from scipy.sparse import csc_array, diags_array, eye_array
from scipy.sparse.linalg import eigsh

from rigpose.model.equations import Array
from rigpose.solve.mobility import Motions
from rigpose.solve.pieces import Piece, slopes_at

ZERO = 1e-7
SHIFT = -1e-9
MOST = 64


def large_motions(piece: Piece, rest: Array) -> Motions:
    """First-order motions of a piece at ``rest (n, dim)``, at most 64 of them found.

    Finite ones are not tried: where lengths are redundant the result is marked ``structural``.
    """
    slopes = slopes_at(piece.system, rest)[piece.rows][:, piece.columns]
    scaled = diags_array(piece.weight) @ slopes
    count = len(piece.columns)
    normal = csc_array(scaled.T @ scaled + SHIFT**2 * eye_array(count))
    start = np.random.default_rng(5).normal(size=count)
    some = 8
    while True:
        value, vector = eigsh(normal, k=some, sigma=SHIFT, v0=start)
        singular = np.sqrt(np.maximum(value, 0.0))
        free = int((singular < ZERO).sum())
        if free < some or some >= MOST:
            break
        some *= 2
    order = np.argsort(singular)
    tangents = np.linalg.qr(vector[:, order[:free]])[0]
    spare = len(piece.rows) - (count - free)
    none: Array = np.zeros((count, 0))
    return Motions(piece, free, free, 1, rest, tangents, none, np.zeros((len(piece.rows), 0)),
                   structural=spare > 0 or free == some, singular=singular[order])
