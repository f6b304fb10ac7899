"""Splitting an order into what is known anyway and groups that share no unknown."""

from __future__ import annotations

from collections.abc import Iterable

from msgspec.structs import replace

from rigpose.model.equations import Equations
from rigpose.solve.flow import POINTS_ONLY, has_choice, reads, value_written, values_read, writes
from rigpose.solve.plan import Check, Cluster, Group, Step
from rigpose.solve.values import joints_of_value

Node = int
"""A point, or below zero a value: -1 less its number."""


class Sets:
    """Union-find over numbers."""

    def __init__(self) -> None:
        self.parent: dict[int, int] = {}

    def find(self, x: int) -> int:
        parent = self.parent
        above = parent.setdefault(x, x)
        while above != x:
            parent[x] = parent[above]
            x = parent[x]
            above = parent[x]
        return x

    def join(self, nodes: list[int]) -> None:
        first = self.find(nodes[0])
        for x in nodes[1:]:
            self.parent[self.find(x)] = first


def _read(step: Step, eqs: Equations) -> list[Node]:
    return [*reads(step), *(-1 - v for v in values_read(step, eqs))]


def _written(step: Step) -> list[Node]:
    value = value_written(step)
    return [*writes(step)] if value < 0 else [*writes(step), -1 - value]


def _read_fully(step: Step, eqs: Equations) -> list[Node]:
    ins = _read(step, eqs)
    if value_written(step) >= 0 and not values_read(step, eqs):
        return ins + joints_of_value(eqs, value_written(step))
    return [*ins, *step.around] if isinstance(step, Cluster) else ins


def grouped(
    eqs: Equations, steps: list[Step], checks: Iterable[Check]
) -> tuple[tuple[Step, ...], tuple[Group, ...]]:
    """Base steps and groups, each with its checks as early as they can stand."""
    ordered = _interleave(eqs, steps, list(checks))
    sets = Sets()
    owner_of: dict[Node, int] = {}
    owner: list[int] = []
    plain = not eqs.values
    for number, step in enumerate(ordered):
        kind = type(step)
        simple = kind in POINTS_ONLY or (plain and kind is not Cluster)
        read = reads(step) if simple else _read_fully(step, eqs)
        met = {owner_of[x] for x in read if x in owner_of}
        if not met and not has_choice(step):
            owner.append(-1)
            continue
        first = min(met) if met else number
        if len(met) > 1:
            sets.join([first, *met])
        for x in writes(step) if simple else _written(step):
            owner_of[x] = first
        owner.append(first)
    base: list[Step] = []
    members: dict[int, list[Step]] = {}
    for step, mine in zip(ordered, owner, strict=True):
        (base if mine < 0 else members.setdefault(sets.find(mine), [])).append(step)
    return tuple(base), tuple(_group(eqs, m) for m in members.values())


def _interleave(eqs: Equations, steps: list[Step], checks: list[Check]) -> list[Step]:
    """Every check right after the step that completes it."""
    if not checks:
        return steps
    plain = not eqs.values
    born = {x: k for k, step in enumerate(steps)
            for x in (writes(step) if plain else _written(step))}
    after: dict[int, list[Check]] = {}
    for check in checks:
        read = check.points if plain else _read(check, eqs)
        last = max([born.get(x, -1) for x in read], default=-1)
        after.setdefault(last, []).append(check)
    out: list[Step] = list(after.get(-1, []))
    for k, step in enumerate(steps):
        out.append(step)
        out += after.get(k, ())
    return out


def _group(eqs: Equations, steps: list[Step]) -> Group:
    numbered: list[Step] = []
    bits = 0
    for step in steps:
        if has_choice(step):
            numbered.append(replace(step, bit=bits))
            bits += 1
        else:
            numbered.append(step)
    joints = sorted({p for s in steps for p in writes(s) if p < eqs.n})
    return Group(steps=tuple(numbered), joints=tuple(joints), bits=bits,
                 binary=not any(isinstance(s, Cluster) for s in steps))
