"""Finding where rows may meet: low points of the crossings' squared heights over the frames."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from rigpose.model.equations import Array

Ints = NDArray[np.intp]
FLAT = 1e-9
"""Neighbouring low points below this are one stretch at a dead centre."""


@dataclass(frozen=True)
class Hits:
    """Low points of one choice: ``row (m,)`` and frames ``low (m,)`` … ``high (m,)`` about them."""

    row: Ints
    low: Ints
    high: Ints

    def __len__(self) -> int:
        return len(self.row)


class Screen:
    """Looks at squared heights block by block, with two frames kept from the block before."""

    def __init__(self, bits: int) -> None:
        self._tail: list[Array | None] = [None] * bits
        self._codes: NDArray[np.int16] | None = None
        self._rows: list[list[Ints]] = [[] for _ in range(bits)]
        self._frames: list[list[Ints]] = [[] for _ in range(bits)]
        self.any = False

    def see(self, start: int, sines: Sequence[Array], codes: NDArray[np.int16]) -> None:
        """A block's squared heights, ``(B or 1, n_frames)`` for each choice."""
        same = self._codes is not None and np.array_equal(self._codes, codes)
        if self._codes is not None and not same:
            self.any = True  # some row began or ended between two blocks
        self._codes = codes
        for k, g in enumerate(sines):
            tail = self._tail[k]
            joined, first = g, start
            if tail is not None and same:
                b = max(len(tail), len(g))
                wide = [np.broadcast_to(x, (b, x.shape[1])) for x in (tail, g)]
                joined, first = np.concatenate(wide, axis=1), start - tail.shape[1]
            self._tail[k] = joined[:, -2:]
            row, frame = _low_points(joined)
            if len(row):
                self.any = True
                self._rows[k].append(row)
                self._frames[k].append(frame + first)

    def hits(self, choice: int) -> Hits:
        """All low points of one choice, those that touch made one."""
        if not self._rows[choice]:
            empty = np.empty(0, dtype=np.intp)
            return Hits(empty, empty, empty)
        row, frame = np.concatenate(self._rows[choice]), np.concatenate(self._frames[choice])
        order = np.lexsort((frame, row))
        row, frame = row[order], frame[order]
        fresh = np.ones(len(row), dtype=bool)
        fresh[1:] = (row[1:] != row[:-1]) | (frame[1:] - frame[:-1] > 1)
        last = np.append(np.flatnonzero(fresh)[1:] - 1, len(row) - 1)
        return Hits(row[fresh], frame[fresh] - 1, frame[last] + 1)


def _low_points(g: Array) -> tuple[Ints, Ints]:
    """Where a height is no higher than at both neighbours and lower than a step away from it."""
    if g.shape[1] < 3:
        return np.empty(0, dtype=np.intp), np.empty(0, dtype=np.intp)
    # Most motions stay clear of dead centres: look closer only where some height is small.
    steps = np.abs(np.diff(g, axis=1))
    middle = g[:, 1:-1]
    with np.errstate(invalid="ignore"):
        largest = np.maximum(steps[:, :-1], steps[:, 1:])
        low = (middle <= np.maximum(largest, FLAT)) & (middle >= 0)
        low &= (middle <= np.maximum(g[:, :-2], FLAT)) & (middle <= np.maximum(g[:, 2:], FLAT))
    row, frame = np.nonzero(low)
    return row, frame + 1
