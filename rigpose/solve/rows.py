"""Rows: continuous motions over the frames, following the mechanism through dead centres.

A run with fixed signs follows one sign of every crossing. Where the squared height of a crossing
touches zero and its smooth way goes on to the other side (METHODS in DEVELOPERS.md: an even zero
of order 2p with odd p), the sign is flipped from there on. Crossings are settled in the order of
the plan: what one does depends on earlier ones only.
"""

from __future__ import annotations

from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass, field, replace
from itertools import pairwise

import numpy as np
from numpy.typing import NDArray

from rigpose.ground.words import Found, weaker
from rigpose.model.equations import Array
from rigpose.solve.clock import Clock
from rigpose.solve.deadcentre import Pass, classify
from rigpose.solve.plan import Group
from rigpose.solve.screen import Screen
from rigpose.solve.search import Cells, Context, search
from rigpose.solve.tree import Tree

Mask = NDArray[np.bool_]
Codes = NDArray[np.int16]
CELLS = 1 << 15
"""Cells of a block: arrays of this size stay in the cache."""


@dataclass
class Rows:
    """Motions of one group: ``signs (B, bits)`` at the first frame, ``places`` for each of the
    group's joints ``(2, B or 1, F)``, both maybe as a tree; ``alive`` and ``margin`` ``(B, F)``;
    ``values`` that were read off on the way ``(B or 1, F)``."""

    group: Group
    signs: Codes | Tree
    places: Sequence[Array]
    alive: Mask
    margin: Array
    values: dict[int, Array] = field(default_factory=dict)
    passes: list[Pass] = field(default_factory=list)
    found: Found = Found.COMPLETE
    turning: frozenset[tuple[int, tuple[str, ...]]] = frozenset()

    @property
    def codes(self) -> Codes:
        """The signs of every choice ``(B, bits)``."""
        if isinstance(self.signs, Tree):
            self.signs = self.signs.codes()
        return self.signs

    def take(self, which: NDArray[np.intp]) -> Rows:
        """Some of the rows."""
        new = {int(old): k for k, old in enumerate(which)} if self.passes else {}
        return Rows(
            self.group, self.codes[which],
            [p if p.shape[1] == 1 else p[:, which] for p in self.places],
            self.alive[which], self.margin[which],
            {v: a if len(a) == 1 else a[which] for v, a in self.values.items()},
            [replace(p, row=new[p.row]) for p in self.passes if p.row in new],
            self.found, self.turning)


class Flips:
    """Signs of every choice over the frames: the start's, turned at some frames."""

    def __init__(self, codes: Codes) -> None:
        self.codes = codes
        self.turned: list[list[tuple[int, float]]] = [[] for _ in range(codes.shape[1])]

    def add(self, choice: int, row: int, time: float) -> None:
        """From ``time`` on the row takes the other side."""
        self.turned[choice].append((row, time))

    def ways(self, start: int, stop: int) -> dict[int, Array]:
        """Signs ``(B, 1 or stop - start)`` for a block of frames."""
        return {k: self._signs(k, start, stop) for k in range(self.codes.shape[1])}

    def _signs(self, k: int, start: int, stop: int) -> Array:
        base: Array = np.asarray(self.codes[:, k], dtype=np.float64)[:, None]
        if not self.turned[k]:
            return base
        rows = np.array([row for row, _ in self.turned[k]], dtype=np.intp)
        frames = np.ceil([time for _, time in self.turned[k]]).astype(np.intp)
        toggle = np.zeros((len(base), stop - start), dtype=np.intp)
        soon = frames < stop
        np.add.at(toggle, (rows[soon], np.maximum(frames[soon], start) - start), 1)
        signs: Array = base * (1.0 - 2.0 * (np.cumsum(toggle, axis=1) % 2))
        return signs

    def at(self, choice: int, rows: NDArray[np.intp], times: Array) -> Array:
        """Signs ``(m,)`` of one choice for pairs of rows and times."""
        sign: Array = self.codes[rows, choice].astype(np.float64)
        for row, when in self.turned[choice]:
            sign[(rows == row) & (times >= when)] *= -1.0
        return sign


def blocks(rows: int, frames: int) -> Iterator[tuple[int, int]]:
    """Frames cut so that a block has about `CELLS` cells."""
    step = max(2, CELLS // max(rows, 1))
    for start in range(0, frames, step):
        yield start, min(start + step, frames)


def survey(context: Context, group: Group, clock: Clock) -> tuple[Rows, bool]:
    """All combinations of signs over all frames, and whether some row meets another."""
    rows, screen = _sweep(context, group, clock, None)
    return rows, screen.any


def follow(context: Context, group: Group, clock: Clock, codes: Codes,
           values: Mapping[int, Array] | None = None) -> Rows:
    """Rows that start with the given signs at the first frame, through dead centres.

    values : what was read off at the first frame, where a motion goes on from an earlier one
    """
    flips = Flips(codes)
    passes: list[Pass] = []
    done: set[int] = set()
    while True:
        rows, screen = _sweep(context, group, clock, flips, values)
        turned = False
        for choice in range(group.bits):
            if choice in done:
                continue
            done.add(choice)
            hits = screen.hits(choice)
            found = classify(context, rows, clock, flips, choice, hits) if len(hits) else []
            passes += found
            for p in found:
                if p.kind == "passed":
                    flips.add(choice, p.row, p.time)
                    turned = True
            if turned:
                break
        if not turned:
            rows.passes = sorted(passes, key=lambda p: (p.row, p.time))
            return rows


def _sweep(context: Context, group: Group, clock: Clock,
           flips: Flips | None,
           values: Mapping[int, Array] | None = None) -> tuple[Rows, Screen]:
    """One run over all frames, block by block."""
    screen = Screen(group.bits)
    pieces: list[tuple[int, int, Cells]] = []
    guess = 2 ** min(group.bits, 15) if flips is None else len(flips.codes)
    whole = flips is None and context.plan.reads_values
    for start, stop in [(0, clock.count)] if whole else blocks(guess, clock.count):
        inputs = clock.whole(slice(start, stop))
        if flips is None:
            cells = search(context, group, inputs, consecutive=True)
        else:
            hints = {v: a[:, -1:] for v, a in pieces[-1][2].values.items()} if pieces else (
                dict(values or {}))
            cells = search(context, group, inputs, flips.ways(start, stop), len(flips.codes),
                           consecutive=True, hints=hints)
        screen.see(start, cells.sines, cells.codes)
        pieces.append((start, stop, cells))
    return _joined(group, clock.count, pieces, flips), screen


def _joined(group: Group, frames: int, pieces: list[tuple[int, int, Cells]],
            flips: Flips | None) -> Rows:
    """The blocks put together, rows by their codes."""
    if len(pieces) == 1:
        cells = pieces[0][2]
        codes = cells.codes if flips is None else flips.codes
        return Rows(group, codes, cells.places, cells.alive, cells.margin, cells.values,
                    found=cells.found, turning=cells.turning)
    if flips is not None:
        codes, where = flips.codes, [np.arange(len(flips.codes))] * len(pieces)
    else:
        codes, where = _all_codes([c.codes for _, _, c in pieces])
    b = len(codes)
    wide = any(p.shape[1] > 1 for _, _, c in pieces for p in c.places) or b > 1
    dims = [len(p) for p in pieces[0][2].places]
    places = [np.full((dim, b if wide else 1, frames), np.nan) for dim in dims]
    alive, margin = np.zeros((b, frames), dtype=bool), np.full((b, frames), np.nan)
    found = Found.COMPLETE
    for (start, stop, cells), index in zip(pieces, where, strict=True):
        for out, mine in zip(places, cells.places, strict=True):
            if len(index) == out.shape[1]:
                out[:, :, start:stop] = mine
            else:
                out[:, index, start:stop] = mine
        alive[index, start:stop] = cells.alive
        margin[index, start:stop] = cells.margin
        found = weaker(found, cells.found)
    values = {v: np.concatenate([c.values[v] for _, _, c in pieces], axis=1)
              for v in pieces[0][2].values}
    turning = frozenset[tuple[int, tuple[str, ...]]]().union(*(c.turning for _, _, c in pieces))
    return Rows(group, codes, places, alive, margin, values, found=found, turning=turning)


def _all_codes(lists: list[Codes]) -> tuple[Codes, list[NDArray[np.intp]]]:
    """All different codes, and for each list where its own are among them."""
    everything = np.concatenate(lists)
    codes, inverse = np.unique(everything, axis=0, return_inverse=True)
    # + before -, as a single block has it.
    codes, flat = codes[::-1], len(codes) - 1 - inverse.ravel()
    ends = np.cumsum([0, *(len(x) for x in lists)])
    return codes, [flat[a:b] for a, b in pairwise(ends)]
