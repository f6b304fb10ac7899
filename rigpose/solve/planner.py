"""Finds the order in which joints can be placed for one set of known names.

Ground first, joint by joint; where that stops, floating parts that are rigid in themselves are
condensed to one body; bodies of known heading are shifted onto their curves; what is left is
split into the smallest blocks that must be solved together (Dulmage and Mendelsohn 1958;
Ait-Aoudia, Jegou and Michelucci 1993) with independence measured at the rest pose and close by.
"""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass, field
from itertools import count

import numpy as np

from rigpose.model.equations import Array, Equations
from rigpose.model.record import all_kept
from rigpose.model.rig import Rig
from rigpose.model.system import System
from rigpose.solve.blocks import smallest_block
from rigpose.solve.checks import check_key, checks_for
from rigpose.solve.fitting import with_fits
from rigpose.solve.flow import alive_steps, reads, writes
from rigpose.solve.grouping import grouped
from rigpose.solve.growth import Growth
from rigpose.solve.heading import turned_by_crank, turned_by_rails
from rigpose.solve.nearby import nearby
from rigpose.solve.net import Net, Solid
from rigpose.solve.plan import (
    Check,
    Cluster,
    Gauge,
    Plan,
    Step,
    Tied,
)
from rigpose.solve.rest import AGREE, DENSE, Rest, find_rest, giving_way
from rigpose.solve.spacegrowth import SpaceGrowth
from rigpose.solve.values import joints_of_value


@dataclass
class Planner:
    """State of one planning run."""

    eqs: Equations
    drives: frozenset[int]
    targets: frozenset[tuple[int, int]]
    poses: Array
    surplus: frozenset[str] = frozenset()
    looks: Array = field(init=False)
    points: count[int] = field(init=False)
    net: Net = field(init=False)
    ground: Growth = field(init=False)
    settled_ties: set[int] = field(default_factory=set)
    forced: list[int] = field(default_factory=list)

    def __post_init__(self) -> None:
        self.points = count(self.eqs.n)
        self.net = Net(self.eqs)
        # A large rig's two poses are the same: one is looked at.
        same = self.poses[0] is self.poses[1] or np.array_equal(self.poses[0], self.poses[1])
        self.looks = self.poses[:1] if same else self.poses
        kind = Growth if self.eqs.dim == 2 else SpaceGrowth
        self.ground = kind(self.net, self.looks, set(self.drives), self.points.__next__,
                           targets=self.targets, surplus=self.surplus)

    def run(self) -> None:
        """Place what can be placed."""
        ground = self.ground
        self._ties()
        ground.begin_ground()
        for k in range(len(self.eqs.angles.names)):
            if int(self.eqs.angles.value[k]) in ground.known:
                ground._push(0, k, "crank")
        while True:
            ground.run()
            if self._ties() or self._condense() or self._turned() or self._cluster():
                continue
            forced = ground.force()
            if forced is None:
                break
            self.forced.append(forced)

    # -- ties -----------------------------------------------------------------------------------

    def _ties(self) -> bool:
        """Values that a tie settles because all its others are known or can be read off."""
        moved = False
        again = True
        while again:
            again = False
            for t, row in enumerate(self.eqs.ties):
                if t in self.settled_ties:
                    continue
                values = [int(v) for v in np.flatnonzero(row)]
                open_ones = [v for v in values if v not in self.ground.known]
                readable = [v for v in open_ones if self._readable(v)]
                if len(open_ones) - len(readable) == 1:
                    last = next(v for v in open_ones if v not in readable)
                    self._settle(t, readable, last)
                    moved = again = True
                elif open_ones and len(open_ones) == len(readable):
                    self._read_off(t, readable)
        return moved

    def _read_off(self, t: int, readable: list[int]) -> None:
        """A tie all of whose values the places fix already: it is left to be checked."""
        name = self.eqs.tie_names[t]
        for v in readable:
            self.ground.steps.append(Gauge(value=v, parts=(self.eqs.values[v],)))
            self.ground.known.add(v)
            self.ground.used.add(("value", v))
        self.ground.steps.append(Check(kind="tie", index=t, points=(), parts=(name,)))
        self.settled_ties.add(t)

    def _settle(self, t: int, readable: list[int], last: int) -> None:
        name = self.eqs.tie_names[t]
        for v in readable:
            self.ground.steps.append(Gauge(value=v, parts=(self.eqs.values[v],)))
        self.ground.steps.append(Tied(value=last, tie=t, parts=(name,)))
        self.settled_ties.add(t)
        self.ground.learn(last)

    def _readable(self, value: int) -> bool:
        return all(j in self.ground.place for j in joints_of_value(self.eqs, value))

    # -- floating bodies --------------------------------------------------------------------------

    def _condense(self) -> bool:
        """Merge floating parts that place each other into bodies; True if any was made."""
        made = False
        placed = self.ground.place
        if len(placed) >= self.eqs.n:
            return False
        for number, solid in self._seeds():
            if number is not None and not any(
                number in self.net.solids_on[j] for j in solid.local
            ):
                continue
            if number is None and solid.uses & self.net.absorbed:
                continue
            if sum(j in placed for j in solid.local) > 1 or not self._may_grow(solid):
                continue
            grown = self._grow_from(number, solid)
            if grown is not None:
                self.ground.adopt(self.net.merge(grown))
                made = True
        return made

    def _seeds(self) -> Iterator[tuple[int | None, Solid]]:
        net, placed = self.net, self.ground.place
        yield from list(enumerate(net.solids))
        for k, (a, b) in enumerate(net.ends):
            if net.value[k] < 0 and not (a in placed and b in placed) and (
                    ("distance", k) not in net.absorbed):
                yield None, net.bone(k)

    def _may_grow(self, solid: Solid) -> bool:
        """Whether a body's own joints give another joint curves enough for a first placing."""
        net, local, dim = self.net, solid.local, self.eqs.dim
        curves: dict[int, int] = {}
        met: set[int] = set()
        for j in local:
            if j in net.cranks_on or (net.slots and j in net.rails_on):
                return True
            near = [other for _, other in net.links.get(j, ())]
            for number in net.solids_on.get(j, ()):
                other = net.solids[number].local
                if other is not local:
                    if number in met:
                        return True
                    met.add(number)
                    near += other
            for i in near:
                if i not in local:
                    curves[i] = curves.get(i, 0) + 1
                    if curves[i] >= dim:
                        return True
        return False

    def _grow_from(self, number: int | None, solid: Solid) -> Solid | None:
        # Rigid groups have at least one more joint that two parts of them hold; look for one
        # candidate before growing, so that long chains stay cheap.
        kind = Growth if self.eqs.dim == 2 else SpaceGrowth
        frame = kind(self.net, self.looks, set(self.ground.known), self.points.__next__,
                     ground=False, surplus=self.surplus)
        frame.seat(number, solid)
        frame.run()
        if len(frame.place) == len(solid.local):
            return None
        uses = frame.settled()
        checks = tuple(checks_for(self.eqs, self.net, frame, frozenset(uses)))
        uses |= {check_key(self.eqs, c) for c in checks}
        return Solid(solid.name, dict(frame.place), frozenset(uses), (*frame.steps, *checks))

    def _turned(self) -> bool:
        """Bodies of known heading in the plane."""
        return self.eqs.dim == 2 and (turned_by_crank(self.ground, self.points)
                                      or turned_by_rails(self.ground, self.points))

    # -- blocks -------------------------------------------------------------------------------

    def _cluster(self) -> bool:
        """The smallest block of joints that the rows between them and placed joints fix."""
        ground = self.ground
        known = frozenset(ground.known)
        system = System(self.eqs, known, tuple(sorted(self.targets)))
        block = smallest_block(system, self.poses, frozenset(ground.place))
        if block is None:
            return False
        names = tuple(dict.fromkeys(system.row_names[r] for r in block.square))
        ground.steps.append(Cluster(
            system=system, joints=block.joints, rows=block.rows, square=block.square,
            around=block.around, bit=0, parts=names))
        for number, solid in enumerate(self.net.solids):
            inside = [j for j in solid.local if j in block.joints or j in ground.place]
            # The frame of a condensed group has choices of its own, of which the block knows
            # nothing: whatever is inside it is left to be checked.
            if not solid.steps and any(j in block.joints for j in solid.local):
                ground._hold(number, inside)
        held = set(names)
        for k, name in enumerate(self.eqs.distances.names):
            if name in held and set(map(int, self.eqs.distances.ends[k])) & set(block.joints):
                ground.used.add(("distance", k))
        for k, name in enumerate(self.eqs.lines.names):
            if name in held:
                ground.used |= {("rail", k), ("value", int(self.eqs.lines.value[k]))}
        for k, name in enumerate(self.eqs.angles.names):
            if name in held:
                ground.used.add(("value", int(self.eqs.angles.value[k])))
        ground.used |= {("target", j * self.eqs.dim + a) for j, a in self.targets
                        if j in block.joints}
        for j in block.joints:
            ground.place[j] = j
        for j in block.joints:
            ground._arrived(j)
        return True


def planner_for(
    rest: Rest, drives: frozenset[int], targets: frozenset[tuple[int, int]]
) -> Planner:
    """A planner that has not run yet, for value numbers and (joint, axis) pairs to be known."""
    poses = nearby(rest)
    return Planner(rest.equations, drives, targets, poses,
                   rest.surplus or _last_of_sets(rest, poses))


def make_plan(
    rest: Rest, drives: frozenset[int], targets: frozenset[tuple[int, int]]
) -> Plan:
    """Plan for value numbers and (joint, axis) pairs that will be known."""
    planner = planner_for(rest, drives, targets)
    planner.run()
    return finished(rest, planner)


def finished(rest: Rest, planner: Planner) -> Plan:
    """The plan of a planner that has run."""
    eqs, ground = planner.eqs, planner.ground
    loose = tuple(j for j in range(eqs.n) if j not in ground.place)
    used = ground.settled() | {("tie", t) for t in planner.settled_ties}
    steps = alive_steps(_with_solids(planner, ground.steps), eqs.n)
    checks = list(checks_for(eqs, planner.net, ground, frozenset(used)))
    if eqs.dim == 3 and rest.misfit < AGREE:
        steps = with_fits(steps, ground.loci)
    base, groups = grouped(eqs, steps, checks)
    rigid = ("distance", "body", "rail", "way", "angle", "target", "tie")
    redundant = tuple(dict.fromkeys(
        c.parts[0] for c in checks if c.kind in rigid and c.parts))
    return Plan(eqs=eqs, drives=tuple(eqs.values[v] for v in sorted(planner.drives)),
                targets=tuple(sorted(planner.targets)), base=base, groups=groups, loose=loose,
                redundant=redundant, points=next(planner.points), forced=tuple(planner.forced))


def _last_of_sets(rest: Rest, poses: Array) -> frozenset[str]:
    """Bones that add nothing to the bones before them: of surplus lengths the last gives way."""
    if rest.scaled.size > DENSE:
        return frozenset()
    return giving_way(System(rest.equations), poses[1])


def _with_solids(planner: Planner, steps: list[Step]) -> list[Step]:
    """Put the steps that make a group's own frame before the first step that uses it."""
    makers = {p: solid for solid in planner.net.solids for s in solid.steps for p in writes(s)}
    if not makers:
        return steps
    done: set[int] = set()
    out: list[Step] = []

    def need(step: Step) -> None:
        for p in reads(step):
            solid = makers.get(p)
            if solid is not None and id(solid) not in done:
                done.add(id(solid))
                for inner in solid.steps:
                    need(inner)
                    out.append(inner)

    for step in steps:
        need(step)
        out.append(step)
    return out


_plans: dict[tuple[Rig, frozenset[str], frozenset[tuple[str, int]]], Plan] = {}
MOST_PLANS = 256


def plan_for(
    rig: Rig, drives: frozenset[str], targets: frozenset[tuple[str, int]]
) -> Plan:
    """The plan for drive names and (joint name, axis) pairs, kept for those used last."""
    key = (rig, drives, targets)
    plan = _plans.get(key)
    if plan is None:
        rest = find_rest(rig)
        eqs = rest.equations
        with all_kept():
            plan = make_plan(
                rest,
                frozenset(eqs.value_index[d] for d in drives),
                frozenset((rig.index[j], axis) for j, axis in targets),
            )
        keep_plan(rig, drives, targets, plan)
    return plan


def keep_plan(rig: Rig, drives: frozenset[str], targets: frozenset[tuple[str, int]],
              plan: Plan) -> None:
    """Keep a plan that was made on the way, for `plan_for` to find."""
    _plans[rig, drives, targets] = plan
    while len(_plans) > MOST_PLANS:
        _plans.pop(next(iter(_plans)), None)
