"""Growing a frame: from placed joints to all joints that circles and lines place one by one.

The ground is one such frame; a floating body is another, seated on one of its bones. The same
rules serve both. What a rule needs is offered the moment the last of it is placed, so the work
is linear in the number of parts.
"""

from __future__ import annotations

from collections import defaultdict
from collections.abc import Callable
from dataclasses import dataclass, field
from heapq import heappop, heappush
from itertools import combinations
from math import dist, hypot

import numpy as np

from rigpose.model.equations import GROUND, Array
from rigpose.model.record import Record
from rigpose.solve.net import Net, Solid
from rigpose.solve.plan import (
    Aim,
    Carry,
    Circle,
    Given,
    Heading,
    Length,
    Line,
    Meet,
    Point,
    Seat,
    Sheet,
    Slide,
    Step,
    Swing,
)

Key = tuple[str, int]
Normals = Array | list[tuple[float, ...]]
"""A unit vector for each pose; plain numbers for circles, of which a large rig has very many."""
APART = 1e-6
"""Centres farther apart than this part of the size, at rest or close by, are two."""
PARALLEL = 1e-7
"""Curves that cross at less than this sine, at rest and close by, do not place a joint."""


class Locus(Record, frozen=True, eq=False):
    """A curve that a joint lies on, with the equation behind it, its unit normal in each of the
    poses (zeros where it has none) and the joint at its centre."""

    curve: Circle | Line | Sheet
    uses: Key
    part: str
    normals: Normals
    centre: int = -1


@dataclass
class Growth:
    """A frame being grown. ``place`` maps joints to points; ``known`` are value numbers;
    ``offered`` lists joints as they got their first curve."""

    net: Net
    poses: Array
    known: set[int]
    new_point: Callable[[], Point]
    ground: bool = True
    targets: frozenset[tuple[int, int]] = frozenset()
    place: dict[int, Point] = field(default_factory=dict)
    steps: list[Step] = field(default_factory=list)
    used: set[Key] = field(default_factory=set)
    loci: dict[int, list[Locus]] = field(default_factory=lambda: defaultdict(list))
    ready: list[tuple[int, int, int, str]] = field(default_factory=list)
    ticket: int = 0
    held: dict[int, set[int]] = field(default_factory=lambda: defaultdict(set))
    on_place: Callable[[int], None] | None = None
    surplus: frozenset[str] = frozenset()
    views: list[list[list[float]]] = field(init=False)
    offered: list[int] = field(default_factory=list)

    def __post_init__(self) -> None:
        self.views = self.net.listed(self.poses)

    # -- starting -----------------------------------------------------------------------------

    def begin_ground(self) -> None:
        """Pins, fixed rails and targets are known from the start."""
        eqs = self.net.eqs
        for pin in map(int, np.flatnonzero(eqs.pinned)):
            self._placed(pin, pin, None)
        whole = [j for j in {j for j, _ in self.targets}
                 if all((j, axis) in self.targets for axis in range(eqs.dim))]
        for j in sorted(whole):
            self.used |= {("target", j * eqs.dim + axis) for axis in range(eqs.dim)}
            if j not in self.place:
                self._placed(j, j, Given(dst=j, joint=j, parts=(eqs.rig.joint_names[j],)))
        for j, axis in sorted(self.targets):
            if j not in whole:
                normal = np.zeros((len(self.poses), 2))
                normal[:, axis] = 1.0
                line = Line("axis", joint=j, axis=axis)
                self._offer(j, Locus(line, ("target", j * eqs.dim + axis),
                                     eqs.rig.joint_names[j], normal))
        for k in np.flatnonzero(eqs.lines.along[:, 0] == GROUND):
            self._fixed_rail(int(k))

    def _fixed_rail(self, k: int) -> None:
        lines = self.net.eqs.lines
        d = lines.direction[k]
        joint, name = int(lines.joint[k]), lines.names[k]
        through, direction = tuple(map(float, lines.through[k])), tuple(map(float, d))
        normal = np.broadcast_to([-d[1], d[0]], (len(self.poses), 2))
        self._offer(joint, Locus(Line("fixed", through, direction), ("rail", k), name, normal))
        value = int(lines.value[k])
        if value in self.known:
            self._across(k, value)

    def _across(self, k: int, value: int) -> None:
        lines = self.net.eqs.lines
        d = lines.direction[k]
        line = Line("across", tuple(map(float, lines.through[k])), tuple(map(float, d)),
                    value=value)
        self._offer(int(lines.joint[k]),
                    Locus(line, ("value", value), lines.names[k],
                          np.broadcast_to(d, (len(self.poses), 2))))

    def seat(self, number: int | None, solid: Solid) -> None:
        """Begin a floating frame with the joints of a body."""
        joints = list(solid.local)
        dst = tuple(self.new_point() for _ in joints)
        self.steps.append(Seat(dst=dst, local=tuple(solid.local.values()), parts=(solid.name,)))
        self.place.update(zip(joints, dst, strict=True))
        self._hold(number, joints)
        self.used |= solid.uses if number is None else {("solid", number)}
        for j in joints:
            self._arrived(j)

    # -- the loop -----------------------------------------------------------------------------

    def run(self) -> None:
        """Place joints until nothing more can be placed."""
        while self.ready:
            _, _, number, kind = heappop(self.ready)
            if kind == "solid":
                self._carry(number)
            elif kind == "joint":
                self._meet(number)
            elif kind == "crank":
                self._aim(number)
            elif kind == "slide":
                self._slide(number)
            else:
                self._swing(number)

    def _push(self, priority: int, number: int, kind: str) -> None:
        self.ticket += 1
        heappush(self.ready, (priority, self.ticket, number, kind))

    def learn(self, value: int) -> None:
        """A value has become known: whatever waits for it is offered."""
        self.known.add(value)
        eqs = self.net.eqs
        if value in eqs.ram_of:
            k = eqs.ram_of[value]
            a, b = map(int, eqs.distances.ends[k])
            self._link(k, a, b)
            self._link(k, b, a)
        for c in map(int, np.flatnonzero(eqs.angles.value == value)):
            self._push(0, c, "crank")
        for r in map(int, np.flatnonzero(eqs.lines.value == value)):
            if eqs.lines.along[r, 0] == GROUND and self.ground:
                self._across(r, value)
            self._push(0, r, "slide")

    def settled(self) -> set[Key]:
        """Equations that the places keep: those used, and bodies all of whose joints were placed
        in keeping with their shape. What is left is to be checked."""
        uses = {key for key in self.used if key[0] != "solid"}
        for number, joints in self.held.items():
            solid = self.net.solids[number]
            if joints >= solid.local.keys():
                uses |= {("solid", number), *solid.uses}
        return uses

    # -- a joint has been placed --------------------------------------------------------------

    def _hold(self, number: int | None, joints: list[int]) -> None:
        """Joints that a step placed in keeping with a body's shape."""
        if number is not None:
            self.held[number].update(joints)

    def _arrived(self, joint: int) -> None:
        net, place = self.net, self.place
        for k, other in net.links.get(joint, ()):
            if other not in place:
                self._link(k, joint, other)
        for number in net.solids_on.get(joint, ()):
            self._touch(number, joint)
        for k in net.rails_on.get(joint, ()):
            self._rail(k)
        for k in net.cranks_on.get(joint, ()):
            if int(net.eqs.angles.value[k]) in self.known:
                self._push(0, k, "crank")
        if self.on_place is not None:
            self.on_place(joint)

    def adopt(self, number: int) -> None:
        """A new body has been made: joints of it may be placed already."""
        for j in self.net.solids[number].local:
            if j in self.place:
                self._touch(number, j)

    def _link(self, k: int, joint: int, other: int) -> None:
        net, key = self.net, ("distance", k)
        value = net.value[k]
        if joint not in self.place or other in self.place or key in net.absorbed:
            return
        if value >= 0 and value not in self.known:
            return
        radius = Length(0.0, value) if value >= 0 else Length(net.radius[k])
        self._circle(other, joint, radius, key, net.eqs.distances.names[k])

    def _circle(self, joint: int, centre: int, radius: Length, uses: Key, part: str) -> None:
        normals: list[tuple[float, ...]] = []
        for pose in self.views:
            (a, b), (c, d) = pose[joint], pose[centre]
            x, y = a - c, b - d
            long = hypot(x, y) or 1.0
            normals.append((x / long, y / long))
        self._offer(joint, Locus(Circle(self.place[centre], radius), uses, part, normals, centre))

    def _touch(self, number: int, joint: int) -> None:
        net, place = self.net, self.place
        solid = net.solids[number]
        missing = [j for j in solid.local if j not in place]
        inside = len(solid.local) - len(missing)
        if inside == 1:
            self.held[number].add(joint)
        if not missing:
            return
        if inside >= 2:
            self._push(0, number, "solid")
        elif inside == 1:
            for j in missing:
                self._circle(j, joint, solid.length(joint, j), ("solid", number), solid.name)
        if net.slots:
            for k in {k for j in solid.local for k in net.rails_on.get(j, ())}:
                self._try_swing(k)

    def _rail(self, k: int) -> None:
        lines = self.net.eqs.lines
        a, b = map(int, lines.along[k])
        if a == GROUND:
            return
        joint = int(lines.joint[k])
        if a in self.place and b in self.place and joint not in self.place:
            if int(lines.value[k]) in self.known:
                self._push(0, k, "slide")
            e = self.poses[:, b] - self.poses[:, a]
            normal = np.stack([-e[:, 1], e[:, 0]], axis=1) / np.linalg.norm(e, axis=1)[:, None]
            line = Line("points", points=(self.place[a], self.place[b]))
            self._offer(joint, Locus(line, ("rail", k), lines.names[k], normal))
        else:
            self._try_swing(k)

    def _try_swing(self, k: int) -> None:
        if self._swing_body(k) is not None:
            self._push(3, k, "swing")

    def _offer(self, joint: int, locus: Locus) -> None:
        if joint in self.place:
            return
        mine, uses = self.loci[joint], locus.uses
        for x in mine:
            if x.uses == uses:
                return
        if not mine:
            self.offered.append(joint)
        mine.append(locus)
        if len(mine) >= 2:
            self._push(1 if len(mine) > 2 else 2, joint, "joint")

    # -- placing ------------------------------------------------------------------------------

    def _meet(self, joint: int) -> None:
        if joint in self.place:
            return
        loci = self.loci[joint]
        # A length that gives way places a joint only where nothing else does.
        some = [x for x in loci if x.part not in self.surplus] if self.surplus else loci
        best = self._best_pair(some) or self._best_pair(loci)
        if best is None:
            return
        self._meet_at(joint, *best)

    def _meet_at(self, joint: int, first: Locus, second: Locus) -> None:
        """Place a joint where two curves meet."""
        self.used |= {first.uses, second.uses}
        for kind, number in (first.uses, second.uses):
            if kind == "solid":
                self.held[number].add(joint)
        one, two = first.curve, second.curve
        assert not isinstance(one, Sheet) and not isinstance(two, Sheet)  # they belong to space
        if isinstance(one, Circle) and isinstance(two, Line):
            one, two = two, one
        dst = joint if self.ground else self.new_point()
        step = Meet(dst, one, two, -1 if isinstance(two, Line) else 0,
                    parts=(first.part, second.part))
        self._placed(joint, dst, step)

    def force(self) -> int | None:
        """Place a joint that nothing else places by curves that touch at rest and close by.

        Two different circles, or a circle and a line, meet in finitely many points even so: such
        a joint is stretched out for good, and stands at a dead centre. Which, if any.
        """
        for joint in sorted(self.loci):
            if joint not in self.place:
                pair = next((p for p in combinations(self.loci[joint], 2) if self._finite(*p)),
                            None)
                if pair is not None:
                    self._meet_at(joint, *pair)
                    return joint
        return None

    def _finite(self, a: Locus, b: Locus) -> bool:
        """Whether two curves can't have a stretch in common, whatever their lengths."""
        circles = [x for x in (a, b) if isinstance(x.curve, Circle)]
        if len(circles) < 2:
            return len(circles) == 1
        gap = self.poses[:, circles[0].centre] - self.poses[:, circles[1].centre]
        return float(np.nanmax(np.abs(gap))) > APART

    def _placed(self, joint: int, dst: Point, step: Step | None) -> None:
        if step is not None:
            self.steps.append(step)
        self.place[joint] = dst
        self._arrived(joint)

    @staticmethod
    def _best_pair(loci: list[Locus]) -> tuple[Locus, Locus] | None:
        """The pair that crosses best; the file's order decides between equals."""
        best, found = PARALLEL, None
        for a, b in combinations(loci, 2):
            if a.uses == b.uses and a.uses[0] == "solid":
                continue
            worth = 0.0
            for (p, q), (r, s) in zip(a.normals, b.normals, strict=True):
                worth = max(abs(float(p * s - q * r)), worth)
            if worth > best * (1 + 1e-6):
                best, found = worth, (a, b)
                if worth > 0.3:
                    break
        return found

    def _base(self, solid: Solid) -> tuple[int, int] | None:
        """Two placed joints of a body that lie apart, as far as possible."""
        inside = [j for j in solid.local if j in self.place]
        if len(inside) > 12:
            inside = inside[:12]
        best, found = 1e-9, None
        for a, b in combinations(inside, 2) if len(inside) > 1 else ():
            gap = max([dist(pose[a], pose[b]) for pose in self.views])
            if gap > best * (1 + 1e-9):
                best, found = gap, (a, b)
        return found

    def _spread(self, joints: list[int], make: Callable[[tuple[Point, ...]], Step]) -> None:
        """Place several joints by one step."""
        dst = tuple(joints) if self.ground else tuple([self.new_point() for _ in joints])
        self.steps.append(make(dst))
        self.place.update(zip(joints, dst, strict=True))
        for j in joints:
            self._arrived(j)

    def _carry(self, number: int) -> None:
        solid, place = self.net.solids[number], self.place
        missing = [j for j in solid.local if j not in place]
        base = self._base(solid) if missing else None
        if base is None:
            return
        a, b = base
        self.held[number].update(missing)
        local = tuple([solid.local[j] for j in missing])
        placed, seat = (place[a], place[b]), (solid.local[a], solid.local[b])
        self._spread(missing, lambda dst: Carry(dst, local, placed, seat, parts=(solid.name,)))

    def _slide(self, k: int) -> None:
        lines = self.net.eqs.lines
        a, b, joint = *map(int, lines.along[k]), int(lines.joint[k])
        value = int(lines.value[k])
        if (a == GROUND or a not in self.place or b not in self.place or joint in self.place
                or value not in self.known):
            return
        self.used |= {("rail", k), ("value", value)}
        dst = joint if self.ground else self.new_point()
        self._placed(joint, dst, Slide(dst=dst, line=(self.place[a], self.place[b]), value=value,
                                       parts=(lines.names[k],)))

    def _carrier(self, a: int, b: int, placed: int) -> tuple[int | None, Solid] | None:
        """A body with joints a and b; of several the first with exactly one placed joint."""
        for number in self.net.solids_on[a]:
            solid = self.net.solids[number]
            inside = sum(j in self.place for j in solid.local)
            if b in solid.local and inside == placed:
                return number, solid
        d = self.net.eqs.distances
        for k, other in self.net.links[a]:
            if other == b and d.value[k] < 0 and (a in self.place) + (b in self.place) == placed:
                return None, self.net.bone(k)
        return None

    def _heading(self, k: int, back: bool) -> Heading | None:
        """Direction of a crank's line (or, ``back``, of its base) where the other one is known."""
        angles = self.net.eqs.angles
        pair = angles.line[k] if back else angles.base[k]
        a, b = map(int, pair)
        zero, value, sign = float(angles.zero[k]), int(angles.value[k]), -1.0 if back else 1.0
        if a == GROUND:
            return Heading(value, zero, sign, None) if self.ground and not back else None
        if a in self.place and b in self.place:
            return Heading(value, zero, sign, (self.place[a], self.place[b]))
        return None

    def _aim(self, k: int) -> None:
        angles = self.net.eqs.angles
        value = int(angles.value[k])
        if value not in self.known or ("value", value) in self.used:
            return
        for back in (False, True):
            a, b = map(int, angles.base[k] if back else angles.line[k])
            heading = self._heading(k, back)
            if a == GROUND or heading is None or (a in self.place and b in self.place):
                continue
            carrier = self._carrier(a, b, placed=1)
            if carrier is not None:
                self._aim_solid(k, value, heading, carrier, (a, b))
            else:
                self._aim_ray(k, value, heading, (a, b))
            return

    def _aim_solid(
        self, k: int, value: int, heading: Heading, carrier: tuple[int | None, Solid],
        pair: tuple[int, int],
    ) -> None:
        number, solid = carrier
        pivot = next(j for j in solid.local if j in self.place)
        missing = [j for j in solid.local if j not in self.place]
        self.used |= {("value", value), *(solid.uses if number is None else ())}
        self._hold(number, missing)
        parts = (self.net.eqs.angles.names[k], solid.name)
        self._spread(missing, lambda dst: Aim(
            dst=dst, local=tuple(solid.local[j] for j in missing), pivot=self.place[pivot],
            pivot_local=solid.local[pivot], line=(solid.local[pair[0]], solid.local[pair[1]]),
            heading=heading, parts=parts))

    def _aim_ray(self, k: int, value: int, heading: Heading, pair: tuple[int, int]) -> None:
        """A line of known heading without a length: the other end lies somewhere along it."""
        a, b = pair
        if (a in self.place) == (b in self.place):
            return
        here, there = (a, b) if a in self.place else (b, a)
        e = self.poses[:, b] - self.poses[:, a]
        normal = np.stack([-e[:, 1], e[:, 0]], axis=1) / np.linalg.norm(e, axis=1)[:, None]
        line = Line("ray", points=(self.place[here],), heading=heading)
        self._offer(there, Locus(line, ("value", value), self.net.eqs.angles.names[k], normal))

    def _swing_body(self, k: int) -> tuple[int | None, Solid] | None:
        """The body with one placed joint whose slot a placed joint slides in."""
        lines = self.net.eqs.lines
        a, b, joint = *map(int, lines.along[k]), int(lines.joint[k])
        if a == GROUND or joint not in self.place or ("rail", k) in self.used:
            return None
        carrier = self._carrier(a, b, placed=1)
        return None if carrier is None or joint in carrier[1].local else carrier

    def _swing(self, k: int) -> None:
        carrier = self._swing_body(k)
        if carrier is None:
            return
        number, solid = carrier
        lines = self.net.eqs.lines
        a, b, joint = *map(int, lines.along[k]), int(lines.joint[k])
        pivot = next(j for j in solid.local if j in self.place)
        missing = [j for j in solid.local if j not in self.place]
        if not self._swing_sound(pivot, a, b, joint):
            return
        self.used |= {("rail", k), *(solid.uses if number is None else ())}
        self._hold(number, missing)
        self._spread(missing, lambda dst: Swing(
            dst=dst, local=tuple(solid.local[j] for j in missing), pivot=self.place[pivot],
            pivot_local=solid.local[pivot], slot=(solid.local[a], solid.local[b]),
            through=self.place[joint], bit=0, parts=(lines.names[k], solid.name)))

    def _swing_sound(self, pivot: int, a: int, b: int, joint: int) -> bool:
        """Turning about the pivot must move the slot off the joint, at rest or close by."""
        e = self.poses[:, b] - self.poses[:, a]
        w = self.poses[:, joint] - self.poses[:, pivot]
        along = np.abs((e * w).sum(axis=1)) / np.linalg.norm(e, axis=1)
        return bool(np.nanmax(along) > PARALLEL)

