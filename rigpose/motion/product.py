"""From the rows of independent groups to whole poses: order, product, dead-centre doubles."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from rigpose.model.equations import Array
from rigpose.solve.clock import Clock
from rigpose.solve.flow import writes
from rigpose.solve.rest import Rest
from rigpose.solve.rows import Rows
from rigpose.solve.search import Context, base_table

Ints = NDArray[np.intp]
STEP = 1e-9
"""Distances to rest are compared in steps of this part of the size."""
MEET = 2e-7
"""Poses of one frame nearer than this, with a margin as small, are one pose at a dead centre."""
CELLS = 1 << 13


@dataclass(frozen=True)
class Picks:
    """Which row of each group each branch has: ``choice (n_branches, n_groups)``; ``alive`` and
    ``margin`` ``(n_branches, n_frames)``; ``count`` of all, ``cut`` where not all are here."""

    choice: Ints
    alive: NDArray[np.bool_]
    margin: NDArray[np.float32]
    meets: NDArray[np.bool_]
    count: int
    cut: bool


def base_places(context: Context, clock: Clock) -> tuple[dict[int, Array], NDArray[np.bool_]]:
    """Places ``(2, 1, F)`` of joints that only hang on what is known, and where they exist."""
    plan, n = context.plan, context.plan.eqs.n
    table = base_table(context, clock.whole(slice(0, clock.count)), False)
    if table.flagged is not None and table.flagged.any():
        table = base_table(context, clock.whole(slice(0, clock.count)), True)
    joints = [j for j in range(n) if plan.eqs.pinned[j]]
    joints += [j for s in plan.base for j in writes(s) if j < n]
    alive = np.ones((1, clock.count), dtype=bool)
    if table.alive is not None:
        alive = np.broadcast_to(table.alive, alive.shape)
    return {j: table.points[j] for j in joints if j in table.points}, alive


def kept(rest: Rest, rows: Rows) -> Rows:
    """Rows that live somewhere, nearest to rest first, none twice."""
    ordered = rows.take(_order(rest, rows))
    if ordered.alive.shape[1] == 1 or not len(ordered.codes):
        return ordered
    return ordered.take(_own(rest, ordered))


def _own(rest: Rest, rows: Rows) -> Ints:
    """Rows with a pose of their own: one that lives at dead centres only, in poses of other rows,
    is none."""
    margin = np.where(rows.alive, rows.margin, 0.0)
    shadows = np.flatnonzero(margin.max(axis=1) < MEET)
    lost = set()
    for row in shadows:
        frame = int(np.argmax(rows.alive[row]))
        others = np.flatnonzero(rows.alive[:, frame])
        gap = np.zeros(len(others))
        for place in rows.places:
            if place.shape[1] > 1:
                away = place[:, others, frame] - place[:, row, frame][:, None]
                gap = np.maximum(gap, np.abs(away).max(axis=0))
        near = {int(k) for k in others[gap < MEET * rest.reach]} - {int(row)} - lost
        if any(k not in shadows or k < row for k in near):
            lost.add(int(row))
    return np.array([k for k in range(len(rows.codes)) if k not in lost], dtype=np.intp)


def _order(rest: Rest, rows: Rows) -> Ints:
    live = np.flatnonzero(rows.alive.any(axis=1))
    if not len(live):
        return live
    gap = _gaps(rest, rows)[live]
    steps = np.rint(np.sqrt(gap / max(len(rest.scaled), 1)) / (STEP * rest.reach))
    signs = tuple(-rows.codes[live, k] for k in range(rows.codes.shape[1] - 1, -1, -1))
    return live[np.lexsort((*signs, steps))] if len(live) > 1 else live


def _gaps(rest: Rest, rows: Rows) -> Array:
    """Squared distances to rest ``(B,)``, summed over the group's joints, at the first pose."""
    first = np.argmax(rows.alive, axis=1)
    each = np.arange(len(first))
    total = np.zeros(len(first))
    for j, place in zip(rows.group.joints, rows.places, strict=True):
        at = rest.scaled[j]
        single = place.shape[1] == 1
        for axis in range(len(at)):
            mine = place[axis, 0, first] if single else place[axis, each, first]
            total += (mine - at[axis]) ** 2
    return total


def combined(rest: Rest, picks: Sequence[Rows], base_alive: NDArray[np.bool_],
             most: int) -> Picks:
    """The product of the groups, nearest to rest first, cut at ``most``."""
    sizes = [len(rows.codes) for rows in picks]
    count = int(np.prod([float(s) for s in sizes])) if sizes else 1
    if not picks:
        exists = int(bool(base_alive.any()))
        frames = base_alive.shape[1]
        return Picks(np.zeros((exists, 0), dtype=np.intp), base_alive[:exists],
                     np.ones((exists, frames), dtype=np.float32),
                     np.zeros(exists, dtype=bool), exists, False)
    choice = _mixed_radix(sizes, min(count, most))
    choice = _sorted(rest, picks, choice)
    alive = np.ones((len(choice), picks[0].alive.shape[1]), dtype=bool)
    margin = np.ones(alive.shape, dtype=np.float32)
    for g, rows in enumerate(picks):
        alive = alive & rows.alive[choice[:, g]]
        margin = np.minimum(margin, rows.margin[choice[:, g]].astype(np.float32))
    some = alive.any(axis=1)
    if not some.all():
        choice, alive, margin = choice[some], alive[some], margin[some]
    margin = np.where(alive, margin, np.float32(np.nan))
    choice, alive, margin, meets = _without_doubles(rest, picks, choice, alive, margin)
    return Picks(choice, alive, margin, meets, count, count > most)


def _mixed_radix(sizes: Sequence[int], count: int) -> Ints:
    number = np.arange(count)
    choice = np.empty((count, len(sizes)), dtype=np.intp)
    for g in range(len(sizes) - 1, -1, -1):
        number, choice[:, g] = np.divmod(number, max(sizes[g], 1))
    return choice


def _sorted(rest: Rest, picks: Sequence[Rows], choice: Ints) -> Ints:
    if len(picks) == 1 or len(choice) < 2:
        return choice  # each group is in order already
    gap = np.zeros(len(choice))
    for g, rows in enumerate(picks):
        gap += _gaps(rest, rows)[choice[:, g]]
    steps = np.rint(np.sqrt(gap / max(len(rest.scaled), 1)) / (STEP * rest.reach))
    return choice[np.argsort(steps, kind="stable")]


def _without_doubles(
    rest: Rest, picks: Sequence[Rows], choice: Ints, alive: NDArray[np.bool_],
    margin: NDArray[np.float32],
) -> tuple[Ints, NDArray[np.bool_], NDArray[np.float32], NDArray[np.bool_]]:
    """At one frame, branches that meet in one pose are listed once."""
    meets = np.zeros(len(choice), dtype=bool)
    if alive.shape[1] != 1 or not (margin[:, 0] < MEET).any():
        return choice, alive, margin, meets
    near = np.flatnonzero(margin[:, 0] < MEET)
    keep = np.ones(len(choice), dtype=bool)
    poses = _poses(picks, choice[near])
    for k in range(len(near)):
        if not keep[near[k]]:
            continue
        same = np.flatnonzero(np.abs(poses[k + 1:] - poses[k]).max(axis=1) < MEET * rest.reach)
        if len(same):
            meets[near[k]] = True
            keep[near[k + 1 + same]] = False
    return choice[keep], alive[keep], margin[keep], meets[keep]


def _poses(picks: Sequence[Rows], choice: Ints) -> Array:
    """``(n, joints * 2)`` of the groups' joints at the first frame."""
    columns = []
    for g, rows in enumerate(picks):
        for place in rows.places:
            mine = place[:, :, 0]
            columns.append(np.broadcast_to(mine, (2, 1))[:, [0] * len(choice)]
                           if mine.shape[1] == 1 else mine[:, choice[:, g]])
    return np.concatenate(columns).T if columns else np.zeros((len(choice), 0))


def assembled(rest: Rest, picks: Sequence[Rows], mixed: Picks, base: Mapping[int, Array],
              frames: int) -> Array:
    """``(n_branches, n_frames, n_joints, dim)`` in the rig's frame, NaN without a pose.

    Written in blocks that stay in the cache; a joint's places come as rows of their own.
    """
    eqs = rest.equations
    b = len(mixed.choice)
    out = np.empty((b, frames, eqs.n, eqs.dim))
    rows_step = max(1, min(b, CELLS // max(frames, 1)))
    frames_step = max(1, min(frames, CELLS))
    sources = [(j, place, None) for j, place in base.items()]
    sources += [(j, place, g) for g, rows in enumerate(picks)
                for j, place in zip(rows.group.joints, rows.places, strict=True)]
    for r in range(0, b, rows_step):
        choice = mixed.choice[r:r + rows_step]
        for f in range(0, frames, frames_step):
            block = out[r:r + rows_step, f:f + frames_step]
            for j, place, g in sources:
                _put(block[:, :, j], place, None if g is None else choice[:, g],
                     slice(f, f + frames_step), eqs.scale, eqs.origin)
    if not mixed.alive.all():
        out[~mixed.alive] = np.nan
    return out


def _put(out: Array, place: Array, which: Ints | None, frames: slice, scale: float,
         origin: Array) -> None:
    """One joint of one block, from the equations' frame into the rig's."""
    part = place[:, :, frames] if place.shape[2] > 1 else place
    if which is not None and part.shape[1] > 1:
        part = part[:, which] if len(which) < part.shape[1] or len(which) > 1 else part
    for axis in range(out.shape[-1]):
        target = out[..., axis]
        if scale == 1.0 and origin[axis] == 0.0:
            target[...] = part[axis]
        else:
            np.multiply(part[axis], scale, out=target)
            if origin[axis] != 0.0:
                target += origin[axis]


