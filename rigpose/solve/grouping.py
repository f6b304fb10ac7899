"""Splitting an order into what is known anyway and groups that share no unknown."""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import replace

from rigpose.model.equations import Equations
from rigpose.solve.flow import has_choice, reads, value_written, values_read, writes
from rigpose.solve.plan import Check, Cluster, Group, Junction, Level, Meet, Step, Swing
from rigpose.solve.values import joints_of_value

Node = tuple[str, int]


class _Sets:
    """Union-find over points and values that depend on a choice."""

    def __init__(self) -> None:
        self.parent: dict[Node, Node] = {}

    def find(self, x: Node) -> Node:
        self.parent.setdefault(x, x)
        while self.parent[x] != x:
            self.parent[x] = self.parent[self.parent[x]]
            x = self.parent[x]
        return x

    def join(self, nodes: list[Node]) -> None:
        roots = [self.find(x) for x in nodes]
        for r in roots[1:]:
            self.parent[r] = roots[0]


def _nodes(step: Step, eqs: Equations) -> tuple[list[Node], list[Node]]:
    """Nodes read and written."""
    ins = [("p", p) for p in sorted(reads(step))]
    ins += [("v", v) for v in sorted(values_read(step, eqs))]
    outs = [("p", p) for p in writes(step)]
    if value_written(step) >= 0:
        outs.append(("v", value_written(step)))
    return ins, outs


def _reads_fully(step: Step, eqs: Equations, ins: list[Node]) -> list[Node]:
    if value_written(step) >= 0 and not values_read(step, eqs):
        return ins + [("p", j) for j in joints_of_value(eqs, value_written(step))]
    if isinstance(step, Cluster):
        return ins + [("p", j) for j in step.around]
    return ins


def grouped(
    eqs: Equations, steps: list[Step], checks: Iterable[Check]
) -> tuple[tuple[Step, ...], tuple[Group, ...]]:
    """Base steps and groups, each with its checks as early as they can stand."""
    ordered = _interleave(eqs, steps, list(checks))
    sets, many = _Sets(), set[Node]()
    owner: list[Node | None] = []
    for step in ordered:
        ins, outs = _nodes(step, eqs)
        touched = [x for x in _reads_fully(step, eqs, ins) if x in many]
        if has_choice(step) or touched:
            many.update(outs)
            sets.join([*touched, *outs])
            owner.append((touched + outs)[0])
        else:
            owner.append(None)
    base = tuple(s for s, o in zip(ordered, owner, strict=True) if o is None)
    members: dict[Node, list[Step]] = {}
    for step, node in zip(ordered, owner, strict=True):
        if node is not None:
            members.setdefault(sets.find(node), []).append(step)
    return base, tuple(_group(eqs, m) for m in members.values())


def _interleave(eqs: Equations, steps: list[Step], checks: list[Check]) -> list[Step]:
    """Every check right after the step that completes it."""
    born: dict[Node, int] = {}
    for k, step in enumerate(steps):
        born.update((("p", p), k) for p in writes(step))
        if value_written(step) >= 0:
            born["v", value_written(step)] = k
    after: dict[int, list[Check]] = {}
    for check in checks:
        last = max((born.get(x, -1) for x in _nodes(check, eqs)[0]), default=-1)
        after.setdefault(last, []).append(check)
    out: list[Step] = list(after.get(-1, []))
    for k, step in enumerate(steps):
        out.append(step)
        out += after.get(k, [])
    return out


def _group(eqs: Equations, steps: list[Step]) -> Group:
    numbered: list[Step] = []
    bits = 0
    for step in steps:
        if isinstance(step, (Meet, Junction, Swing, Level, Cluster)) and has_choice(step):
            numbered.append(replace(step, bit=bits))
            bits += 1
        else:
            numbered.append(step)
    joints = sorted({p for s in steps for p in writes(s) if p < eqs.n})
    return Group(steps=tuple(numbered), joints=tuple(joints), bits=bits,
                 binary=not any(isinstance(s, Cluster) for s in steps))
