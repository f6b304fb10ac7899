"""All branches of a group at one frame, in blocks: breadth-first inside a block of memory,
depth-first between blocks, so that 2^30 branches stream and never fill the memory."""

from __future__ import annotations

from collections.abc import Iterator
from copy import copy
from time import monotonic
from typing import Any

import numpy as np

from rigpose.ground.words import Found, weaker
from rigpose.solve.alone import LONG, search_alone
from rigpose.solve.longchains import bring_back
from rigpose.solve.plan import Check, Fit, Group
from rigpose.solve.polish import polish
from rigpose.solve.run import run_steps
from rigpose.solve.search import Cells, Context, base_table, cells_of, group_table, shared_base
from rigpose.solve.table import Inputs, Table

FEW = 64
"""Branches of a long chain up to which they are looked for one by one."""
BLOCK = 1 << 14
WIDE = 1 << 19
"""Branches of a block where all of them are held anyway."""


def stream_cells(context: Context, group: Group, inputs: Inputs, block: int = BLOCK) -> (
        Iterator[Cells]):
    """Blocks of branches, in the order of placing. ``inputs`` hold one frame.

    From the first block in which a crossing comes close to a dead centre on, error bounds are
    carried along and what rounding has left is polished.
    """
    seen = 0
    for table in _tables(context, group, inputs, False, block):
        if table.flagged is not None and table.flagged.any():
            break
        yield cells_of(group, table)
        seen += 1
    else:
        return
    base = base_table(context, inputs, True)
    for k, table in enumerate(_tables(context, group, inputs, True, block)):
        if k >= seen:
            cells = cells_of(group, table)
            # Corrected all at once, a long chain would take minutes.
            correct = bring_back if group.bits > LONG else polish
            correct(context.rest, context.plan, cells, base, inputs)
            yield cells


def _tables(context: Context, group: Group, inputs: Inputs, careful: bool, block: int) -> (
        Iterator[Table]):
    base = base_table(context, inputs, True) if careful else shared_base(context, inputs)
    base.heights_wanted = False  # a single frame passes no dead centre
    if base.alive is not None and not base.alive.any():
        return
    # A point of a branch takes as many numbers as the rig has dimensions, and some on the way.
    a_branch = 16 * context.plan.eqs.dim * max(context.plan.points, 1)
    block = max(1, min(block, int(context.budget.bytes // a_branch)))
    for table in _split(context, group, group_table(base, None), block):
        if base.flagged is not None:
            table.flagged = base.flagged
        yield table


def _split(context: Context, group: Group, table: Table, block: int) -> Iterator[Table]:
    """Tables with all branches, none much larger than a block: depth-first over their parts."""
    offset = len(context.plan.base)
    waiting = [(table, 0, 0)]  # with the step to run next and the first branch still to take
    while waiting:
        table, start, first = waiting.pop()
        if table.branches > block:
            if first + block < table.branches:
                waiting.append((table, start, first + block))
            table = part_of(table, first, first + block)
        for k in range(start, len(group.steps)):
            run_steps(group.steps[k:k + 1], table, None, offset + k)
            if table.branches == 0:
                break
            if table.branches > block and k + 1 < len(group.steps):
                waiting.append((table, k + 1, 0))
                break
        else:
            yield table
            continue
        if table.branches == 0 and (table.turning or table.flagged is not None):
            # Nothing is left, but what turns freely is to be told, and what died close to a
            # dead centre is to be looked at again.
            yield table


def part_of(table: Table, start: int, stop: int) -> Table:
    """Some of a table's branches, as a table of its own."""
    part = copy(table)
    for name in ("points", "values", "level_of", "bounds", "bound_level", "made"):
        setattr(part, name, dict(getattr(table, name)))
    for name in ("maps", "codes", "sines", "sine_bounds"):
        setattr(part, name, list(getattr(table, name)))
    part.renumber(np.arange(start, min(stop, table.branches)))
    return part


def all_cells(context: Context, group: Group, inputs: Inputs, most: int) -> tuple[Cells, bool]:
    """The branches of one frame as one value, at most about ``most``; whether that cut it short."""
    pieces: list[Cells] = []
    total, end = 0, monotonic() + context.budget.seconds
    alone = search_alone(context, group, shared_base(context, inputs), min(most, FEW))
    if alone is not None:
        return _settled(context, group, inputs, alone), False
    for cells in stream_cells(context, group, inputs, max(BLOCK, min(most, WIDE))):
        pieces.append(cells)
        total += cells.branches
        if total > most or monotonic() > end:
            return joined(pieces), True
    whole = joined(pieces) if pieces else _none(group, context.plan.eqs.dim)
    return _settled(context, group, inputs, whole), False


def _settled(context: Context, group: Group, inputs: Inputs, whole: Cells) -> Cells:
    """Long chains brought back to their lengths, and in doubt where rounding may have decided."""
    if group.bits > LONG:
        bring_back(context.rest, context.plan, whole, shared_base(context, inputs), inputs)
        held = sum(isinstance(s, Fit) for s in group.steps)
        if group.bits - held > LONG and any(isinstance(s, Check) for s in group.steps):
            # Rounding may have grown past what a check forgives: not a claim to make.
            doubt = Found.PROBABLY if whole.alive.any() else Found.SOME
            whole.found = weaker(whole.found, doubt)
    return whole


def _none(group: Group, dim: int) -> Cells:
    return Cells(group, np.zeros((0, group.bits), dtype=np.int16),
                 [np.zeros((dim, 0, 1)) for _ in group.joints], np.zeros((0, 1), dtype=bool),
                 np.zeros((0, 1)), [])


def joined(pieces: list[Cells]) -> Cells:
    """Blocks put together."""
    if len(pieces) == 1:
        return pieces[0]
    first = pieces[0]

    def whole(arrays: list[Any], axis: int) -> Any:
        wide = [np.broadcast_to(a, (*a.shape[:axis], c.branches, *a.shape[axis + 1:]))
                for a, c in zip(arrays, pieces, strict=True)]
        return np.concatenate(wide, axis=axis)

    places = [whole([c.places[k] for c in pieces], 1) for k in range(len(first.places))]
    values = {v: whole([c.values[v] for c in pieces], 0) for v in first.values}
    found = Found.COMPLETE
    for cells in pieces:
        found = weaker(found, cells.found)
    return Cells(first.group, np.concatenate([c.codes for c in pieces]), places,
                 np.concatenate([c.alive for c in pieces]),
                 np.concatenate([c.margin for c in pieces]), [], found, values,
                 frozenset[tuple[int, tuple[str, ...]]]().union(*(c.turning for c in pieces)))
