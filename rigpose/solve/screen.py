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
    """Low points of one choice: ``row (m,)`` and frames ``low (m,)`` … ``high (m,)`` about them;
    ``rests (m,)`` where several frames in a row are at zero."""

    row: Ints
    low: Ints
    high: Ints
    rests: NDArray[np.bool_]

    def __len__(self) -> int:
        return len(self.row)

    def take(self, which: NDArray[np.bool_]) -> Hits:
        """Some of them."""
        return Hits(self.row[which], self.low[which], self.high[which], self.rests[which])


class Screen:
    """Looks at squared heights block by block, with two frames kept from the block before."""

    def __init__(self, bits: int) -> None:
        self._tail: list[Array | None] = [None] * bits
        self._codes: NDArray[np.int16] | None = None
        self._found: list[list[tuple[Ints, Ints, Array]]] = [[] for _ in range(bits)]
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
                self._found[k].append(_for_all(joined, row, frame, first, len(codes)))

    def hits(self, choice: int) -> Hits:
        """All low points of one choice, neighbours made one."""
        if not self._found[choice]:
            empty = np.empty(0, dtype=np.intp)
            return Hits(empty, empty, empty, empty.astype(bool))
        row, frame, height = (np.concatenate(x) for x in zip(*self._found[choice], strict=True))
        order = np.lexsort((frame, row))
        row, frame, height = row[order], frame[order], height[order]
        fresh = np.ones(len(row), dtype=bool)
        fresh[1:] = (row[1:] != row[:-1]) | (frame[1:] - frame[:-1] > 1)
        first = np.flatnonzero(fresh)
        last = np.append(first[1:] - 1, len(row) - 1)
        # Two frames to both sides of a dead centre are low as well; only at zero they rest there.
        rests = (np.maximum.reduceat(height, first) < FLAT) & (last > first)
        return Hits(row[fresh], np.maximum(frame[fresh] - 1, 0), frame[last] + 1, rests)


def _for_all(g: Array, row: Ints, frame: Ints, first: int, rows: int) -> tuple[Ints, Ints, Array]:
    """Rows, frames and heights of low points; heights that all rows share count for each."""
    height = g[row, frame]
    if len(g) == rows:
        return row, frame + first, height
    every = np.repeat(np.arange(rows), len(frame))
    return every, np.tile(frame + first, rows), np.tile(height, rows)


def _low_points(g: Array) -> tuple[Ints, Ints]:
    """Where a height is no higher than at both neighbours and lower than a step away from it."""
    if g.shape[1] < 2:
        return np.empty(0, dtype=np.intp), np.empty(0, dtype=np.intp)
    # Most motions stay clear of dead centres: look closer only where some height is small. The
    # ends count as well: a zero may lie between the first two frames.
    steps = np.abs(np.diff(g, axis=1))
    low = np.empty(g.shape, dtype=bool)
    with np.errstate(invalid="ignore"):
        largest = np.maximum(np.maximum(steps[:, :-1], steps[:, 1:]), FLAT)
        low[:, 1:-1] = g[:, 1:-1] <= largest
        low[:, 0] = g[:, 0] <= np.fmax(steps[:, :2].max(axis=1), FLAT)
        low[:, -1] = g[:, -1] <= np.fmax(steps[:, -2:].max(axis=1), FLAT)
        low &= g >= 0
        low[:, 1:] &= g[:, 1:] <= np.maximum(g[:, :-1], FLAT)
        low[:, :-1] &= g[:, :-1] <= np.maximum(g[:, 1:], FLAT)
    row, frame = np.nonzero(low)
    return row, frame
