"""Frames between two that are solved, all at once: where blocks of several joints are followed.

A polynomial through the six nearest solved frames starts Newton's method; every round halves what
is left. A pose farther from where the polynomial puts it than a tenth of its margin is not trusted
to be on the same row: such frames are left to be followed step by step.
"""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np
from numpy.typing import NDArray

from rigpose.ground.budget import Watch, go_on
from rigpose.model.equations import Array, Ints
from rigpose.solve.clock import Clock
from rigpose.solve.plan import Group
from rigpose.solve.rows import Rows
from rigpose.solve.search import Cells, Context, search
from rigpose.solve.table import Inputs

Mask = NDArray[np.bool_]
TRUST = 0.1
POINTS = 6
CELLS = 1 << 12
"""Poses solved in one go."""


def steady(context: Context, off: Array, margin: Array) -> Mask:
    """Whether corrected poses are near enough to their predictions, by how far off they are."""
    with np.errstate(invalid="ignore"):
        near: Mask = off <= TRUST * margin * context.rest.reach
    return near


def ways_of(group: Group, codes: NDArray[np.int16]) -> dict[int, Array]:
    """The signs of every choice ``(B, 1)``; a block's number stands for itself."""
    return {k: np.sign(codes[:, k:k + 1] + 0.5) for k in range(group.bits)}


def poses_of(context: Context, group: Group, cells: Cells) -> Array:
    """Poses ``(B, F, n, dim)`` with the group's joints in; others stay at rest, as do joints
    without a pose."""
    b, f = cells.alive.shape
    x = np.empty((b, f, *context.plan.eqs.at.shape))
    x[:] = context.plan.eqs.at
    for j, place in zip(group.joints, cells.places, strict=True):
        x[:, :, j] = np.broadcast_to(place, (len(place), b, f)).transpose(1, 2, 0)
    return np.nan_to_num(x, nan=0.0)


def fill(context: Context, group: Group, clock: Clock, rows: Rows, solved: Sequence[int],
         watch: Watch | None = None) -> list[tuple[int, int]]:
    """Solve what lies between frames already solved, in place; stretches that must be followed
    step by step instead, as pairs of solved frames."""
    known = np.array(sorted(solved), dtype=np.intp)
    left: list[tuple[int, int]] = []
    closed = np.zeros(len(known), dtype=bool)  # nothing (more) to do from here to the next
    while True:
        wide = np.flatnonzero((np.diff(known) > 1) & ~closed[:-1])
        if not len(wide) or not go_on(watch, "frames", len(known), clock.count):
            return left + [(int(known[k]), int(known[k + 1])) for k in wide]
        middle = (known[wide] + known[wide + 1]) // 2
        good = np.zeros(len(wide), dtype=bool)
        step = max(1, CELLS // len(rows.alive))
        for start in range(0, len(wide), step):
            part = slice(start, start + step)
            good[part] = _solved(context, group, clock, rows, known, wide[part], middle[part])
        closed[wide[~good]] = True
        left += [(int(known[k]), int(known[k + 1])) for k in wide[~good]]
        known = np.insert(known, wide[good] + 1, middle[good])
        closed = np.insert(closed, wide[good] + 1, False)


def _solved(context: Context, group: Group, clock: Clock, rows: Rows, known: Ints, at: Ints,
            middle: Ints) -> Mask:
    """Solve some frames, one after each of ``known[at]``; which of them are to be trusted."""
    alive = rows.alive[:, known[at]] & rows.alive[:, known[at + 1]]
    index, weight = _weights(known, at, middle)
    guess = np.empty((*alive.shape, *context.plan.eqs.at.shape))
    guess[:] = context.plan.eqs.at
    for j, place in zip(group.joints, rows.places, strict=True):
        guess[:, :, j] = _mixed(place, known, at, middle, index, weight).transpose(1, 2, 0)
    hints = {v: _mixed(a[None], known, at, middle, index, weight)[0]
             for v, a in rows.values.items()}
    guess = np.nan_to_num(guess, nan=0.0)
    inputs: Inputs = clock.at(middle.astype(np.float64))
    cells = search(context, group, inputs, ways_of(group, rows.codes), len(rows.alive),
                   guess=guess, hints=hints)
    off = np.abs(poses_of(context, group, cells) - guess).max(axis=(2, 3))
    steadily = cells.alive & steady(context, off, cells.margin)
    good: Mask = np.asarray((~alive | steadily).all(axis=0))
    write(rows, middle[good], cells, np.flatnonzero(good), alive[:, good])
    return good


def _weights(known: Ints, at: Ints, middle: Ints) -> tuple[Ints, Array]:
    """Of the nearest solved frames their places ``(m, POINTS)`` in ``known`` and Lagrange's
    weights."""
    count = min(POINTS, len(known))
    low = np.clip(at + 1 - count // 2, 0, len(known) - count)
    index = low[:, None] + np.arange(count)
    times = known[index].astype(np.float64)
    weight = np.ones(index.shape)
    for k in range(count):
        for other in range(count):
            if other != k:
                weight[:, k] *= (middle - times[:, other]) / (times[:, k] - times[:, other])
    return index, weight


def _mixed(values: Array, known: Ints, at: Ints, middle: Ints, index: Ints,
           weight: Array) -> Array:
    """Values ``(c, B, F)`` of rows at frames between, ``(c, B, m)``; straight on where one of the
    nearest has none."""
    curved = values[:, :, known[index[:, 0]]] * weight[:, 0]
    for k in range(1, weight.shape[1]):
        curved += values[:, :, known[index[:, k]]] * weight[:, k]
    a, b = known[at], known[at + 1]
    share = (middle - a) / (b - a)
    straight = values[:, :, a] * (1 - share) + values[:, :, b] * share
    return np.where(np.isnan(curved), straight, curved)


def write(rows: Rows, frames: Ints, cells: Cells, which: Ints, alive: Mask) -> None:
    """Put some frames of what was solved into rows; ``alive (B, m)`` is what may live there."""
    for out, place in zip(rows.places, cells.places, strict=True):
        some = place[:, :, which] if place.shape[2] > 1 else place
        out[:, :, frames] = np.where(alive, some, np.nan)
    rows.alive[:, frames] = cells.alive[:, which] & alive
    rows.margin[:, frames] = cells.margin[:, which]
    for v, array in cells.values.items():
        rows.values[v][:, frames] = array[:, which] if array.shape[1] > 1 else array
