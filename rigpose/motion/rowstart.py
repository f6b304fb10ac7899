"""Where a chosen row begins: the signs of every crossing at its first frame.

At a dead centre two rows begin in one pose. The one that lives longest is taken; of several the
one that moves most evenly, and the motion says so.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from rigpose.model.equations import Array
from rigpose.motion.branches import Search
from rigpose.motion.product import MEET
from rigpose.motion.settle import Begin
from rigpose.solve.clock import Clock, part_of_clock
from rigpose.solve.plan import Group
from rigpose.solve.rows import Pass, Rows, follow
from rigpose.solve.search import Context

AHEAD = 256
"""Frames over which rows that begin in one pose are compared."""


@dataclass(frozen=True)
class Row:
    """A chosen row: where each group begins, its name and bends."""

    begins: tuple[Begin, ...]
    name: str
    bends: Mapping[str, str]
    frame: int
    notes: tuple[str, ...] = ()

    def signs(self, group: int, frames: NDArray[np.intp],
              passes: Sequence[tuple[int, Pass]]) -> Array:
        """Signs ``(bits, m)`` of a group at frames ``(m,)``, after the dead centres passed."""
        begin = self.begins[group]
        out = np.repeat(begin.codes[0].astype(float)[:, None], len(frames), axis=1)
        for g, p in passes:
            if g == group and p.kind == "passed":
                out[p.choice, frames >= p.time] *= -1.0
        return out


def row_of(context: Context, clock: Clock, frame: int, search: Search, number: int) -> Row:
    """The row that goes on from one branch of the frame at which it is chosen."""
    begins, notes = [], []
    for g, (group, chosen) in enumerate(zip(context.plan.groups, search.groups, strict=True)):
        rows, row = chosen.rows, int(search.picks.index[number, g])
        if group.binary and rows.margin[row, 0] < MEET:
            same = _same(context, rows, row)
            if len(same) > 1:
                row, note = _settled(context, group, clock, frame, rows, same)
                notes += [note] if note else []
        begins.append(_begin(rows, row))
    names = search.branches.names
    return Row(tuple(begins), names[number], names.bends(number), frame, tuple(notes))


def _begin(rows: Rows, row: int) -> Begin:
    return Begin(rows.codes[row:row + 1],
                 [p if p.shape[1] == 1 else p[:, row:row + 1] for p in rows.places],
                 {v: a if len(a) == 1 else a[row:row + 1] for v, a in rows.values.items()})


def _same(context: Context, rows: Rows, row: int) -> NDArray[np.intp]:
    """Live rows in the same pose, the given one first; several only at a dead centre."""
    gap = np.zeros(len(rows.codes))
    for place in rows.places:
        mine = place[:, :, 0]
        gap = np.maximum(gap, np.abs(mine - mine[:, row % mine.shape[1]][:, None]).max(axis=0))
    near = np.flatnonzero((gap <= MEET * context.rest.reach) & rows.alive[:, 0])
    return np.concatenate([[row], near[near != row]])


def _settled(context: Context, group: Group, clock: Clock, frame: int, cells: Rows,
             same: NDArray[np.intp]) -> tuple[int, str]:
    high = min(frame + AHEAD, clock.count)
    if high - frame < 3:
        return int(same[0]), ""
    part = part_of_clock(clock, frame, high)
    rows = follow(context, group, part, cells.codes[same])
    lives = np.where(rows.alive.all(axis=1), high, np.argmin(rows.alive, axis=1))
    longest = np.flatnonzero(lives == lives.max())
    even = _unevenness(rows)[longest]
    chosen = int(longest[np.argmin(np.round(even, 12))])
    why = "that lives longest" if len(longest) < len(same) else "that moves most evenly"
    return int(same[chosen]), (f"the first pose is a dead centre in which {len(same)} rows meet; "
                               f"the one {why} is taken")


def _unevenness(rows: Rows) -> Array:
    """Mean squared second difference of the places ``(B,)``."""
    total = np.zeros(len(rows.codes))
    for place in rows.places:
        bend = np.diff(place, n=2, axis=2)
        total = total + np.nan_to_num(np.nanmean(np.nan_to_num(bend) ** 2, axis=(0, 2)))
    return total
