"""Following rows frame by frame, where a block of several joints has no closed form.

Each frame starts Newton's method from the last poses continued; a step that ends far from there
is halved (predictor and corrector; Allgower and Georg 1990, chapter 6). Every so many frames all
solutions are looked for again, so that rows that begin later are found too.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from rigpose.ground.budget import Watch, go_on
from rigpose.ground.words import Found, weaker
from rigpose.model.equations import Array
from rigpose.solve.clock import Clock
from rigpose.solve.plan import Group
from rigpose.solve.rows import Codes, Rows
from rigpose.solve.search import Cells, Context, search
from rigpose.solve.table import Inputs

EVERY = 32
SMALLEST = 1 / 64
FAR = 0.02
"""A corrected pose farther than this part of the reach from its prediction is not trusted."""
SAME = 1e-5


@dataclass
class _Walk:
    """Poses of all rows being followed at one time, and the ones before."""

    codes: Codes
    time: float
    x: Array
    alive: NDArray[np.bool_]
    before: Array
    gap: float
    values: dict[int, Array]


def enumerate_rows(context: Context, group: Group, clock: Clock,
                   watch: Watch | None = None) -> Rows:
    """All rows of a group with blocks, those that begin later too."""
    first = search(context, group, clock.whole(slice(0, 1)))
    rows = walk(context, group, clock, first, 0, 1, watch)
    for frame in [*range(EVERY, clock.count - 1, EVERY), clock.count - 1]:
        if frame == 0 or not go_on(watch, "frames", frame, clock.count):
            continue
        now = search(context, group, clock.whole(slice(frame, frame + 1)))
        fresh = _fresh(context, group, rows, now, frame)
        if len(fresh):
            born = _only(now, fresh)
            forward = walk(context, group, clock, born, frame, 1, watch)
            backward = walk(context, group, clock, born, frame, -1, watch)
            rows = _stacked(rows, _both_ways(forward, backward, frame))
    return rows


def walk(context: Context, group: Group, clock: Clock, start: Cells, frame: int, way: int,
         watch: Watch | None = None) -> Rows:
    """Rows from the poses of one frame to the last (``way`` 1) or to the first frame (-1)."""
    b, n = len(start.codes), context.plan.eqs.n
    rows = _empty(group, start, clock.count)
    x = _pose(context, group, clock.whole(slice(frame, frame + 1)), start)
    now = _Walk(start.codes, float(frame), x, start.alive[:, 0], x, 0.0, start.values)
    _write(rows, frame, start)
    frames = range(frame + 1, clock.count) if way > 0 else range(frame - 1, -1, -1)
    for f in frames:
        if b == 0 or n == 0 or not now.alive.any():
            break
        cells = _advance(context, group, clock, now, float(f))
        _write(rows, f, cells)
        if f % EVERY == 0 and not go_on(watch, "frames", f, clock.count):
            rows.found = Found.STOPPED
            break
    return rows


def _advance(context: Context, group: Group, clock: Clock, now: _Walk, goal: float) -> Cells:
    """On to a frame, in as many steps as it takes."""
    step = goal - now.time
    while True:
        step = np.sign(step) * min(abs(step), abs(goal - now.time))
        guess = now.x + (now.x - now.before) * (step / now.gap if now.gap else 0.0)
        inputs = clock.at(np.array([now.time + step]))
        cells = search(context, group, inputs,
                       {k: np.sign(now.codes[:, k:k + 1] + 0.5) for k in range(group.bits)},
                       len(now.codes), guess=guess, hints=now.values, consecutive=True)
        x = _pose(context, group, inputs, cells)
        off = np.abs(x - guess).max(axis=(1, 2))
        alive = cells.alive[:, 0] & now.alive
        bad = now.alive & ~(cells.alive[:, 0] & (off < FAR * context.rest.reach))
        if bad.any() and abs(step) > SMALLEST:
            step /= 2
            continue
        cells.alive = alive[:, None]
        x = np.where(alive[:, None, None], x, now.x)
        # Over a jump of what is known there is no speed to go on with.
        now.before, now.gap = (x, 0.0) if bad.any() else (now.x, float(step))
        now.x = x
        now.time, now.alive, now.values = now.time + float(step), alive, cells.values
        if abs(goal - now.time) < 1e-12:
            return cells
        step *= 2


def _pose(context: Context, group: Group, inputs: Inputs, cells: Cells) -> Array:
    """Poses ``(B, n, 2)`` with the group's joints in; others stay at rest."""
    x = np.repeat(context.plan.eqs.at[None], len(cells.codes), axis=0)
    for j, place in zip(group.joints, cells.places, strict=True):
        x[:, j] = np.broadcast_to(place[:, :, 0].T, (len(x), x.shape[2]))
    return np.nan_to_num(x, nan=0.0)


def _empty(group: Group, start: Cells, frames: int) -> Rows:
    b = len(start.codes)
    return Rows(group, start.codes, [np.full((len(p), b, frames), np.nan) for p in start.places],
                np.zeros((b, frames), dtype=bool), np.full((b, frames), np.nan),
                {v: np.full((b, frames), np.nan) for v in start.values}, found=start.found)


def _write(rows: Rows, frame: int, cells: Cells) -> None:
    for out, place in zip(rows.places, cells.places, strict=True):
        out[:, :, frame] = place[:, :, 0]
    rows.alive[:, frame] = cells.alive[:, 0]
    rows.margin[:, frame] = cells.margin[:, 0]
    for v, array in cells.values.items():
        rows.values[v][:, frame] = array[:, 0]
    rows.found = weaker(rows.found, cells.found)


def _fresh(context: Context, group: Group, rows: Rows, now: Cells,
           frame: int) -> NDArray[np.intp]:
    """Which of today's poses no row has reached."""
    b = len(now.codes)
    if not b:
        return np.empty(0, dtype=np.intp)
    mine = np.stack([np.broadcast_to(p[:, :, 0], (len(p), b)) for p in now.places], axis=2)
    theirs = np.stack([np.broadcast_to(p[:, :, frame], (len(p), len(rows.codes)))
                       for p in rows.places], axis=2)[:, rows.alive[:, frame]]
    gap = np.abs(mine[:, :, None] - theirs[:, None]).max(axis=(0, 3), initial=0.0)
    new = gap.min(axis=1, initial=np.inf) > SAME * context.rest.reach
    return np.flatnonzero(new & now.alive[:, 0])


def _only(cells: Cells, which: NDArray[np.intp]) -> Cells:
    return Cells(cells.group, cells.codes[which],
                 [p if p.shape[1] == 1 else p[:, which] for p in cells.places],
                 cells.alive[which], cells.margin[which], [], cells.found,
                 {v: a if len(a) == 1 else a[which] for v, a in cells.values.items()})


def _both_ways(forward: Rows, backward: Rows, frame: int) -> Rows:
    for out, mine in zip(forward.places, backward.places, strict=True):
        out[:, :, :frame] = mine[:, :, :frame]
    forward.alive[:, :frame] = backward.alive[:, :frame]
    forward.margin[:, :frame] = backward.margin[:, :frame]
    for v, array in backward.values.items():
        forward.values[v][:, :frame] = array[:, :frame]
    return forward


def _stacked(a: Rows, b: Rows) -> Rows:
    return Rows(a.group, np.concatenate([a.codes, b.codes]),
                [np.concatenate([p, q], axis=1) for p, q in zip(a.places, b.places, strict=True)],
                np.concatenate([a.alive, b.alive]), np.concatenate([a.margin, b.margin]),
                {v: np.concatenate([a.values[v], b.values[v]]) for v in a.values},
                found=weaker(a.found, b.found))
