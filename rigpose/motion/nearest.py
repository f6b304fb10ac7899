"""The branch nearest to a pose, found best-first without listing all of them.

The squared distance of the joints placed so far can only grow, so the open node with the least
of it is worked on first (Hart, Nilsson and Raphael 1968, with no estimate of what is left).
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import fields
from functools import cached_property
from heapq import heappop, heappush
from itertools import count

import numpy as np
import numpy.typing as npt

from rigpose.ground.errors import BadInput, Problem
from rigpose.ground.words import Found, weaker
from rigpose.model.equations import Array
from rigpose.model.record import all_kept
from rigpose.model.rig import Rig
from rigpose.motion.branches import made
from rigpose.motion.branchset import Branches
from rigpose.motion.naming import Names
from rigpose.motion.product import kept
from rigpose.motion.streaming import single_frame, whole_group
from rigpose.solve.alone import search_alone
from rigpose.solve.clock import Clock
from rigpose.solve.flow import writes
from rigpose.solve.knowns import Given, Wished
from rigpose.solve.longchains import bring_back
from rigpose.solve.plan import Fit, Group
from rigpose.solve.rows import Rows
from rigpose.solve.run import run_steps
from rigpose.solve.search import Context, base_table, cells_of, group_table
from rigpose.solve.stream import part_of, stream_cells
from rigpose.solve.table import Inputs, Table

MOST_NODES = 2048
"""Nodes after which best-first gives way to looking at all branches in blocks."""
SAME = 1e-9
"""A branch that is off by less than this part of the reach is the goal itself."""


def nearest_branch(rig: Rig, drives: Given | None = None, targets: Wished | None = None, *,
                   near: Mapping[str, npt.ArrayLike] | None = None) -> Branches:
    """The one branch of a frame that lies nearest to the rest pose, or to given places.

    near : joint name to (dim,) a place in the rig's frame; only these joints count then

    Best-first, so that sets far too large to list are no trouble; chains of very many choices
    depth-first along the nearer ways: where that has to stop before all others are excluded, the
    best pose found is told as stopped at a budget. No branches where nothing assembles. Raises
    BadInput like `find_branches`, and for an unknown joint in ``near``.
    """
    with all_kept():
        return _nearest(rig, drives, targets, near)


def _nearest(rig: Rig, drives: Given | None, targets: Wished | None,
             near: Mapping[str, npt.ArrayLike] | None) -> Branches:
    context, clock = single_frame(rig, drives, targets)
    goal = _goal(context, near)
    picks = [nearest_rows(context, group, clock, 1, goal) for group in context.plan.groups]
    found = Found.COMPLETE
    for rows in picks:
        found = weaker(found, rows.found)
    one = made(context, clock, np.zeros(1), [kept(context.rest, p) for p in picks], found)
    return Lone(**{f.name: getattr(one, f.name) for f in fields(one)})


class Lone(Branches):
    """The only branch of its set: with nothing to be told from it is named by all its bends."""

    @cached_property
    def names(self) -> Names:
        """Its one name."""
        told, none = range(self.signs.shape[1]), np.zeros(len(self), dtype=np.intp)
        return Names(self.rig, self.signs, told, none, self.meets)


def _goal(context: Context, near: Mapping[str, npt.ArrayLike] | None) -> Array:
    """``(n_joints, dim)`` in the equations' frame, NaN where a joint doesn't count."""
    if near is None:
        return context.rest.scaled
    eqs = context.plan.eqs
    goal = np.full((eqs.n, eqs.dim), np.nan)
    for joint, place in near.items():
        if joint not in eqs.rig.index:
            raise BadInput(Problem(eqs.rig.source, f'near "{joint}"', "names a joint",
                                   f'"{joint}"', f"there are {', '.join(eqs.rig.joint_names[:8])}"))
        goal[eqs.rig.index[joint]] = eqs.inward(np.asarray(place, dtype=np.float64))
    return goal


def nearest_rows(context: Context, group: Group, clock: Clock, most: int,
                 goal: Array | None = None) -> Rows:
    """The ``most`` branches of one group nearest to a goal ``(n_joints, dim)``, rest by default.

    Groups with a block of several joints are listed; so are frames close to a dead centre.
    """
    aim = context.rest.scaled if goal is None else goal
    if not group.binary:
        return _nearest_of(whole_group(context, group, clock), aim, most)
    inputs = clock.whole(slice(0, 1))
    base = base_table(context, inputs, False)
    straight = _alone(context, group, base, inputs, aim) or _straight_on(
        context, group, base, aim) if most == 1 else None
    if straight is not None:
        return straight
    tables = _best_first(context, group, group_table(base, None), aim, most)
    if tables is None:
        return _best_of_stream(context, group, clock, aim, most)
    if any(t.flagged is not None and t.flagged.any() for t in (base, *tables)):
        return _nearest_of(whole_group(context, group, clock), aim, most)
    if not tables:
        return whole_group(context, group, clock).take(np.empty(0, dtype=np.intp))
    cells = [cells_of(group, t) for t in tables]
    rows = [Rows(group, c.codes, c.places, c.alive, c.margin, c.values) for c in cells]
    return rows[0] if len(rows) == 1 else _stacked(rows)


def _alone(context: Context, group: Group, base: Table, inputs: Inputs, aim: Array) -> (
        Rows | None):
    """The nearest branch of a group of very many choices, depth first along the nearer ways."""
    cells = search_alone(context, group, base, 1, aim)
    if cells is None:
        return None
    bring_back(context.rest, context.plan, cells, base, inputs)
    return Rows(group, cells.signs, cells.places, cells.alive, cells.margin, cells.values,
                found=cells.found, turning=cells.turning)


def _straight_on(context: Context, group: Group, base: Table, aim: Array) -> Rows | None:
    """The branch that takes the nearer way at each choice, if it ends in the goal itself: then
    none is nearer, and a rig of many thousand joints needs no list of open nodes."""
    if np.isnan(aim).any():
        return None
    table = group_table(base, 1)
    table.guess = aim[None, None]
    ways = {k: np.ones((1, 1)) for k in range(group.bits)}
    run_steps(group.steps, table, ways, len(context.plan.base))
    if table.flagged is not None or (table.alive is not None and not table.alive.all()):
        return None
    cells = cells_of(group, table)
    off = max((float(np.abs(p[:, 0, 0] - aim[j]).max())
               for j, p in zip(group.joints, cells.places, strict=True)), default=0.0)
    if not off <= SAME * context.rest.reach:
        return None
    return Rows(group, np.ones((1, group.bits), dtype=np.int16), cells.places, cells.alive,
                cells.margin, cells.values)


def _best_first(context: Context, group: Group, start: Table, aim: Array,
                most: int) -> list[Table] | None:
    """The nearest branches; None where too many nodes are as good as one another."""
    ticket, offset = count(), len(context.plan.base)
    done: list[Table] = []
    heap: list[tuple[float, int, int, Table]] = [(0.0, 0, next(ticket), start)]
    for _ in range(MOST_NODES):
        if not heap or len(done) >= most:
            return done
        cost, ahead, _, table = heappop(heap)
        k = -ahead
        if k == len(group.steps):
            done.append(table)
            continue
        step = group.steps[k]
        run_steps(group.steps[k:k + 1], table, None, offset + k)
        for row in range(table.branches):
            part = table if table.branches == 1 else part_of(table, row, row + 1)
            if part.alive is not None and not part.alive.any():
                continue
            # Of equals the one farthest on comes first.
            made = () if isinstance(step, Fit) else writes(step)
            heappush(heap, (cost + _added(part, made, aim), -(k + 1), next(ticket), part))
    return None


def _best_of_stream(context: Context, group: Group, clock: Clock, aim: Array, most: int) -> Rows:
    """The nearest of all branches, block by block: where the goal's joints are placed last, each
    node has to be looked at anyway."""
    best: Rows | None = None
    for cells in stream_cells(context, group, clock.whole(slice(0, 1))):
        rows = Rows(group, cells.signs, cells.places, cells.alive, cells.margin, cells.values,
                    found=cells.found)
        near = _nearest_of(rows, aim, most)
        best = near if best is None else _nearest_of(_stacked([best, near]), aim, most)
    return best if best is not None else whole_group(context, group, clock)


def _added(table: Table, points: tuple[int, ...], aim: Array) -> float:
    total = 0.0
    for p in points:
        if p < len(aim) and not np.isnan(aim[p, 0]):
            total += float(((table.point(p)[:, 0, 0] - aim[p]) ** 2).sum())
    return total


def _nearest_of(rows: Rows, aim: Array, most: int) -> Rows:
    live = np.flatnonzero(rows.alive[:, 0])
    total = np.zeros(len(rows.codes))
    for j, place in zip(rows.group.joints, rows.places, strict=True):
        if not np.isnan(aim[j, 0]):
            total = total + ((place[:, :, 0].T - aim[j]) ** 2).sum(axis=1)
    return rows.take(live[np.argsort(total[live], kind="stable")][:most])


def _stacked(rows: list[Rows]) -> Rows:
    first = rows[0]

    def all_of(k: int) -> Array:
        wide = [np.broadcast_to(r.places[k], (len(r.places[k]), len(r.codes), 1)) for r in rows]
        whole: Array = np.concatenate(wide, axis=1)
        return whole

    return Rows(first.group, np.concatenate([r.codes for r in rows]),
                [all_of(k) for k in range(len(first.places))],
                np.concatenate([r.alive for r in rows]), np.concatenate([r.margin for r in rows]),
                {v: np.concatenate([np.broadcast_to(r.values[v], (len(r.codes), 1)) for r in rows])
                 for v in first.values})
