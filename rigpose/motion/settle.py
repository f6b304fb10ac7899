"""One row over the frames of a shot, window by window, so that long shots stream."""

from __future__ import annotations

from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass, field

import numpy as np
from numpy.typing import NDArray

from rigpose.ground.words import Found
from rigpose.model.equations import Array, Equations
from rigpose.motion.product import base_places
from rigpose.solve.clock import Clock, part_of_clock
from rigpose.solve.deadcentre import Pass
from rigpose.solve.plan import Group
from rigpose.solve.regular import shown_margin
from rigpose.solve.rows import Codes, Rows, follow
from rigpose.solve.search import Cells, Context
from rigpose.solve.stepping import walk

WINDOW = 1 << 14
"""Frames of a window of a small rig; a large one has fewer, so that its first rows come as soon."""
PLACES = 1 << 19
HALO = 2
BLOCK = 512


@dataclass(frozen=True)
class Begin:
    """Where one group's row begins: its signs, and its places ``(2, 1, 1)`` for the joints of a
    group that is followed frame by frame."""

    codes: Codes
    places: Sequence[Array]
    values: Mapping[int, Array] = field(default_factory=dict)


@dataclass(frozen=True)
class Piece:
    """Frames ``start`` … ``stop`` of a row: positions ``(n, n_joints, dim)`` in the rig's frame,
    ``alive`` and ``margin`` ``(n,)``, values read off by number, and dead centres."""

    start: int
    stop: int
    positions: Array
    alive: NDArray[np.bool_]
    margin: Array
    values: Mapping[int, Array]
    passes: tuple[tuple[int, Pass], ...]


def pieces(context: Context, clock: Clock, begins: Sequence[Begin], window: int = 0,
           out: Array | None = None) -> Iterator[Piece]:
    """The row that begins with the given signs at frame 0, in pieces of ``window`` frames (0: as
    many as the rig's size suggests).

    out : (n_frames, n_joints, dim) where the positions are written, each piece a view of it
    """
    state = list(begins)
    window = window or max(64, min(WINDOW, PLACES // context.plan.eqs.n))
    for start in range(0, clock.count, window):
        stop = min(start + window, clock.count)
        low, high = max(start - HALO, 0), min(stop + HALO, clock.count)
        part = part_of_clock(clock, low, high)
        rows, after = [], []
        for group, begin in zip(context.plan.groups, state, strict=True):
            row = _follow(context, group, part, begin)
            rows.append(row)
            after.append(_next(row, begin, max(stop - HALO, 0) - low))
        here = None if out is None else out[start:stop]
        yield _piece(context, part, rows, low, start, stop, here)
        state = after


def _follow(context: Context, group: Group, clock: Clock, begin: Begin) -> Rows:
    alive = np.array([[bool(np.isfinite(begin.places[0]).all()) if begin.places else True]])
    start = Rows(group, begin.codes, list(begin.places), alive, np.ones((1, 1)),
                 dict(begin.values))
    return follow_from(context, group, clock, start)


def follow_from(context: Context, group: Group, clock: Clock, start: Rows) -> Rows:
    """Rows over a clock's frames from their poses in its first one."""
    if group.binary:
        return follow(context, group, clock, start.codes, start.values)
    cells = Cells(group, start.codes, start.places, start.alive, start.margin, [],
                  Found.COMPLETE, dict(start.values))
    return walk(context, group, clock, cells, 0, 1)


def _next(row: Rows, begin: Begin, frame: int) -> Begin:
    """The state at one frame of a window, from which the next window goes on."""
    codes = begin.codes.copy()
    for p in row.passes:
        if p.kind == "passed" and p.time <= frame:
            codes[0, p.choice] *= -1
    places = [p[:, :1, frame:frame + 1] if p.shape[2] > 1 else p for p in row.places]
    values = {v: a[:, frame:frame + 1] for v, a in row.values.items()}
    return Begin(codes, places, values)


def _piece(context: Context, clock: Clock, rows: Sequence[Rows], low: int, start: int,
           stop: int, out: Array | None) -> Piece:
    eqs = context.plan.eqs
    base, base_alive = base_places(context, clock)
    cut = slice(start - low, stop - low)
    n = stop - start
    alive, margin = np.broadcast_to(base_alive[0], (clock.count,))[cut].copy(), np.ones(n)
    columns = np.empty((eqs.n * eqs.dim, n))
    sources = dict(base)
    values: dict[int, Array] = {}
    for row in rows:
        alive &= row.alive[0, cut]
        shown = shown_margin(context, row, clock)[0]
        margin = np.minimum(margin, np.broadcast_to(shown, (clock.count,))[cut])
        sources.update(zip(row.group.joints, row.places, strict=True))
        values |= {v: a[0, cut] for v, a in row.values.items()}
    for j, place in sources.items():
        mine = place[:, 0, cut] if place.shape[2] > 1 else place[:, 0]
        columns[j * eqs.dim:(j + 1) * eqs.dim] = mine
    for j in set(range(eqs.n)) - sources.keys():
        columns[j * eqs.dim:(j + 1) * eqs.dim] = np.nan
    positions = _turned(columns, eqs, out)
    positions[~alive] = np.nan
    margin[~alive] = np.nan
    passes = tuple((g, p.moved(low))
                   for g, row in enumerate(rows) for p in row.passes
                   if (p.time + low >= start or start == 0) and p.time + low < stop)
    return Piece(start, stop, positions, alive, margin, values, passes)


def _turned(columns: Array, eqs: Equations, into: Array | None) -> Array:
    """``(n_joints * dim, n)`` of the equations' frame to ``(n, n_joints, dim)`` in the rig's."""
    width, n = columns.shape
    out = np.empty((n, eqs.n, eqs.dim)) if into is None else into
    flat = out.reshape(n, width)
    for start in range(0, n, BLOCK):
        block = flat[start:start + BLOCK]
        np.multiply(columns[:, start:start + BLOCK].T, eqs.scale, out=block)
        if eqs.origin.any():
            block += np.tile(eqs.origin, eqs.n)
    return out
