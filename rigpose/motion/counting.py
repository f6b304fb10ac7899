"""Counting branches, making all of them from one, and turning one bend over."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from rigpose.ground.budget import Budget
from rigpose.ground.errors import BadInput, Problem
from rigpose.ground.words import Found, weaker
from rigpose.model.bends import bends_of
from rigpose.model.rig import Rig
from rigpose.motion.branches import find_branches, made
from rigpose.motion.branchset import Branches
from rigpose.motion.nearest import nearest_rows
from rigpose.motion.product import kept
from rigpose.motion.streaming import single_frame
from rigpose.solve.clock import Clock
from rigpose.solve.knowns import Given, Wished
from rigpose.solve.plan import Group
from rigpose.solve.reflect import all_reflected, cuts_of
from rigpose.solve.rows import Rows
from rigpose.solve.search import Context
from rigpose.solve.stream import stream_cells

SAFE = 1e-6
"""With a margin below this, two reflections may be one pose: such sets are enumerated."""


@dataclass(frozen=True)
class Count:
    """How many branches there are: in each independent group, and altogether.

    how : for each group "partial reflections" or "enumerated"; ``found`` tells a cut
    """

    branches: int
    groups: tuple[int, ...]
    how: tuple[str, ...]
    found: Found


def count_branches(rig: Rig, drives: Given | None = None, targets: Wished | None = None, *,
                   budget: Budget | None = None) -> Count:
    """How many branches meet the drives and targets (of one frame).

    Groups whose every choice is a partial reflection are counted from one branch: 2 to the number
    of choices. Others are enumerated, up to the budget's poses. Raises BadInput like
    `find_branches`.
    """
    context, clock = single_frame(rig, drives, targets)
    most = (budget or Budget(poses=1 << 20)).poses
    groups, how, found = [], [], Found.COMPLETE
    for group in context.plan.groups:
        number = _by_reflections(context, group, clock)
        if number is None:
            number, state = _enumerated(context, group, clock, most)
            found = weaker(found, state)
            how.append("enumerated")
        else:
            how.append("partial reflections")
        groups.append(number)
    total = 1
    for number in groups:
        total *= number
    if not groups:
        total = len(find_branches(rig, drives, targets))
    return Count(total, tuple(groups), tuple(how), found)


def _by_reflections(context: Context, group: Group, clock: Clock) -> int | None:
    cuts = cuts_of(context.plan.eqs, group)
    if cuts is None:
        return None
    one = nearest_rows(context, group, clock, 1)
    if not len(one.codes):
        return 0
    return 2 ** len(cuts) if float(one.margin[0, 0]) > SAFE else None


def _enumerated(context: Context, group: Group, clock: Clock, most: int) -> tuple[int, Found]:
    total, found = 0, Found.COMPLETE
    for cells in stream_cells(context, group, clock.whole(slice(0, 1))):
        total += int(cells.alive.any(axis=1).sum())
        found = weaker(found, cells.found)
        if total > most:
            return total, Found.BUDGET
    return total, found


def branches_from_one(found: Branches, budget: Budget | None = None) -> Branches:
    """All branches of one frame from a single one, by partial reflections.

    Raises BadInput where ``found`` isn't one branch of one frame, where some choice is no
    partial reflection, and where there are more than the budget's poses.
    """
    if len(found) != 1 or len(found.frames) != 1:
        raise BadInput(Problem(found.rig.source, "branches", "one branch of one frame",
                               f"{len(found)} branches over {len(found.frames)} frames",
                               "use pick(…)"))
    knowns = found.knowns
    context, clock = single_frame(found.rig, knowns.drives, knowns.targets)
    pose = context.plan.eqs.inward(found.positions[0, 0])
    picks = [_turned_over(context, group, pose, float(found.margin[0, 0]), budget or Budget())
             for group in context.plan.groups]
    return made(context, clock, found.frames, [kept(context.rest, p) for p in picks], found.found)


def _turned_over(context: Context, group: Group, pose: np.ndarray, margin: float,
                 budget: Budget) -> Rows:
    cuts = cuts_of(context.plan.eqs, group)
    source = context.plan.eqs.rig.source
    if cuts is None:
        raise BadInput(Problem(source, "", "every choice is a partial reflection",
                               "a plate, rail, check or driven angle behind a choice",
                               "use find_branches"))
    if 2 ** len(cuts) > budget.poses:
        raise BadInput(Problem(source, "", f"at most {budget.poses} branches are held",
                               str(2 ** len(cuts)), "raise the budget's poses"))
    poses = all_reflected(pose, cuts)
    codes = np.ones((len(poses), group.bits), dtype=np.int16)
    for k in range(group.bits):
        codes[:, k] -= 2 * ((np.arange(len(poses)) >> k) & 1).astype(np.int16)
    places = [np.ascontiguousarray(poses[:, j].T[:, :, None]) for j in group.joints]
    alive = np.ones((len(poses), 1), dtype=bool)
    return Rows(group, codes, places, alive, np.full((len(poses), 1), margin))


def flip(found: Branches, branch: int | str, joint: str) -> Branches:
    """The branch in which one joint bends the other way and all other bends are kept.

    found : a whole set; branch : number or name of the one to start from
    Raises BadInput where the joint has no bend and where there is no such branch.
    """
    numbers = [found.joints[b.joint] for b in bends_of(found.rig)]
    if joint not in numbers:
        raise BadInput(Problem(found.rig.source, f'joint "{joint}"', "has a bend", "none",
                               f"joints with bends are {', '.join(numbers)}"))
    k = numbers.index(joint)
    start = found.pick(branch)
    signs = found.signs
    want = start.signs[0].copy()
    want[k] = -want[k]
    same = np.flatnonzero((signs == want).all(axis=1))
    if not len(same) or want[k] == 0:
        raise BadInput(Problem(found.rig.source, f'joint "{joint}"',
                               "can bend the other way with all else kept",
                               f"no such branch beside {start.names[0]}"))
    return found.take(same[:1])
