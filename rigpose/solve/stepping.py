"""Following rows where a block of several joints has no closed form.

Each step starts Newton's method from the last poses continued; a step that ends far from there is
halved (predictor and corrector; Allgower and Georg 1990, chapter 6). As long as steps go well they
grow over many frames, and those between are solved all at once. Every so many frames all solutions
are looked for again, so that rows that begin later are found too.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from rigpose.ground.budget import Watch, go_on
from rigpose.ground.words import Found, weaker
from rigpose.model.equations import Array
from rigpose.solve.between import fill, poses_of, steady, ways_of
from rigpose.solve.clock import Clock
from rigpose.solve.plan import Group
from rigpose.solve.rows import Codes, Rows
from rigpose.solve.search import Cells, Context, search

EVERY = 32
SMALLEST = 1 / 64
FAR = 0.02
"""A corrected pose farther than this part of the reach from its prediction is not trusted."""
SAME = 1e-5
WIDEST = 1 << 12
"""Frames that a step may take at most."""


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
    rows = _empty(group, start, clock.count)
    _write(rows, frame, start)
    last = clock.count - 1 if way > 0 else 0
    solved = _stride(context, group, clock, rows, start, (frame, last), watch)
    for a, b in fill(context, group, clock, rows, solved, watch):
        if rows.found is not Found.STOPPED:
            low, high = (a, b) if way > 0 else (b, a)
            _step_by_step(context, group, clock, rows, low, high)
    return rows


def _begun(context: Context, group: Group, start: Cells, frame: int) -> _Walk:
    x = poses_of(context, group, start)[:, 0]
    return _Walk(start.codes, float(frame), x, start.alive[:, 0], x, 0.0, start.values)


def _stride(context: Context, group: Group, clock: Clock, rows: Rows, start: Cells,
            ends: tuple[int, int], watch: Watch | None) -> list[int]:
    """Solve frames from the first end to the last, as far apart as the motion allows."""
    frame, last = ends
    solved, wide = [frame], 1
    now = _begun(context, group, start, frame)
    while frame != last and len(start.alive) and group.joints and now.alive.any():
        goal = frame + int(np.sign(last - frame)) * min(wide, abs(last - frame))
        if wide > 1:
            cells = _leap(context, group, clock, rows, now, solved, goal)
            if cells is None:
                wide //= 2
                continue
        else:
            cells = _advance(context, group, clock, now, float(goal))
        _write(rows, goal, cells)
        solved.append(goal)
        frame, wide = goal, min(2 * wide, WIDEST)
        if not go_on(watch, "frames", abs(frame - ends[0]), clock.count):
            rows.found = Found.STOPPED
            break
    return solved


def _leap(context: Context, group: Group, clock: Clock, rows: Rows, now: _Walk,
          solved: list[int], goal: int) -> Cells | None:
    """On over many frames in one step, or None where that is not to be trusted."""
    before = np.array(solved[-3:])
    weight = np.ones(len(before))
    for k in range(len(before)):
        for other in range(len(before)):
            if other != k:
                weight[k] *= (goal - before[other]) / (before[k] - before[other])
    guess = np.repeat(context.plan.eqs.at[None], len(now.alive), axis=0)
    for j, place in zip(group.joints, rows.places, strict=True):
        guess[:, j] = (place[:, :, before] * weight).sum(axis=-1).T
    guess = np.nan_to_num(guess, nan=0.0)
    cells = search(context, group, clock.at(np.array([float(goal)])),
                   ways_of(group, now.codes), len(now.codes), guess=guess[:, None],
                   hints=now.values, consecutive=True)
    x = poses_of(context, group, cells)[:, 0]
    off = np.abs(x - guess).max(axis=(1, 2))
    good = cells.alive[:, 0] & steady(context, off, cells.margin[:, 0]) & (
        off < FAR * context.rest.reach)
    if not good[now.alive].all():
        return None
    cells.alive = cells.alive & now.alive[:, None]
    now.x, now.before, now.gap = x, x, 0.0
    now.time, now.values = float(goal), cells.values
    return cells


def _step_by_step(context: Context, group: Group, clock: Clock, rows: Rows, start: int,
                  stop: int) -> None:
    """Follow the rows frame by frame over a stretch whose ends are solved, in place."""
    cells = Cells(group, rows.codes, [p[:, :, start:start + 1] for p in rows.places],
                  rows.alive[:, start:start + 1] & rows.alive[:, stop:stop + 1],
                  rows.margin[:, start:start + 1], [], rows.found,
                  {v: a[:, start:start + 1] for v, a in rows.values.items()})
    now = _begun(context, group, cells, start)
    way = 1 if stop > start else -1
    for frame in range(start + way, stop, way):
        _write(rows, frame, _advance(context, group, clock, now, float(frame)))


def _advance(context: Context, group: Group, clock: Clock, now: _Walk, goal: float) -> Cells:
    """On to a frame, in as many steps as it takes."""
    step = goal - now.time
    while True:
        step = np.sign(step) * min(abs(step), abs(goal - now.time))
        guess = now.x + (now.x - now.before) * (step / now.gap if now.gap else 0.0)
        inputs = clock.at(np.array([now.time + step]))
        cells = search(context, group, inputs, ways_of(group, now.codes), len(now.codes),
                       guess=guess[:, None], hints=now.values, consecutive=True)
        x = poses_of(context, group, cells)[:, 0]
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


def _empty(group: Group, start: Cells, frames: int) -> Rows:
    b = len(start.codes)
    return Rows(group, start.codes, [np.full((len(p), b, frames), np.nan) for p in start.places],
                np.zeros((b, frames), dtype=bool), np.full((b, frames), np.nan),
                {v: np.full((b, frames), np.nan) for v in start.values}, found=start.found,
                turning=start.turning)


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
                found=weaker(a.found, b.found), turning=a.turning | b.turning)
