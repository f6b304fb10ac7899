"""Branch and prune one branch at a time, in plain numbers: for groups of many joints with few
branches alive, where arrays of a few elements would cost more than the arithmetic.

Depth first; of each choice the way not taken is kept. Error bounds are carried along all the
while, so that crossings close to a dead centre need no second look.
"""

from __future__ import annotations

from dataclasses import dataclass, field, replace
from math import dist

import numpy as np

from rigpose.ground.words import Found
from rigpose.kernels.plain import Place
from rigpose.model.equations import Array
from rigpose.solve.flow import writes
from rigpose.solve.plainsteps import Choice, State, Taker, taker_of
from rigpose.solve.plan import Fit, Group
from rigpose.solve.search import Cells, Context
from rigpose.solve.table import Table

LONG = 64
"""Choices one after another from which on a group is searched so."""
MOST_TRIES = 16
"""Steps tried, as many times those of the plan, after which arrays do better."""
MOST_MORE = 1 << 19
"""Steps tried at most after the plan has been gone through once."""


@dataclass
class Walk:
    """A search under way: the ways not taken, with the step after them, the margin and the cost
    before; the signs taken; and what was found: places, signs and margin."""

    state: State
    signs: list[int]
    waiting: list[tuple[int, Choice, int, float, float]] = field(default_factory=list)
    found: list[tuple[list[Place], list[int], float]] = field(default_factory=list)


def search_alone(context: Context, group: Group, base: Table, most: int,
                 aim: Array | None = None) -> Cells | None:
    """The branches of one frame, or None where this is not the way to find them: few choices, a
    step that has no plain form, more than ``most`` branches, too many tries.

    aim : (n_joints, dim), NaN where a joint doesn't count: then only the branch nearest to it, or
    the nearest found where the tries come to an end
    """
    if group.bits <= LONG or not group.binary or base.inputs.frames != 1 or (
            base.alive is not None and not base.alive.all()):
        return None
    takers: list[Taker] = []
    for step in group.steps:
        taker = taker_of(step, base)
        if taker is None:
            return None
        takers.append(taker)
    walk = Walk(_state(base, context.plan.points), [0] * group.bits)
    costs = _goals(group, aim)
    ended = _run(walk, takers, costs, most, aim is not None)
    if not ended and (aim is None or not walk.found):
        return None
    cells = _cells(context, group, walk, base)
    return cells if ended else replace(cells, found=Found.BUDGET)


def _state(base: Table, points: int) -> State:
    state = State([()] * points, [0.0] * points, 1.0)
    for p, array in base.points.items():
        if p >= 0:
            state.place[p] = tuple(array[:, 0, 0].tolist())
            state.bound[p] = float(np.max(base.bounds.get(p, 0.0)))
    if base.margin is not None:
        state.margin = float(base.margin.min())
    return state


def _goals(group: Group, aim: Array | None) -> list[tuple[tuple[int, Place], ...]]:
    """For each step the joints that it places, with where they should be."""
    if aim is None:
        return [() for _ in group.steps]
    known = ~np.isnan(aim[:, 0])
    return [() if isinstance(step, Fit) else
            tuple((p, tuple(aim[p].tolist())) for p in writes(step)
                  if p < len(aim) and known[p]) for step in group.steps]


def _run(walk: Walk, takers: list[Taker], costs: list[tuple[tuple[int, Place], ...]], most: int,
         nearest: bool) -> bool:
    """Whether the search came to its end."""
    state, k, cost, least = walk.state, 0, 0.0, float("inf")
    tries, place = min(MOST_TRIES * len(takers), len(takers) + MOST_MORE), walk.state.place
    while tries > 0:
        while k < len(takers):
            tries -= 1
            made = takers[k](state)
            if made is None:
                return False
            if made is False:
                break
            if made is not True:
                sign = _nearer(made, costs[k]) if nearest else 1
                walk.waiting.append((k, made, -sign, state.margin, cost))
                _take(walk, made, sign)
            for p, goal in costs[k]:
                cost += _gap(place[p], goal)
            k += 1
            if cost >= least:
                break
        else:
            if nearest:
                walk.found.clear()
                least = cost
            elif len(walk.found) == most:
                return False
            walk.found.append((list(place), list(walk.signs), state.margin))
        back = _back(walk, costs, least)
        if back is None:
            return True
        k, cost = back
    return False


def _back(walk: Walk, costs: list[tuple[tuple[int, Place], ...]], least: float) -> (
        tuple[int, float] | None):
    """Takes the last way not taken that costs less than the least so far; the step after it and
    its cost, or None where there is none."""
    while walk.waiting:
        k, other, sign, margin, cost = walk.waiting.pop()
        walk.state.margin = margin
        _take(walk, other, sign)
        for p, goal in costs[k]:
            cost += _gap(walk.state.place[p], goal)
        if cost < least:
            return k + 1, cost
    return None


def _take(walk: Walk, choice: Choice, sign: int) -> None:
    state = walk.state
    state.place[choice.dst] = choice.one if sign > 0 else choice.other
    state.bound[choice.dst] = choice.bound
    state.margin = min(state.margin, choice.margin)
    walk.signs[choice.bit] = sign


def _nearer(choice: Choice, goals: tuple[tuple[int, Place], ...]) -> int:
    for p, goal in goals:
        if p == choice.dst:
            return 1 if _gap(choice.one, goal) <= _gap(choice.other, goal) else -1
    return 1


def _gap(a: Place, b: Place) -> float:
    far = dist(a, b)
    return far * far


def _cells(context: Context, group: Group, walk: Walk, base: Table) -> Cells:
    count, dim = len(walk.found), context.plan.eqs.dim
    places = np.array([[place[j] for j in group.joints] for place, _, _ in walk.found],
                      dtype=np.float64).reshape(count, len(group.joints), dim)
    signs = np.array([s for _, s, _ in walk.found], dtype=np.int16).reshape(count, group.bits)
    margin = np.array([m for _, _, m in walk.found]).reshape(count, 1)
    return Cells(group, signs, list(places.transpose(1, 2, 0)[..., None]),
                 np.ones((count, 1), dtype=bool), margin, [],
                 values={v: base.value(v) for v in base.values},
                 turning=frozenset(base.turning))
