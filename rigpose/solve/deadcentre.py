"""What a row does where the squared height of a crossing comes down to zero.

With g the squared height along the motion, an even zero g ~ s^(2p) has the smooth way h ~ s^p:
for odd p the row goes over to the other side (passed), for even p it stays (touched). Where g is
negative between two frames there is no pose for a moment (gap). A low point above zero is nothing.
"""

from __future__ import annotations

from dataclasses import dataclass, replace
from typing import TYPE_CHECKING

import numpy as np
from numpy.typing import NDArray

from rigpose.ground.tolerance import EPS
from rigpose.model.equations import Array
from rigpose.solve.clock import Clock
from rigpose.solve.regular import HELD, full_margin, knowns_at, may_hold
from rigpose.solve.run import run_steps
from rigpose.solve.screen import Hits
from rigpose.solve.search import Context, base_table, group_table
from rigpose.solve.table import Table

if TYPE_CHECKING:
    from rigpose.solve.rows import Flips, Rows

Ints = NDArray[np.intp]
AT_END = 1e-6
"""Frames within which a zero is at the very first or last frame."""
POINTS = 9
ROUNDS = 5
FINE = 33
WIDEST, NARROWEST = 0.32, 1e-3
"""Frames to both sides from which the order of a zero is read: wide, so that a high order shows."""
LOW = 1e-10
"""A height that the fitted zero must come below: it is placed to a part of its own width only."""
ZERO = 1e-13
"""Squared sine that counts as zero: rounding of a placing, carried through a long chain."""
FIT = np.array([-4.0, -3.0, -2.0, -1.0, 1.0, 2.0, 3.0, 4.0])


def classify(context: Context, rows: Rows, clock: Clock, flips: Flips, choice: int,
             hits: Hits) -> list[Pass]:
    """Every true zero among the low points."""
    heights = _Heights(context, rows, clock, flips, choice)
    last = clock.count - 1
    hits = replace(hits, high=np.minimum(hits.high, last))
    # A rest at either end is no passing: where a motion begins or ends at a dead centre, nothing
    # comes before or after it.
    rests = hits.rests & (hits.low > 0) & (hits.high < last)
    found = _touching(heights, hits.take(~hits.rests))
    found += _resting(heights, hits.take(rests))
    passes = [Pass(row, choice, time, kind) for row, time, kind in found
              if AT_END < time < last - AT_END]
    return _held(heights, passes)


def _held(heights: _Heights, passes: list[Pass]) -> list[Pass]:
    """The same, with those marked where surplus lengths hold the joints."""
    joints = np.array(heights.rows.group.joints, dtype=np.intp)
    meet = [k for k, p in enumerate(passes) if p.kind != "gap"]
    if not meet or not may_hold(heights.context, len(joints)):
        return passes
    poses = heights.poses(np.array([passes[k].row for k in meet]),
                          np.array([passes[k].time for k in meet]))
    margin = full_margin(heights.context, joints, *poses)
    out = list(passes)
    for k, least in zip(meet, margin, strict=True):
        out[k] = replace(out[k], held=bool(least > HELD))
    return out


@dataclass(frozen=True, slots=True)
class Pass:
    """A row at a dead centre: at ``time`` (in frames from the first) crossing ``choice`` is
    passed straight through (``flips``) or touched; ``gap`` where it opens between two frames.
    ``held`` where surplus lengths hold the joints all the while: no dead centre of the machine."""

    row: int
    choice: int
    time: float
    kind: str
    held: bool = False

    def moved(self, frames: int = 0, rows: int = 0) -> Pass:
        """The same, counted from an earlier frame and row."""
        return replace(self, time=self.time + frames, row=self.row + rows)


class _Heights:
    """Squared heights of one choice at any times of some rows, upstream choices being settled."""

    def __init__(self, context: Context, rows: Rows, clock: Clock, flips: Flips,
                 choice: int) -> None:
        self.context, self.rows, self.clock = context, rows, clock
        self.flips, self.choice = flips, choice
        # Squared sines below this are zero as far as the file's own numbers tell.
        self.zero = ZERO + 16.0 * context.rounding / context.rest.reach - 256.0 * EPS

    def __call__(self, rows: Ints, times: Array) -> Array:
        """``(m, k)`` for rows ``(m,)`` and times ``(m, k)``; NaN past an earlier dead one."""
        m, k = times.shape
        _, table = self._run(np.repeat(rows, k), times.ravel())
        return np.broadcast_to(table.sines[self.choice], (1, m * k)).reshape(m, k)

    def poses(self, rows: Ints, times: Array) -> tuple[Array, Array, Array]:
        """``x, values, goal`` of whole poses at times ``(m,)`` of rows ``(m,)``."""
        base, table = self._run(rows, times)
        eqs = self.context.plan.eqs
        x = np.full((len(rows), eqs.n, eqs.dim), np.nan)
        for p in range(eqs.n):
            if p in table.points:
                x[:, p] = np.broadcast_to(table.point(p), (eqs.dim, 1, len(rows)))[:, 0].T
        cell = np.zeros(len(rows), dtype=np.intp), np.arange(len(rows))
        read = {v: table.value(v) for v in table.values}
        return x, *knowns_at(self.context, base.inputs, read, *cell)

    def _run(self, every: Ints, flat: Array) -> tuple[Table, Table]:
        base = base_table(self.context, self.clock.at(flat), True, hints=self._hints(every, flat))
        table = group_table(base, 1)
        group = self.rows.group
        # Earlier choices flip at their own times, not at the next whole frame: several crossings
        # of one mechanism often come to zero at the same instant.
        ways = {c: self.flips.at(c, every, flat)[None] for c in range(group.bits)}
        run_steps(group.steps, table, ways, len(self.context.plan.base))
        return base, table

    def _hints(self, rows: Ints, times: Array) -> dict[int, Array]:
        frame = np.rint(times).astype(np.intp)
        return {v: a[np.minimum(rows, len(a) - 1), frame][None]
                for v, a in self.rows.values.items()}


def _touching(heights: _Heights, hits: Hits) -> list[tuple[int, float, str]]:
    if not len(hits):
        return []
    row, low, high, opened = _single(heights, hits)
    if not len(row):
        return []
    grid = np.linspace(0.0, 1.0, POINTS)
    centre = (low + high) / 2
    for _ in range(ROUNDS):
        times = low[:, None] + (high - low)[:, None] * grid
        g = heights(row, times)
        size = np.nan_to_num(np.abs(g), nan=np.inf)
        least = size <= np.maximum(size.min(axis=1, keepdims=True), 0.1 * heights.zero)
        # A zero of high order is flat: the middle of what can't be told from zero.
        centre = np.where(least, times, 0.0).sum(axis=1) / least.sum(axis=1)
        step = (high - low) / (POINTS - 1)
        low, high = centre - step, centre + step
    return _fitted(heights, row, centre, opened)


def _single(heights: _Heights, hits: Hits) -> tuple[Ints, Array, Array, NDArray[np.bool_]]:
    """Brackets with one low point each: row, low and high times, and whether it is open there.

    A drive that turns back just past a dead centre passes it twice within two frames.
    """
    grid = np.linspace(0.0, 1.0, FINE)
    times = hits.low[:, None] + (hits.high - hits.low)[:, None] * grid
    g = heights(hits.row, times)
    with np.errstate(invalid="ignore"):
        size, below = np.abs(g), g < -heights.zero
        lowest = np.ones(g.shape, dtype=bool)
        lowest[:, 1:] &= size[:, 1:] <= size[:, :-1]
        lowest[:, :-1] &= size[:, :-1] < size[:, 1:]
        lowest &= np.isfinite(size)
    which, at = np.nonzero(lowest)
    before, after = np.maximum(at - 1, 0), np.minimum(at + 1, FINE - 1)
    shut = below[which, before] | below[which, at] | below[which, after]
    return hits.row[which], times[which, before], times[which, after], shut


def _fitted(heights: _Heights, row: Ints, centre: Array,
            opened: NDArray[np.bool_]) -> list[tuple[int, float, str]]:
    """Order and time of each zero from heights on both sides."""
    reach = _room(row, centre, float(heights.clock.count - 1))
    times = centre[:, None] + reach[:, None] * FIT
    g = heights(row, times)
    with np.errstate(divide="ignore", invalid="ignore"):
        left = np.log2(g[:, 0] / g[:, 2]) / 2
        right = np.log2(g[:, 7] / g[:, 5]) / 2
    p = np.rint(np.nan_to_num((left + right) / 2, nan=0.0, posinf=0.0, neginf=0.0))
    signs = np.sign(FIT)
    with np.errstate(invalid="ignore", divide="ignore"):
        h = signs * g ** (0.5 / np.maximum(p, 1.0))[:, None]
        secant = times[:, 0] - h[:, 0] * (times[:, -1] - times[:, 0]) / (h[:, -1] - h[:, 0])
    clear = np.nanmin(np.abs(g), axis=1) > 1e3 * heights.zero
    zero = np.where(clear, _inverse(h, times), np.nan_to_num(secant, nan=-1e300))
    zero = np.where(np.abs(zero - centre) < 4 * reach, zero, centre)
    at = heights(row, zero[:, None])[:, 0]
    out = []
    for k in range(len(row)):
        if (g[k] < -heights.zero).any() or at[k] < -heights.zero or opened[k]:
            out.append((int(row[k]), float(centre[k]), "gap"))
        elif at[k] <= LOW + heights.zero and p[k] >= 1:
            out.append((int(row[k]), float(zero[k]), "passed" if p[k] % 2 else "touched"))
    return _one_gap(out)


def _room(row: Ints, centre: Array, last: float) -> Array:
    """How far to both sides a zero can be looked at: not into the next one, nor past the ends."""
    room = np.minimum(np.minimum(centre, last - centre), WIDEST)
    for k in range(1, len(row)):
        if row[k] == row[k - 1]:
            part = abs(float(centre[k] - centre[k - 1])) / 3
            room[k], room[k - 1] = min(room[k], part), min(room[k - 1], part)
    reach: Array = np.maximum(room, NARROWEST) / FIT[-1]
    return reach


def _one_gap(found: list[tuple[int, float, str]]) -> list[tuple[int, float, str]]:
    """Both ends of a gap within one frame are one event."""
    out: list[tuple[int, float, str]] = []
    for event in found:
        if out and event[2] == out[-1][2] == "gap" and event[0] == out[-1][0] and (
                abs(event[1] - out[-1][1]) < 2.0):
            continue
        out.append(event)
    return out


def _inverse(h: Array, times: Array) -> Array:
    """The time at which the interpolating polynomial of times over heights is at zero."""
    with np.errstate(divide="ignore", invalid="ignore"):
        total = np.zeros(len(h))
        for k in range(h.shape[1]):
            weight = np.ones(len(h))
            for other in range(h.shape[1]):
                if other != k:
                    weight *= -h[:, other] / (h[:, k] - h[:, other])
            total += weight * times[:, k]
    return np.nan_to_num(total, nan=-1e300)


def _resting(heights: _Heights, hits: Hits) -> list[tuple[int, float, str]]:
    """A stretch of frames at a dead centre: passed if the knowns go on to the other side."""
    out = []
    clock = heights.clock
    for row, low, high in zip(hits.row, hits.low, hits.high, strict=True):
        inside = clock.whole(slice(low + 1, low + 2))
        before, after = clock.whole(slice(low, low + 1)), clock.whole(slice(high, high + 1))
        dot = sum(float((before.values[v][0] - inside.values[v][0])
                        * (after.values[v][0] - inside.values[v][0])) for v in inside.values)
        dot += sum(float((before.targets[t][0] - inside.targets[t][0])
                         * (after.targets[t][0] - inside.targets[t][0])) for t in inside.targets)
        at = float(heights(np.array([row]), np.array([[low + 1.0]]))[0, 0])
        if abs(at) <= LOW + heights.zero and dot != 0.0:
            out.append((int(row), float(high - 1), "passed" if dot < 0 else "touched"))
    return out
