"""Freedoms of rigs too large for dense algebra, by the order in which their joints are placed.

With nothing known the joints are placed that can be; then one after another is taken as given,
with as many coordinates as the curves that it lies on leave open. Each placing stands on conditions
that are independent at rest, so the matrix of all of them is triangular with regular blocks: where
no condition is left over the rig has exactly as many freedoms as coordinates were given, and every
first-order motion is a real one (implicit function theorem). Where conditions are left over that
given joints move, no count is told.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from itertools import combinations

import numpy as np
from numpy.typing import NDArray

from rigpose.model.equations import GROUND, Array, Equations
from rigpose.model.record import all_kept
from rigpose.solve.checks import checks_for
from rigpose.solve.flow import has_choice, on_curve, reads, writes
from rigpose.solve.grouping import Sets
from rigpose.solve.growth import PARALLEL, Locus
from rigpose.solve.plan import Check, Given, Line, Point, Step
from rigpose.solve.planner import Planner, finished, keep_plan, planner_for
from rigpose.solve.rest import Rest

Mask = NDArray[np.bool_]
INEQUALITIES = ("ram", "track", "fence", "hand")


@dataclass(frozen=True)
class Start:
    """A joint that was taken as given: ``free`` of its coordinates, the first of them ``axis``;
    ``drive`` is the number of a value that would do the same, -1 for none."""

    joint: int
    free: int
    axis: int
    drive: int


@dataclass(frozen=True)
class Order:
    """Joints taken as given; which joints move then, and of which it can't be told ``(n,)``; how
    many choices placing them has; which joints hang together."""

    starts: tuple[Start, ...]
    moves: Mask
    doubt: Mask
    choices: int
    sets: Sets


def order_of(rest: Rest) -> Order:
    """The order of a whole rig with nothing known."""
    nothing: tuple[frozenset[str], frozenset[tuple[str, int]]] = (frozenset(), frozenset())
    with all_kept():
        planner = planner_for(rest, frozenset(), frozenset())
        planner.run()
        if len(planner.ground.place) == rest.equations.n:
            keep_plan(rest.rig, *nothing, finished(rest, planner))
        return _Counting(planner).order()


class _Counting:
    """Places everything, taking joints as given where nothing else goes on."""

    def __init__(self, planner: Planner) -> None:
        self.planner = planner
        self.starts: list[Start] = []
        self.held: dict[int, set[Point]] = {}
        self.offered = self.loose = 0
        # Joints that a drive moves come first, so that what is given is what can be driven.
        eqs = planner.eqs
        self.driven = [*eqs.lines.joint.tolist(), *eqs.angles.line[:, 1].tolist()]
        self.driven += [j for v, k in eqs.ram_of.items() for j in planner.net.ends[k]]

    def order(self) -> Order:
        eqs, ground = self.planner.eqs, self.planner.ground
        first = len(ground.steps)
        while len(ground.place) < eqs.n:
            self._give()
            ground.run()
        if not self.starts:
            still = np.zeros(eqs.n, dtype=bool)
            return Order((), still, self._doubt(still), 0, Sets())
        moves, sets = _moving(eqs, ground.steps, self.held)
        choices = sum(map(has_choice, ground.steps[first:]))
        return Order(tuple(self.starts), moves, self._doubt(moves), choices, sets)

    def _doubt(self, moves: Mask) -> Mask:
        """Joints of surplus conditions that moving joints have to keep, unless all of them belong
        to one body; joints that stand at a dead centre; all, where values are tied."""
        planner, eqs, ground = self.planner, self.planner.eqs, self.planner.ground
        doubt = np.full(eqs.n, bool(eqs.tie_names))
        doubt[planner.forced] = True
        if not self.starts:
            return doubt
        used = ground.settled() | {("tie", t) for t in planner.settled_ties}
        for check in checks_for(eqs, planner.net, ground, frozenset(used)):
            joints = [p for p in check.points if p < eqs.n]
            if check.kind in INEQUALITIES or not moves[joints].any():
                continue
            if check.kind == "distance" and set.intersection(
                    *(set(planner.net.solids_on.get(j, ())) for j in joints)):
                continue
            doubt[joints] = True
        return doubt

    def _give(self) -> None:
        """Take the next joint as given: one that some curve holds, else any."""
        planner, ground, eqs = self.planner, self.planner.ground, self.planner.eqs
        joint = self._next()
        held = _independent(ground.loci.get(joint, []), eqs.dim)
        self.held[joint] = set[Point]().union(*(on_curve(x.curve) for x in held))
        for locus in held:
            ground.used.add(locus.uses)
            kind, number = locus.uses
            if kind == "solid" and sum(x.uses == locus.uses for x in held) == sum(
                    j in ground.place for j in planner.net.solids[number].local):
                ground._hold(number, [joint])
        normals = [np.asarray(x.normals[0], dtype=float) for x in held]
        line = len(held) == 1 and eqs.dim == 3 and isinstance(held[0].curve, Line)
        free = eqs.dim - len(held) - line
        way = _open_way(normals, eqs.dim, line)
        drive = self._drive(joint) if free == 1 else -1
        self.starts.append(Start(joint, free, int(np.argmax(np.abs(way))), drive))
        ground._placed(joint, joint, Given(joint, joint, parts=(eqs.rig.joint_names[joint],)))

    def _next(self) -> int:
        """A joint that some curve holds, best one that a drive moves; else any."""
        ground = self.planner.ground
        self.driven = [j for j in self.driven if j not in ground.place]
        for joint in self.driven:
            if ground.loci.get(joint) and self._drive(joint) >= 0:
                return int(joint)
        while self.offered < len(ground.offered):
            joint = ground.offered[self.offered]
            self.offered += 1
            if joint not in ground.place:
                return joint
        while self.loose in ground.place:
            self.loose += 1
        return self.loose

    def _drive(self, joint: int) -> int:
        """The number of a value that places a joint which one coordinate would place."""
        planner, place = self.planner, self.planner.ground.place
        eqs, net = planner.eqs, planner.net
        for k in net.rails_on.get(joint, ()):
            if int(eqs.lines.joint[k]) == joint and all(
                    int(j) == GROUND or int(j) in place for j in eqs.lines.along[k]):
                return int(eqs.lines.value[k])
        for k in net.cranks_on.get(joint, ()) if eqs.dim == 2 else ():
            around = (int(eqs.angles.line[k, 0]), *map(int, eqs.angles.base[k]))
            if int(eqs.angles.line[k, 1]) == joint and all(
                    j == GROUND or j in place for j in around):
                return int(eqs.angles.value[k])
        return next((net.value[k] for k, other in net.links.get(joint, ())
                     if net.value[k] >= 0 and other in place), -1)


def _independent(loci: list[Locus], dim: int) -> list[Locus]:
    """Curves that hold a joint independently of one another, fewer than place it."""
    if not loci or dim == 2:
        return loci[:1]
    lines = [x for x in loci if isinstance(x.curve, Line)]
    if lines:
        return lines[:1]
    for a, b in combinations(loci[:8], 2):
        if float(np.linalg.norm(np.cross(a.normals[0], b.normals[0]))) > PARALLEL:
            return [a, b]
    return loci[:1]


def _open_way(normals: list[Array], dim: int, line: bool) -> Array:
    """A direction that the curves of a joint leave open."""
    if not normals:
        return np.array([1.0, *[0.0] * (dim - 1)])
    first = normals[0]
    if line:
        return first
    if dim == 2:
        return np.array([-first[1], first[0]])
    way: Array = np.cross(first, normals[1]) if len(normals) == 2 else (
        np.eye(3)[int(np.argmin(np.abs(first)))])
    return way


def _moving(eqs: Equations, steps: list[Step],
            given: Mapping[int, set[Point]]) -> tuple[Mask, Sets]:
    """Which joints ``(n,)`` hang on those that were given, and which hang together so.

    given : joint to the points that its curves hang on
    """
    moving, sets = set(given), Sets()
    for step in steps:
        if isinstance(step, Check):
            continue
        made = writes(step)
        start = isinstance(step, Given) and step.joint in given
        read = (given[step.joint] if isinstance(step, Given) and start else reads(step)) & moving
        if read or start:
            moving.update(made)
            sets.join([*read, *made])
    out = np.zeros(eqs.n, dtype=bool)
    out[[p for p in moving if p < eqs.n]] = True
    return out, sets


def groups_of(order: Order) -> list[tuple[tuple[int, ...], tuple[Start, ...]]]:
    """Joints that move together without the others, with the starts among them."""
    members: dict[int, list[int]] = {}
    for j in np.flatnonzero(order.moves).tolist():
        members.setdefault(order.sets.find(j), []).append(j)
    starts: dict[int, list[Start]] = {}
    for s in order.starts:
        starts.setdefault(order.sets.find(s.joint), []).append(s)
    return [(tuple(joints), tuple(starts.get(k, ()))) for k, joints in members.items()]
