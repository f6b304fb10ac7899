"""From the rows of independent groups to whole poses: order, product, dead-centre doubles."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from rigpose.model.equations import Array
from rigpose.solve.clock import Clock
from rigpose.solve.flow import writes
from rigpose.solve.rest import Rest
from rigpose.solve.rows import Rows
from rigpose.solve.search import Context, base_table, shared_base
from rigpose.solve.tree import Tree

Ints = NDArray[np.intp]
STEP = 1e-9
"""Distances to rest are compared in steps of this part of the size."""
MEET = 1e-9
"""A margin below this is a dead centre: squared heights within their error bound are set to 0."""
PLACE = 2e-7
"""At a dead centre places are known to the square root of rounding; nearer ones are one pose."""
SAME = 1e-10
FEW = 32
"""Joints looked at in one go."""
MANY = 1 << 14
"""Branches of one frame above which they are put in order as whole poses."""


@dataclass(frozen=True)
class Sorted:
    """A group's rows that live somewhere, nearest to rest first: ``order (k,)`` among them, their
    distances to rest in whole ``steps (k,)`` in that order; ``gaps`` are the squared distances of
    all rows."""

    rows: Rows
    order: Ints
    steps: Array
    gaps: Array


@dataclass(frozen=True)
class Picks:
    """Which row of each group each branch has: ``choice (n_branches, n_groups)`` counted nearest
    to rest first, ``index`` the same among the group's rows; ``alive`` and ``margin``
    ``(n_branches, n_frames)``; ``steps (n_branches,)`` the distance to rest in whole steps;
    ``count`` of all, ``cut`` where not all are here."""

    choice: Ints
    index: Ints
    steps: Array
    alive: NDArray[np.bool_]
    margin: NDArray[np.float32]
    meets: NDArray[np.bool_]
    count: int
    cut: bool


def base_places(context: Context, clock: Clock) -> tuple[dict[int, Array], NDArray[np.bool_]]:
    """Places ``(2, 1, F)`` of joints that only hang on what is known, and where they exist."""
    plan, n = context.plan, context.plan.eqs.n
    table = shared_base(context, clock.whole(slice(0, clock.count)))
    if table.flagged is not None and table.flagged.any():
        table = base_table(context, clock.whole(slice(0, clock.count)), True)
    joints = [j for j in range(n) if plan.eqs.pinned[j]]
    joints += [j for s in plan.base for j in writes(s) if j < n]
    alive = np.ones((1, clock.count), dtype=bool)
    if table.alive is not None:
        alive = np.broadcast_to(table.alive, alive.shape)
    return {j: table.points[j] for j in joints if j in table.points}, alive


def kept(rest: Rest, rows: Rows) -> Sorted:
    """Rows that live somewhere, nearest to rest first, none twice."""
    if rows.alive.shape[1] > 1 and len(rows.alive):
        rows = rows.take(_own(rest, rows))
    gap = _gaps(rest, rows)
    some = rows.alive[:, 0] if rows.alive.shape[1] == 1 else rows.alive.any(axis=1)
    if some.all():
        order, steps = _in_steps(_steps(rest, gap))
    else:
        live = np.flatnonzero(some)
        order, steps = _in_steps(_steps(rest, gap[live]))
        order = live[order]
    once = _once(rest, rows, order, steps)
    if once is not None:
        order, steps = order[once], steps[once]
    return Sorted(rows, order, steps, gap)


def _once(rest: Rest, rows: Rows, order: Ints, steps: Array) -> Ints | None:
    """Places in the order without rows that are another one again: a body's own frame may have a
    choice that makes no difference to the joints that hang on it. Rows that meet at a dead centre
    stay: their names tell which they are. None where all are kept."""
    equal = np.flatnonzero(steps[1:] == steps[:-1])
    if not len(equal) or len(order) > MANY:
        return None
    lost: set[int] = set()
    for k in equal.tolist():
        a, j = order[k + 1], k
        if np.max(rows.margin[a], where=rows.alive[a], initial=0.0) < MEET:
            continue
        while j >= 0 and steps[j] == steps[k + 1]:
            b = order[j]
            if j not in lost and np.array_equal(rows.alive[a], rows.alive[b]) and (
                    _apart(rows, a, b) <= SAME * rest.reach):
                lost.add(k + 1)
                break
            j -= 1
    return np.array([k for k in range(len(order)) if k not in lost], dtype=np.intp)


def _apart(rows: Rows, a: int, b: int) -> float:
    """The largest distance of a joint between two rows, in frames in which both live."""
    both, worst = rows.alive[a], 0.0
    for place in rows.places:
        if place.shape[1] > 1:
            gap = np.abs(place[:, a] - place[:, b])
            gap = gap[:, both] if gap.shape[1] > 1 else gap
            worst = max(worst, float(gap.max(initial=0.0)))
    return worst


def _in_steps(steps: Array) -> tuple[Ints, Array]:
    """The order of rising steps, of equals the earlier first; and the steps in that order."""
    bits = max(len(steps) - 1, 1).bit_length()
    if steps.max(initial=0.0) < float(1 << (63 - bits)):
        # Sorting keys that carry their places along is several times faster than asking for both.
        keys = steps.astype(np.int64)
        keys <<= bits
        keys |= np.arange(len(steps))
        keys.sort()
        order = keys & ((1 << bits) - 1)
        keys >>= bits
        return order, keys.astype(np.float64)
    order = np.argsort(steps, kind="stable")
    return order, steps[order]


def _steps(rest: Rest, gap: Array) -> Array:
    """Distances to rest in whole steps of `STEP`, from squared ones summed over joints."""
    steps: Array = np.rint(np.sqrt(gap / max(len(rest.scaled), 1)) / (STEP * rest.reach))
    return steps


def _own(rest: Rest, rows: Rows) -> Ints:
    """Rows with a pose of their own: one that lives at dead centres only, or in single frames
    (where the height of a crossing is zero), in poses of other rows, is none."""
    alive = rows.alive
    margin = np.where(alive, rows.margin, 0.0)
    alone = ~np.any(alive[:, 1:] & alive[:, :-1], axis=1)
    shadows = np.flatnonzero(alone | (margin.max(axis=1) < MEET))
    lost: set[int] = set()
    for row in map(int, shadows):
        frames = np.flatnonzero(alive[row])
        if all(any(k not in shadows or k < row for k in _near(rest, rows, row, f) - lost)
               for f in map(int, frames if alone[row] else frames[:1])):
            lost.add(row)
    return np.array([k for k in range(len(rows.alive)) if k not in lost], dtype=np.intp)


def _near(rest: Rest, rows: Rows, row: int, frame: int) -> set[int]:
    """Other rows that are in the same pose at a frame, as far as a dead centre lets tell."""
    others = np.flatnonzero(rows.alive[:, frame])
    gap = np.zeros(len(others))
    for place in rows.places:
        if place.shape[1] > 1:
            f = min(frame, place.shape[2] - 1)
            away = place[:, others, f] - place[:, row, f][:, None]
            gap = np.maximum(gap, np.abs(away).max(axis=0))
    return {int(k) for k in others[gap < PLACE * rest.reach]} - {row}


def _gaps(rest: Rest, rows: Rows) -> Array:
    """Squared distances to rest ``(B,)``, summed over the group's joints, at the first pose."""
    if not len(rows.alive):
        return np.zeros(0)
    joints = rows.group.joints
    if isinstance(rows.places, Tree):
        return rows.places.total(lambda k, place: _squared(rest.scaled[joints[k]], place))
    if rows.alive.shape[1] == 1:
        return _gaps_of_one(rest, rows)
    first = np.argmax(rows.alive, axis=1)
    each = np.arange(len(first))
    total = np.zeros(len(first))
    for j, place in zip(joints, rows.places, strict=True):
        at = np.minimum(first, place.shape[2] - 1)
        total += _squared(rest.scaled[j], place[:, each if place.shape[1] > 1 else 0, at])
    return total


def _gaps_of_one(rest: Rest, rows: Rows) -> Array:
    """The same of a single frame, a few joints at a time."""
    b, joints = len(rows.alive), rows.group.joints
    total = np.zeros(b)
    for start in range(0, len(joints), FEW):
        few = [p[:, :, 0] for p in rows.places[start:start + FEW]]
        wide = [p if p.shape[1] == b else np.broadcast_to(p, (len(p), b)) for p in few]
        total += _squared(rest.scaled[list(joints[start:start + FEW])].ravel(),
                          np.concatenate(wide))
    return total


def _squared(here: Array, places: Array) -> Array:
    """Squared distances ``(m,)`` of places ``(k, m)`` from ``(k,)``."""
    gap = places - here[:, None]
    gap *= gap
    total: Array = gap.sum(axis=0)
    return total


def combined(rest: Rest, picks: Sequence[Sorted], base_alive: NDArray[np.bool_],
             most: int) -> Picks:
    """The product of the groups, nearest to rest first, cut at ``most``."""
    sizes = [len(p.order) for p in picks]
    count = int(np.prod([float(s) for s in sizes])) if sizes else 1
    if not picks:
        return _only_base(base_alive)
    choice, steps = _in_order(rest, picks, sizes, min(count, most))
    if len(picks) == 1:
        index = picks[0].order[:len(choice), None].copy()
    else:
        index = np.stack([p.order[choice[:, g]] for g, p in enumerate(picks)], axis=1)
    alive, margin = _of(picks[0].rows, index[:, 0])
    for g, p in enumerate(picks[1:], 1):
        lives, its = _of(p.rows, index[:, g])
        alive &= lives
        margin = np.minimum(margin, its)
    if not alive.all():
        margin[~alive] = np.nan
    some = alive[:, 0] if alive.shape[1] == 1 else alive.any(axis=1)
    keep, meets = _without_doubles(rest, picks, index, alive, margin)
    keep &= some
    mixed = Picks(choice, index, steps, alive, margin, meets, count, count > most)
    return mixed if keep.all() else taken(mixed, np.flatnonzero(keep))


def _of(rows: Rows, index: Ints) -> tuple[NDArray[np.bool_], NDArray[np.float32]]:
    """Where some rows live, and their margins ``(n, n_frames)``."""
    margin = rows.margin.astype(np.float32)
    alive = np.ones((len(index), rows.alive.shape[1]), dtype=bool) if rows.alive.all() else (
        rows.alive[index])
    return alive, margin.take(index, axis=0)


def _in_order(rest: Rest, picks: Sequence[Sorted], sizes: Sequence[int], count: int) -> (
        tuple[Ints, Array]):
    """Choices ``(count, n_groups)`` nearest to rest first, and their distances in steps."""
    if len(picks) == 1:
        return np.arange(count)[:, None], picks[0].steps[:count].copy()
    choice = _mixed_radix(sizes, count)
    gap = np.zeros(len(choice))
    for g, p in enumerate(picks):
        gap += p.gaps[p.order[choice[:, g]]]
    steps = _steps(rest, gap)
    order, steps = _in_steps(steps)
    return choice[order], steps


def taken(p: Picks, which: Ints) -> Picks:
    """Some of the branches, in the given order."""
    return Picks(p.choice[which], p.index[which], p.steps[which], p.alive[which],
                 p.margin[which], p.meets[which], p.count, p.cut)


def put(p: Picks, where: Ints, others: Picks) -> None:
    """Write other branches to some of the places."""
    p.choice[where], p.index[where], p.steps[where] = others.choice, others.index, others.steps
    p.alive[where], p.margin[where], p.meets[where] = others.alive, others.margin, others.meets


def _only_base(base_alive: NDArray[np.bool_]) -> Picks:
    """Everything hangs on what is known: one branch, or none."""
    exists, frames = int(bool(base_alive.any())), base_alive.shape[1]
    none = np.zeros((exists, 0), dtype=np.intp)
    return Picks(none, none, np.zeros(exists), base_alive[:exists],
                 np.ones((exists, frames), dtype=np.float32), np.zeros(exists, dtype=bool),
                 exists, False)


def _mixed_radix(sizes: Sequence[int], count: int) -> Ints:
    number = np.arange(count)
    choice = np.empty((count, len(sizes)), dtype=np.intp)
    for g in range(len(sizes) - 1, -1, -1):
        number, choice[:, g] = np.divmod(number, max(sizes[g], 1))
    return choice


def _without_doubles(
    rest: Rest, picks: Sequence[Sorted], index: Ints, alive: NDArray[np.bool_],
    margin: NDArray[np.float32],
) -> tuple[NDArray[np.bool_], NDArray[np.bool_]]:
    """At one frame, branches that meet in one pose are listed once: which are, and which meet."""
    keep, meets = np.ones(len(index), dtype=bool), np.zeros(len(index), dtype=bool)
    if alive.shape[1] != 1 or not (margin[:, 0] < MEET).any():
        return keep, meets
    near = np.flatnonzero(margin[:, 0] < MEET)
    poses = _poses(picks, index[near])
    for k in range(len(near)):
        if not keep[near[k]]:
            continue
        same = np.flatnonzero(np.abs(poses[k + 1:] - poses[k]).max(axis=1) < PLACE * rest.reach)
        if len(same):
            meets[near[k]] = True
            keep[near[k + 1 + same]] = False
    return keep, meets


def _poses(picks: Sequence[Sorted], index: Ints) -> Array:
    """``(n, joints * 2)`` of the groups' joints at the first frame."""
    columns = []
    for g, p in enumerate(picks):
        for place in p.rows.places:
            mine = place[:, :, 0]
            columns.append(np.broadcast_to(mine, (len(mine), len(index))) if mine.shape[1] == 1
                           else mine[:, index[:, g]])
    return np.concatenate(columns).T if columns else np.zeros((len(index), 0))
