"""Branch and prune for one group of a plan, over all frames at once.

The first run takes every crossing at its word. Frames in which some crossing is close to a dead
centre are run again with error bounds carried along, and what rounding has left is polished.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, field, replace
from functools import cached_property
from typing import Any

import numpy as np
from numpy.typing import NDArray

from rigpose.ground.budget import Budget
from rigpose.ground.words import Found, weaker
from rigpose.model.equations import Array
from rigpose.solve import runspace  # noqa: F401 - registers the steps of space
from rigpose.solve.plan import Group, Plan
from rigpose.solve.polish import polish
from rigpose.solve.rest import Rest
from rigpose.solve.run import Ways, run_steps
from rigpose.solve.table import Inputs, Table
from rigpose.solve.tree import Tree, tree_of

Mask = NDArray[np.bool_]
MANY = 1 << 11
"""Branches of one frame above which they are kept as the tree that they grew in."""


@dataclass
class Cells:
    """Poses of one group: ``signs (B, bits)`` tell the branches, ``places`` holds for every
    joint of the group ``(2, B or 1, F)``; both may be a tree. ``alive`` and ``margin`` are
    ``(B, F)``; ``sines`` are the squared sines of every choice ``(B or 1, F)``; ``values`` those
    read off on the way."""

    group: Group
    signs: NDArray[np.int16] | Tree
    places: Sequence[Array]
    alive: Mask
    margin: Array
    sines: list[Array]
    found: Found = Found.COMPLETE
    values: dict[int, Array] = field(default_factory=dict)
    turning: frozenset[tuple[int, tuple[str, ...]]] = frozenset()

    @property
    def codes(self) -> NDArray[np.int16]:
        """The signs of every choice ``(B, bits)``."""
        if isinstance(self.signs, Tree):
            self.signs = self.signs.codes()
        return self.signs

    @property
    def branches(self) -> int:
        """How many."""
        return len(self.alive)


@dataclass(frozen=True)
class Context:
    """What every run of one plan shares."""

    rest: Rest
    plan: Plan
    budget: Budget = field(default_factory=Budget)

    @cached_property
    def rounding(self) -> float:
        """What a placing may be off by: of its own, and of the file's coordinates, which are
        known to four units in the last place of the largest."""
        far = float(np.abs(self.rest.positions).max(initial=0.0))
        of_file = 4.0 * float(np.spacing(far)) / self.plan.eqs.scale
        return self.rest.tolerances.rounding * self.rest.reach + of_file

    def table(self, inputs: Inputs, careful: bool) -> Table:
        """An empty table with the pins in."""
        tol, reach = self.rest.tolerances, self.rest.reach
        table = Table(self.plan.eqs, inputs, careful, tol.slack, reach, self.rounding,
                      close=tol.close, budget=self.budget)
        for j in np.flatnonzero(self.plan.eqs.pinned):
            table.put(int(j), self.plan.eqs.at[j].reshape(-1, 1, 1))
        return table


def base_table(context: Context, inputs: Inputs, careful: bool, **more: object) -> Table:
    """The steps that depend on known things only."""
    table = context.table(inputs, careful)
    for name, value in more.items():
        setattr(table, name, value)
    run_steps(context.plan.base, table, None)
    return table


def shared_base(context: Context, inputs: Inputs, **more: object) -> Table:
    """The fast base table of some inputs, run once for all groups."""
    alone = len(context.plan.groups) < 2 and inputs.frames > 1
    if context.plan.reads_values or alone or "guess" in more:
        return base_table(context, inputs, False, **more)
    if inputs.base is None:
        inputs.base = base_table(context, inputs, False, **more)
    return inputs.base


def group_table(base: Table, rows: int | None) -> Table:
    """A table for one group that starts from the base's points."""
    table = Table(base.eqs, base.inputs, base.careful, base.slack, base.reach, base.rounding,
                  close=base.close, hints=base.hints, consecutive=base.consecutive,
                  guess=base.guess, budget=base.budget)
    table.points, table.values = dict(base.points), dict(base.values)
    table.level_of, table.bounds = dict(base.level_of), dict(base.bounds)
    table.bound_level, table.made = dict(base.bound_level), dict(base.made)
    table.alive, table.margin = base.alive, base.margin
    table.killer, table.turning = base.killer, set(base.turning)
    table.heights_wanted = base.heights_wanted
    if rows is not None:
        table.branches = rows
    return table


def cells_of(group: Group, table: Table) -> Cells:
    """What a run has found."""
    frames = table.inputs.frames
    shape = (table.branches, frames)
    alive = np.ones(shape, dtype=bool) if table.alive is None else table.alive
    margin = np.ones(shape) if table.margin is None else table.margin
    missing = [j for j in group.joints if j not in table.points]
    if missing:
        nothing = np.full((table.eqs.dim, table.branches, frames), np.nan)
        for j in missing:
            table.put(j, nothing)
    signs: NDArray[np.int16] | Tree
    places: Sequence[Array]
    if frames == 1 and table.branches > MANY:
        signs = places = tree_of(table, group.joints)
    else:
        codes = [np.broadcast_to(table.spread(c, level, 0), shape[:1]) for c, level in table.codes]
        signs = np.array(codes, dtype=np.int16).reshape(len(codes), table.branches).T
        places = [table.point(j) for j in group.joints]
    return Cells(
        group, signs, places,
        np.broadcast_to(alive, shape), np.broadcast_to(margin, shape),
        table.sines, table.found, {v: table.value(v) for v in table.values},
        frozenset(table.turning),
    )


def run_group(
    context: Context, group: Group, base: Table, ways: Ways = None, rows: int | None = None
) -> tuple[Cells, Table]:
    """One run, fast or careful as the base table is."""
    table = group_table(base, rows)
    run_steps(group.steps, table, ways, len(context.plan.base))
    return cells_of(group, table), table


def search(
    context: Context, group: Group, inputs: Inputs, ways: Ways = None, rows: int | None = None,
    **more: object,
) -> Cells:
    """All branches of a group over the inputs' frames (or the rows that ``ways`` names)."""
    base = shared_base(context, inputs, **more)
    cells, table = run_group(context, group, base, ways, rows)
    flagged = table.flagged
    if base.flagged is not None:
        flagged = base.flagged if flagged is None else flagged | base.flagged
    if flagged is None or not flagged.any():
        return cells
    if context.plan.reads_values:
        # Values read off frame by frame go on from one frame to the next: run all of them.
        flagged = np.ones_like(flagged)
    return _again(context, group, inputs, ways, rows, cells, np.flatnonzero(flagged), more)


def _part(array: Array, columns: NDArray[np.intp]) -> Array:
    return array if array.shape[-1] == 1 else array[..., columns]


def _again(
    context: Context, group: Group, inputs: Inputs, ways: Ways, rows: int | None, cells: Cells,
    columns: NDArray[np.intp], more: dict[str, object],
) -> Cells:
    """Run the frames near dead centres with error bounds, polish them and put them in."""
    some = inputs.part(columns)
    guess = more.get("guess")
    if isinstance(guess, np.ndarray):
        more = {**more, "guess": guess[:, columns]}
    base = base_table(context, some, True, **more)
    mine = None if ways is None else {k: _part(v, columns) for k, v in ways.items()}
    careful, _ = run_group(context, group, base, mine, rows)
    polish(context.rest, context.plan, careful, base, some)
    if len(columns) == inputs.frames:
        return careful
    if ways is not None:
        return _put(cells, careful, columns, np.arange(len(cells.codes)))
    return _merge(cells, careful, columns)


def _full(array: Any, shape: tuple[int, ...]) -> Any:
    """A writable copy of the given shape."""
    return np.array(np.broadcast_to(array, shape))


def _put(cells: Cells, careful: Cells, columns: NDArray[np.intp], rows: NDArray[np.intp]) -> Cells:
    b, f = cells.alive.shape
    at = np.ix_(rows, columns)
    places = []
    for mine, theirs in zip(cells.places, careful.places, strict=True):
        full = _full(mine, (len(mine), b, f))
        full[:, at[0], at[1]] = np.broadcast_to(theirs, (len(full), len(rows), len(columns)))
        places.append(full)
    alive, margin = _full(cells.alive, (b, f)), _full(cells.margin, (b, f))
    alive[at], margin[at] = careful.alive, careful.margin
    sines = []
    for mine, theirs in zip(cells.sines, careful.sines, strict=True):
        full = _full(mine, (b, f))
        full[at] = np.broadcast_to(theirs, (len(rows), len(columns)))
        sines.append(full)
    return replace(cells, places=places, alive=alive, margin=margin, sines=sines,
                   found=weaker(cells.found, careful.found),
                   turning=cells.turning | careful.turning)


def _none_like(cells: Cells, frames: int) -> Cells:
    """A run that lost all its branches before its last crossing, as no branches at all."""
    return Cells(cells.group, cells.codes[:0],
                 [np.zeros((len(p), 0, frames)) for p in cells.places],
                 np.zeros((0, frames), dtype=bool), np.zeros((0, frames)),
                 [np.zeros((0, frames)) for _ in cells.sines], cells.found)


def _merge(cells: Cells, careful: Cells, columns: NDArray[np.intp]) -> Cells:
    """Branches of both runs by their codes; those of one run are dead in the other's frames."""
    if cells.codes.shape[1] < careful.codes.shape[1]:
        cells = _none_like(careful, cells.alive.shape[1])
    elif careful.codes.shape[1] < cells.codes.shape[1]:
        careful = _none_like(cells, len(columns))
    b, f = cells.alive.shape
    everything = np.concatenate([cells.codes, careful.codes])
    if not len(everything):
        return cells
    codes, where = np.unique(everything, axis=0, return_inverse=True)
    mine, theirs = where.ravel()[:b], where.ravel()[b:]
    n = len(codes)

    def grown(array: Any, fill: float | bool) -> Any:
        lead = array.shape[:-2]
        out = np.full((*lead, n, f), fill, dtype=array.dtype)
        out[..., mine, :] = np.broadcast_to(array, (*lead, b, f))
        out[..., columns] = fill
        return out

    wide = Cells(
        cells.group, codes, [grown(p, np.nan) for p in cells.places],
        grown(cells.alive, False), grown(cells.margin, np.nan),
        [grown(np.broadcast_to(s, (b, f)), np.nan) for s in cells.sines], cells.found, cells.values,
    )
    return _put(wide, careful, columns, theirs)
