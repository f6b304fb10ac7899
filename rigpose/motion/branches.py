"""Finding branches: from what is known to every row of poses."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass, replace

import numpy as np

from rigpose.ground.budget import Budget, Watch, go_on
from rigpose.ground.words import Found, State, weaker
from rigpose.model.bends import measure_bends
from rigpose.model.equations import Array
from rigpose.model.rig import Joint, Rig
from rigpose.motion.assembled import assembled
from rigpose.motion.branchset import Branches
from rigpose.motion.gathered import Gathering
from rigpose.motion.motion import Event
from rigpose.motion.product import (
    Picks,
    Sorted,
    base_places,
    combined,
    kept,
    put,
    taken,
)
from rigpose.motion.refusals import refuse_loose, useless_targets
from rigpose.solve.births import follow_all
from rigpose.solve.clock import Clock, sampled
from rigpose.solve.deadcentre import Pass
from rigpose.solve.flow import has_choice, writes
from rigpose.solve.knowns import Given, Knowns, Wished, read_knowns
from rigpose.solve.plan import Group, Plan, Step
from rigpose.solve.planner import plan_for
from rigpose.solve.regular import shown_margin
from rigpose.solve.rest import Rest, find_rest
from rigpose.solve.rows import Rows, survey
from rigpose.solve.search import Context
from rigpose.solve.stepping import enumerate_rows
from rigpose.solve.stream import all_cells

MOST_TIES = 1 << 14
"""Ties among more branches keep the order of placing."""


def find_branches(
    rig: Rig, drives: Given | None = None, targets: Wished | None = None, *,
    budget: Budget | None = None, watch: Watch | None = None, mirrors: bool = True,
) -> Branches:
    """Every branch that meets the drives and targets, nearest to the rest pose first.

    drives : drive name to one number or (n_frames,), degrees or the rig's unit
    targets : joint name to (dim,), (n_frames, dim), or a table of axes such as ``{"y": 2.0}``
    budget : how many branches are held (4,096 unless it says more); ``found`` tells a cut
    mirrors : False leaves out the later of two mirror images

    Over several frames each branch is a row: a motion that follows the mechanism through dead
    centres. Raises BadInput for unknown names, values outside ranges, and where something can
    still move. What can't be reached is a result with no branches.
    """
    knowns = read_knowns(rig, drives, targets)
    rest = find_rest(rig)
    frames = np.arange(knowns.frames, dtype=np.float64)
    clock = sampled(rest.equations, knowns)
    found = branches_on(rest, clock, frames, budget or Budget(), watch)
    return found if mirrors else without_mirrors(found)


def without_mirrors(found: Branches) -> Branches:
    """The same set with one of each pair of mirror images, the nearer to rest."""
    keep = [k for k, other in enumerate(found.mirror_of) if other is None or other >= k]
    return found.take(keep)


def plan_of(rest: Rest, knowns: Knowns) -> Plan:
    """The plan for what is known; raises BadInput where something can still move."""
    plan = plan_for(rest.rig, knowns.drive_names, knowns.target_names)
    if plan.loose:
        refuse_loose(rest, plan, knowns)
    return plan


@dataclass(frozen=True)
class Search:
    """A set of branches with the groups' rows behind it."""

    branches: Branches
    groups: tuple[Sorted, ...]
    picks: Picks


def branches_on(rest: Rest, clock: Clock, frames: Array, budget: Budget,
                watch: Watch | None = None) -> Branches:
    """All branches over a clock's frames; ``frames (n_frames,)`` are their numbers."""
    return search_on(rest, clock, frames, budget, watch).branches


def search_on(rest: Rest, clock: Clock, frames: Array, budget: Budget,
              watch: Watch | None = None) -> Search:
    """As `branches_on`, with the rows of every group."""
    plan = plan_of(rest, clock.knowns)
    context = Context(rest, plan, budget)
    picks, done = [], Found.COMPLETE
    for k, group in enumerate(plan.groups):
        if done is Found.STOPPED or not go_on(watch, "groups", k, len(plan.groups)):
            # Half a pose is none: without this group there are no branches to show.
            done = Found.STOPPED
            picks.append(kept(rest, no_rows(group, clock.count, plan.eqs.dim)))
            continue
        rows, cut = group_rows(context, group, clock, budget, watch)
        done = weaker(done, Found.BUDGET if cut else rows.found)
        picks.append(kept(rest, rows))
    return made_from(context, clock, frames, picks, done)


def no_rows(group: Group, frames: int, dim: int) -> Rows:
    """A group of which nothing was found."""
    return Rows(group, np.zeros((0, group.bits), dtype=np.int16),
                [np.zeros((dim, 0, frames)) for _ in group.joints],
                np.zeros((0, frames), dtype=bool), np.zeros((0, frames)))


def group_rows(context: Context, group: Group, clock: Clock, budget: Budget,
               watch: Watch | None) -> tuple[Rows, bool]:
    """All rows of one group, and whether the budget cut them short."""
    if clock.count == 1:
        cells, cut = all_cells(context, group, clock.whole(slice(0, 1)), budget.poses)
        return Rows(group, cells.signs, cells.places, cells.alive, cells.margin, cells.values,
                    found=cells.found, turning=cells.turning), cut
    if not group.binary:
        return enumerate_rows(context, group, clock, watch), False
    rows, meets = survey(context, group, clock)
    if not meets or not len(rows.codes):
        return rows, False
    return follow_all(context, group, clock, rows), False


def made(context: Context, clock: Clock, frames: Array, picks: Sequence[Sorted],
         found: Found) -> Branches:
    """The product of the groups' rows as a set of branches, nearest to rest first."""
    return made_from(context, clock, frames, picks, found).branches


def made_from(context: Context, clock: Clock, frames: Array, picks: Sequence[Sorted],
              found: Found) -> Search:
    """As `made`, with the rows of every group."""
    rest, plan, eqs = context.rest, context.plan, context.plan.eqs
    base, base_alive = base_places(context, clock)
    mixed = combined(rest, picks, base_alive, context.budget.poses)
    if mixed.cut:
        found = weaker(found, Found.BUDGET)
    mixed = _shown(context, clock, picks, mixed)
    one = Gathering(rest, picks, base) if clock.count == 1 else None

    def poses(some: Picks) -> Array:
        return one.poses(some) if one else assembled(rest, picks, some, base, clock.count)

    _ties_by_bends(rest.rig, mixed, poses)
    positions = poses(mixed)
    state = np.where(mixed.alive, np.uint8(State.MET), np.uint8(State.NONE))
    groups = tuple(tuple(eqs.rig.joint_names[j] for j in p.rows.group.joints) for p in picks)
    for array in (positions, state, mixed.margin):
        array.flags.writeable = False
    branches = Branches(
        rig=rest.rig, knowns=clock.knowns, frames=frames, positions=positions, state=state,
        margin=mixed.margin, found=found, groups=groups, choice=mixed.choice, count=mixed.count,
        size=rest.size, meets=mixed.meets, values=_read_off(rest, picks, mixed),
        events=_events(eqs.rig, frames, picks, mixed),
        notes=(*_open_rest(rest), *useless_targets(rest, plan), *_turning(eqs.rig, picks)),
        redundant=frozenset(plan.redundant), sides=one.sides(mixed, positions) if one else None)
    return Search(branches, tuple(picks), mixed)


def _shown(context: Context, clock: Clock, picks: Sequence[Sorted], mixed: Picks) -> Picks:
    """The branches with the margins to tell of them."""
    shown = [shown_margin(context, p.rows, clock) for p in picks]
    if all(m is p.rows.margin for m, p in zip(shown, picks, strict=True)):
        return mixed
    margin = np.ones(mixed.alive.shape, dtype=np.float32)
    for k, mine in enumerate(shown):
        margin = np.minimum(margin, mine[mixed.index[:, k]].astype(np.float32))
    return replace(mixed, margin=np.where(mixed.alive, margin, np.float32(np.nan)))


def _ties_by_bends(rig: Rig, mixed: Picks, posed: Callable[[Picks], Array]) -> None:
    """Put branches equally far from rest (mirror images, say) in the order of their bends."""
    equal = mixed.steps[1:] == mixed.steps[:-1]
    if not equal.any():
        return
    member = np.flatnonzero(np.concatenate([[False], equal]) | np.concatenate([equal, [False]]))
    if len(member) > MOST_TIES:
        return
    some = taken(mixed, member)
    first = np.argmax(some.alive, axis=1)
    signs = measure_bends(rig, posed(some)[np.arange(len(member)), first])
    # "left" and "after" come before "right" and "before", as names are read.
    put(mixed, member, taken(some, np.lexsort((*(-signs[:, ::-1].T), some.steps))))


def _open_rest(rest: Rest) -> tuple[str, ...]:
    """A sentence where the rig's own lengths contradict each other by more than its slack."""
    if rest.assembles:
        return ()
    return (f'the rig does not close: "{rest.worst}" is off by {rest.misfit * rest.size:.4g} '
            f"{rest.rig.unit} at rest; slack = {rest.misfit * 1.01:.2g} would let it pass",)


def _turning(rig: Rig, picks: Sequence[Sorted]) -> tuple[str, ...]:
    """A sentence for each joint that turns freely in poses of its own: where two others lie on
    each other, or in space with a whole part that lies folded back."""
    found = sorted({t for p in picks for t in p.rows.turning})
    lines = [f"in some poses {_named(rig.joints[joint])} turns freely ({', '.join(parts)}): "
             "such poses are not listed"
             for joint, parts in found if joint < len(rig.joints)]
    return tuple(dict.fromkeys(lines))


def _named(joint: Joint) -> str:
    return "a part" if joint.helper else f'"{joint.name}"'


def _read_off(rest: Rest, picks: Sequence[Sorted], mixed: Picks) -> dict[str, Array]:
    eqs = rest.equations
    out = {}
    for g, p in enumerate(picks):
        for v, array in p.rows.values.items():
            wide = array if len(array) == 1 else array[mixed.index[:, g]]
            out[eqs.values[v]] = wide / eqs.unit[v]
    return out


def _events(rig: Rig, frames: Array, picks: Sequence[Sorted],
            mixed: Picks) -> tuple[tuple[Event, ...], ...]:
    if not any(p.rows.passes for p in picks):
        return ()
    by_row: list[dict[int, list[Event]]] = []
    for pick in picks:
        mine: dict[int, list[Event]] = {}
        choices = choice_steps(pick.rows.group)
        for p in pick.rows.passes:
            if not p.held:
                mine.setdefault(p.row, []).append(_event(rig, frames, choices[p.choice], p))
        by_row.append(mine)
    return tuple(
        tuple(sorted((e for g, mine in enumerate(by_row) for e in mine.get(int(row[g]), [])),
                     key=lambda e: e.frame))
        for row in mixed.index)


def choice_steps(group: Group) -> list[Step]:
    """The steps with choices, in the order of their numbers."""
    return [s for s in group.steps if has_choice(s)]


def _event(rig: Rig, frames: Array, step: Step, p: Pass) -> Event:
    joints = tuple(rig.joint_names[j] for j in writes(step) if j < len(rig.joints))
    at = float(np.interp(p.time, np.arange(len(frames)), frames))
    return Event(at, p.kind, joints, step.parts)
