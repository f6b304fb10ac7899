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
from rigpose.motion.branchset import Branches
from rigpose.motion.product import MEET
from rigpose.motion.settle import Begin
from rigpose.solve.clock import Clock, part_of_clock
from rigpose.solve.plan import Group
from rigpose.solve.rows import Pass, Rows, follow
from rigpose.solve.search import Cells, Context, search

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


def row_of(context: Context, clock: Clock, frame: int, branches: Branches, number: int) -> Row:
    """The row that goes on from one branch of the frame at which it is chosen."""
    eqs = context.plan.eqs
    pose = eqs.inward(branches.positions[number, 0])
    inputs = clock.whole(slice(frame, frame + 1))
    begins, notes = [], []
    for group in context.plan.groups:
        cells = search(context, group, inputs)
        same = _same(context, group, cells, pose)
        if len(same) > 1 and group.binary:
            chosen, note = _settled(context, group, clock, frame, cells, same)
            notes += [note] if note else []
        else:
            chosen = int(same[0])
        begins.append(Begin(cells.codes[chosen:chosen + 1],
                            [p if p.shape[1] == 1 else p[:, chosen:chosen + 1]
                             for p in cells.places],
                            {v: a if len(a) == 1 else a[chosen:chosen + 1]
                             for v, a in cells.values.items()}))
    return Row(tuple(begins), branches.names[number], branches.names.bends(number), frame,
               tuple(notes))


def _same(context: Context, group: Group, cells: Cells, pose: Array) -> NDArray[np.intp]:
    """Live branches of a group in the given pose; several only at a dead centre."""
    gap = np.zeros(len(cells.codes))
    for j, place in zip(group.joints, cells.places, strict=True):
        gap = np.maximum(gap, np.abs(place[:, :, 0].T - pose[j]).max(axis=1))
    gap[~cells.alive[:, 0]] = np.inf
    order = np.argsort(gap, kind="stable")
    near = gap[order] <= MEET * context.rest.reach
    return order[near] if near.any() else order[:1]


def _settled(context: Context, group: Group, clock: Clock, frame: int, cells: Cells,
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
