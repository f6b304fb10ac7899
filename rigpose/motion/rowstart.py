"""Where a chosen row begins: the signs of every crossing at its first frame.

At a dead centre two rows begin in one pose. The bends that the shot asks for are those that a row
has once it has left it. Of those that fit, the one that lives longest is taken, then the one that
moves most evenly, and the motion says so.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from rigpose.ground.words import Found, State
from rigpose.model.equations import Array
from rigpose.motion.branches import Search, made_from
from rigpose.motion.branchset import Branches
from rigpose.motion.product import MEET, PLACE, Sorted
from rigpose.motion.settle import Begin, follow_from
from rigpose.solve.clock import Clock, part_of_clock
from rigpose.solve.deadcentre import Pass
from rigpose.solve.rows import Rows
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


def row_of(context: Context, clock: Clock, frame: int, search: Search, number: int,
           bends: Mapping[str, str]) -> Row:
    """The row that goes on from one branch of the frame at which it is chosen.

    bends : what the shot asks for; at a dead centre it is looked for in the frames after
    """
    rows = [(g.rows, int(search.picks.index[number, k])) for k, g in enumerate(search.groups)]
    same = [_same(context, r, row) for r, row in rows]
    names = search.branches.names
    name = names[number]
    note: tuple[str, ...] = ()
    if any(len(s) > 1 for s in same) and clock.count - frame > 2:
        ahead = _ahead(context, clock, frame, rows, same)
        if len(ahead.branches):
            best, note = _best(ahead.branches, bends)
            rows = [(r, int(s[ahead.picks.index[best, k]]))
                    for k, ((r, _), s) in enumerate(zip(rows, same, strict=True))]
            name, names, number = ahead.branches.names[best], ahead.branches.names, best
    begins = tuple(_begin(r, row) for r, row in rows)
    return Row(begins, name, names.bends(number), frame, note)


def _begin(rows: Rows, row: int) -> Begin:
    return Begin(rows.codes[row:row + 1],
                 [p if p.shape[1] == 1 else p[:, row:row + 1] for p in rows.places],
                 {v: a if len(a) == 1 else a[row:row + 1] for v, a in rows.values.items()})


def _same(context: Context, rows: Rows, row: int) -> NDArray[np.intp]:
    """Live rows in the same pose, the given one first; several only at a dead centre."""
    if not rows.group.binary or not rows.margin[row, 0] < MEET:
        return np.array([row])
    gap = np.zeros(len(rows.codes))
    for place in rows.places:
        mine = place[:, :, 0]
        gap = np.maximum(gap, np.abs(mine - mine[:, row % mine.shape[1]][:, None]).max(axis=0))
    near = np.flatnonzero((gap <= PLACE * context.rest.reach) & rows.alive[:, 0])
    return np.concatenate([[row], near[near != row]])


def _ahead(context: Context, clock: Clock, frame: int, rows: Sequence[tuple[Rows, int]],
           same: Sequence[NDArray[np.intp]]) -> Search:
    """The rows that begin in one pose, over some frames."""
    part = part_of_clock(clock, frame, min(frame + AHEAD, clock.count))
    picks = []
    for (r, _), which in zip(rows, same, strict=True):
        followed = follow_from(context, r.group, part, r.take(which))
        picks.append(Sorted(followed, np.arange(len(which)), *np.zeros((2, len(which)))))
    return made_from(context, part, np.arange(part.count, dtype=float), picks, Found.COMPLETE)


def _best(ahead: Branches, bends: Mapping[str, str]) -> tuple[int, tuple[str, ...]]:
    """The row that bends as asked; of several the one that lives longest, then the evenest."""
    fitting = ahead.fitting(bends)
    chosen = fitting if len(fitting) else np.arange(len(ahead))
    alive = ahead.state[chosen] > State.NONE
    lives = np.where(alive.all(axis=1), alive.shape[1], np.argmin(alive, axis=1))
    longest = chosen[lives == lives.max()]
    best = int(longest[np.argmin(np.round(_unevenness(ahead.positions[longest]), 12))])
    why = "bends as asked" if len(fitting) < len(ahead) and len(chosen) == 1 else (
        "lives longest" if len(longest) < len(chosen) else "moves most evenly")
    return best, (f"the first pose is a dead centre in which {len(ahead)} rows meet; "
                  f"the one that {why} is taken",)


def _unevenness(positions: Array) -> Array:
    """Mean squared second difference of the places ``(n_branches,)``."""
    bend = np.nan_to_num(np.diff(positions, n=2, axis=1))
    uneven: Array = (bend * bend).mean(axis=(1, 2, 3))
    return uneven
