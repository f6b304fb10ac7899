"""Branches of one frame as a stream, for sets too large to hold."""

from __future__ import annotations

from collections.abc import Iterator

import numpy as np

from rigpose.ground.budget import Budget, Watch, go_on
from rigpose.ground.words import Found, weaker
from rigpose.model.rig import Rig
from rigpose.motion.branches import made, plan_of
from rigpose.motion.branchset import Branches
from rigpose.motion.product import Sorted, kept
from rigpose.solve.clock import Clock, sampled
from rigpose.solve.knowns import Given, Wished, read_knowns
from rigpose.solve.plan import Group
from rigpose.solve.rest import find_rest
from rigpose.solve.rows import Rows
from rigpose.solve.search import Cells, Context
from rigpose.solve.stream import all_cells, stream_cells

EVERYTHING = 1 << 62


def stream_branches(rig: Rig, drives: Given | None = None, targets: Wished | None = None, *,
                    watch: Watch | None = None) -> Iterator[Branches]:
    """Every branch of one frame in blocks, each nearest to rest first within itself.

    Arguments as in `find_branches`, one number each. Blocks come in the order of placing, so
    that no more than a block is in memory; a group's branches besides the largest are held.
    Raises BadInput like `find_branches`.
    """
    context, clock = single_frame(rig, drives, targets)
    groups = sorted(context.plan.groups, key=lambda g: -g.bits)
    held = {id(g): kept(context.rest, whole_group(context, g, clock)) for g in groups[1:]}
    done = 0
    for rows in _blocks(context, groups[0] if groups else None, clock):
        picks = [held.get(id(g), rows) for g in context.plan.groups]
        found = Found.COMPLETE
        for pick in picks:
            found = weaker(found, pick.rows.found)
        block = made(context, clock, np.zeros(1), picks, found)
        done += len(block)
        if len(block):
            yield block
        if not go_on(watch, "branches", done, done):
            return


def whole_group(context: Context, group: Group, clock: Clock) -> Rows:
    """All branches of one group at one frame, held."""
    return _rows(all_cells(context, group, clock.whole(slice(0, 1)), EVERYTHING)[0])


def single_frame(rig: Rig, drives: Given | None, targets: Wished | None) -> tuple[Context, Clock]:
    """The context and clock of one pose."""
    knowns = read_knowns(rig, drives, targets)
    rest = find_rest(rig)
    plan = plan_of(rest, knowns)
    return Context(rest, plan, Budget(poses=EVERYTHING)), sampled(rest.equations, knowns)


def _blocks(context: Context, group: Group | None, clock: Clock) -> Iterator[Sorted]:
    if group is None:
        empty = Rows(Group((), (), 0, True), np.zeros((1, 0), dtype=np.int16), [],
                     np.ones((1, 1), dtype=bool), np.ones((1, 1)))
        yield kept(context.rest, empty)
        return
    for cells in stream_cells(context, group, clock.whole(slice(0, 1))):
        yield kept(context.rest, _rows(cells))


def _rows(cells: Cells) -> Rows:
    return Rows(cells.group, cells.signs, cells.places, cells.alive, cells.margin, cells.values,
                found=cells.found, turning=cells.turning)
