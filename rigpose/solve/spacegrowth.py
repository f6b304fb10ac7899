"""Growing a frame in space: joints placed where three surfaces meet, bodies hung on three joints.

A line counts as two surfaces. A body with one or two placed joints puts its others on spheres
about them (two spheres are the circle of a hinge), so its hand is seen only once three are
placed; until then it is a check.
"""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from dataclasses import dataclass, field
from itertools import combinations
from math import hypot

import numpy as np

from rigpose.model.equations import GROUND, Array, Lines
from rigpose.solve.growth import APART, PARALLEL, Growth, Key, Locus
from rigpose.solve.net import Net, Solid
from rigpose.solve.plan import (
    Circle,
    Given,
    Hang,
    Hinge,
    Junction,
    Length,
    Line,
    Point,
    Ride,
    Sheet,
)

MOST_LOCI = 14
FEW = 10
"""Sets up to which plain numbers are quicker than arrays."""
GOOD = 2.0
"""A volume that is good enough to stop looking for a better choice."""
ORDER = (Line, Sheet, Circle)


@dataclass
class SpaceGrowth(Growth):
    """A frame being grown in space."""

    lines: dict[Key, bool] = field(default_factory=dict)
    riding: set[int] = field(default_factory=set)

    # -- what is known from the start ---------------------------------------------------------

    def begin_ground(self) -> None:
        """Pins, targets, fixed planes and rails are known from the start."""
        eqs = self.net.eqs
        for pin in map(int, np.flatnonzero(eqs.pinned)):
            self._placed(pin, pin, None)
        whole = [j for j in sorted({j for j, _ in self.targets})
                 if all((j, axis) in self.targets for axis in range(3))]
        for j in whole:
            self.used |= {("target", j * 3 + axis) for axis in range(3)}
            if j not in self.place:
                self._placed(j, j, Given(dst=j, joint=j, parts=(eqs.rig.joint_names[j],)))
        for j, axis in sorted(self.targets):
            if j not in whole:
                sheet = Sheet("axis", joint=j, axis=axis)
                normal = np.broadcast_to(np.eye(3)[axis], (len(self.poses), 3))
                self._offer(j, Locus(sheet, ("target", j * 3 + axis), eqs.rig.joint_names[j],
                                     normal))
        for k in range(len(eqs.planes.names)):
            through, normal = eqs.planes.through[k], eqs.planes.normal[k]
            sheet = Sheet("fixed", tuple(map(float, through)), tuple(map(float, normal)))
            self._offer(int(eqs.planes.joint[k]), Locus(
                sheet, ("plane", k), eqs.planes.names[k],
                np.broadcast_to(normal, (len(self.poses), 3))))
        for k in map(int, np.flatnonzero(eqs.lines.along[:, 0] == GROUND)):
            self._fixed_rail(k)
        for number, k in sliding(self.net):
            self._ride_along(number, k)

    def _ride_along(self, number: int, k: int) -> None:
        """All joints of a body that can only be shifted keep to lines along its rail."""
        solid, direction = self.net.solids[number], self.net.eqs.lines.direction[k]
        if np.isnan(self.poses[0, list(solid.local)]).any():
            return
        self.riding.add(number)
        normal = np.broadcast_to(direction, (len(self.poses), 3))
        for joint in solid.local:
            if joint not in self.place:
                line = Line("fixed", tuple(map(float, self.poses[0, joint])),
                            tuple(map(float, direction)))
                self._offer(joint, Locus(line, ("ride", number), solid.name, normal))

    def _fixed_rail(self, k: int) -> None:
        lines = self.net.eqs.lines
        d = lines.direction[k]
        line = Line("fixed", tuple(map(float, lines.through[k])), tuple(map(float, d)))
        self._offer(int(lines.joint[k]), Locus(line, ("rail", k), lines.names[k],
                                               np.broadcast_to(d, (len(self.poses), 3))))
        if int(lines.value[k]) in self.known:
            self._across(k, int(lines.value[k]))

    def _across(self, k: int, value: int) -> None:
        lines = self.net.eqs.lines
        d = lines.direction[k]
        sheet = Sheet("across", tuple(map(float, lines.through[k])), tuple(map(float, d)),
                      value=value)
        self._offer(int(lines.joint[k]), Locus(sheet, ("value", value), lines.names[k],
                                               np.broadcast_to(d, (len(self.poses), 3))))

    # -- what a placed joint offers -----------------------------------------------------------

    def _touch(self, number: int, joint: int) -> None:
        solid = self.net.solids[number]
        inside = [j for j in solid.local if j in self.place]
        missing = [j for j in solid.local if j not in self.place]
        if len(inside) == 1:
            self.held[number].add(joint)
        if not missing:
            return
        if number in self.riding or self._hooks(solid) is not None:
            self._push(0, number, "solid")
            return
        for j in missing:
            self._circle(j, joint, solid.length(joint, j), ("solid", number), solid.name)
        for k in {k for j in solid.local for k in self.net.cranks_on[j]}:
            if int(self.net.eqs.angles.value[k]) in self.known:
                self._push(0, k, "crank")

    def _rail(self, k: int) -> None:
        lines = self.net.eqs.lines
        a, b = map(int, lines.along[k])
        joint = int(lines.joint[k])
        if a == GROUND or a not in self.place or b not in self.place or joint in self.place:
            return
        if int(lines.value[k]) in self.known:
            self._push(0, k, "slide")
        e = self.poses[:, b] - self.poses[:, a]
        direction = e / np.linalg.norm(e, axis=1, keepdims=True)
        line = Line("points", points=(self.place[a], self.place[b]))
        self._offer(joint, Locus(line, ("rail", k), lines.names[k], direction))

    def _try_swing(self, k: int) -> None:
        """In space a slot through a placed joint turns its body about two ways at once."""

    def _offer(self, joint: int, locus: Locus) -> None:
        if joint in self.place:
            return
        mine, weight = self.loci[joint], 0
        for x in mine:
            if x.uses == locus.uses and x.curve == locus.curve:
                return
            weight += 2 if type(x.curve) is Line else 1
        if not mine:
            self.offered.append(joint)
        mine.append(locus)
        weight += 2 if type(locus.curve) is Line else 1
        if weight >= 3:
            self._push(1 if weight > 3 else 2, joint, "joint")

    # -- placing ------------------------------------------------------------------------------

    def _meet(self, joint: int) -> None:
        if joint in self.place:
            return
        loci = self.loci[joint]
        some = [x for x in loci if x.part not in self.surplus] if self.surplus else loci
        chosen = self._best_set(some) or self._best_set(loci)
        if chosen is not None:
            self._join_at(joint, chosen)

    def force(self) -> int | None:
        """As in the plane: by surfaces that touch but can't have more than two points in common."""
        for joint in sorted(self.loci):
            if joint not in self.place:
                loci = self.loci[joint][:MOST_LOCI]
                chosen = next(self._finite_sets(loci), None) or self._stretched(joint, loci)
                if chosen is not None:
                    self._join_at(joint, chosen)
                    return joint
        return None

    def _finite_sets(self, loci: Sequence[Locus]) -> Iterator[tuple[Locus, ...]]:
        """A line and a sphere; a sphere and two planes, or two spheres and a plane, with no common
        axis; spheres about three joints not in line."""
        lines, sheets, spheres = ([x for x in loci if type(x.curve) is kind] for kind in ORDER)
        yield from ((line, sphere) for line in lines for sphere in spheres)
        for one, two in combinations(sheets, 2):
            if _square(one.normals, two.normals) > APART:
                yield from ((one, two, sphere) for sphere in spheres)
        ways = {(a.centre, b.centre): self.poses[:, b.centre] - self.poses[:, a.centre]
                for a, b in combinations(spheres, 2)}
        for sheet in sheets:
            yield from ((sheet, a, b) for a, b in combinations(spheres, 2)
                        if _square(sheet.normals, ways[a.centre, b.centre]) > APART)
        yield from ((a, b, c) for a, b, c in combinations(spheres, 3)
                    if _square(ways[a.centre, b.centre], ways[a.centre, c.centre]) > APART)

    def _stretched(self, joint: int, loci: Sequence[Locus]) -> tuple[Locus, ...] | None:
        """Surfaces with a common axis on which the joint lies: they touch there, nowhere else."""
        spheres = [x for x in loci if x.centre >= 0]
        others = [x for x in loci if type(x.curve) is Sheet]
        for a, b in combinations(spheres, 2):
            way = self.poses[:, b.centre] - self.poses[:, a.centre]
            mine = self.poses[:, joint] - self.poses[:, a.centre]
            third = next((x for x in (*others, *spheres) if x is not a and x is not b), None)
            if third is not None and _square(way, mine) <= PARALLEL < float(np.abs(way).max()):
                return (third, a, b) if third in others else (a, b, third)
        return None

    def _join_at(self, joint: int, chosen: tuple[Locus, ...]) -> None:
        """Place a joint where surfaces meet."""
        uses = {x.uses for x in chosen}
        self.used |= uses
        for number in [k for kind, k in uses if kind == "solid"]:
            spheres = sum(x.uses == ("solid", number) for x in chosen)
            placed = sum(j in self.place for j in self.net.solids[number].local)
            if spheres == placed <= 2:
                self._hold(number, [joint])
        curves = tuple([x.curve for x in chosen])
        if any(type(c) is not Circle for c in curves):
            curves = tuple(sorted(curves, key=lambda c: ORDER.index(type(c))))
        two_ways = type(curves[-1]) is Circle
        dst = joint if self.ground else self.new_point()
        self._placed(joint, dst, Junction(dst=dst, curves=curves, bit=0 if two_ways else -1,
                                          parts=tuple(dict.fromkeys(x.part for x in chosen))))

    @staticmethod
    def _best_set(loci: list[Locus]) -> tuple[Locus, ...] | None:
        """The surfaces whose unit normals span the largest volume; the file's order decides."""
        some = loci[:MOST_LOCI]
        lines = [k for k, x in enumerate(some) if type(x.curve) is Line]
        others = [k for k, x in enumerate(some) if type(x.curve) is not Line]
        sets: list[tuple[int, ...]] = [(a, b) for a in lines for b in others]
        sets += combinations(others, 3)
        if not sets:
            return None
        worth = _few_volumes(some, sets) if len(sets) <= FEW else _volumes(some, sets)
        best = max(worth)
        # The first that is good enough or as good as any: the same on every machine.
        enough = min(GOOD, best * (1.0 - 1e-6))
        chosen = next(k for k, volume in enumerate(worth) if volume >= enough)
        return tuple(some[k] for k in sets[chosen]) if best > PARALLEL else None

    def _hooks(self, solid: Solid) -> tuple[int, ...] | None:
        """Placed joints that carry a body: three not in line, or two where all lie in one."""
        inside = [j for j in solid.local if j in self.place][:MOST_LOCI]
        if len(inside) < 2:
            return None
        best, found = 1e-6, None
        for a, b, c in combinations(inside, 3):
            e, f = self.poses[:, b] - self.poses[:, a], self.poses[:, c] - self.poses[:, a]
            area = float(np.nanmax(np.linalg.norm(np.cross(e, f), axis=1)))
            if area > best * (1 + 1e-9):
                best, found = area, (a, b, c)
        if found is None and self._straight(solid):
            return max(combinations(inside, 2), key=lambda p: float(np.nanmax(
                np.linalg.norm(self.poses[:, p[0]] - self.poses[:, p[1]], axis=1))))
        return found

    def _straight(self, solid: Solid) -> bool:
        """Whether all joints of a body lie in one line."""
        x = self.poses[0, list(solid.local)]
        away = x - x[0]
        return len(x) < 3 or float(np.linalg.svd(away, compute_uv=False)[1]) < 1e-9

    def _carry(self, number: int) -> None:
        solid = self.net.solids[number]
        missing = [j for j in solid.local if j not in self.place]
        if number in self.riding:
            self._ride(number, missing)
            return
        hooks = self._hooks(solid)
        if not missing or hooks is None:
            return
        self._hold(number, missing)
        local = tuple(solid.local[j] for j in missing)
        placed = tuple(self.place[j] for j in hooks)
        base = tuple(solid.local[j] for j in hooks)
        self._spread(missing, lambda dst: Hang(
            dst=dst, local=local, placed=placed, base=base, parts=(solid.name,)))

    def _ride(self, number: int, missing: list[int]) -> None:
        """Shift a body with one of its joints that is placed."""
        solid = self.net.solids[number]
        pivot = next((j for j in solid.local if j in self.place), None)
        if pivot is None or not missing:
            return
        self._hold(number, missing)
        x = self.poses[0]
        ways = tuple(tuple(map(float, x[j] - x[pivot])) for j in missing)
        here = self.place[pivot]
        self._spread(missing, lambda dst: Ride(dst=dst, ways=ways, pivot=here,
                                               parts=(solid.name,)))

    def _aim(self, k: int) -> None:
        """Turn a body about a placed axis by a driven angle."""
        angles = self.net.eqs.angles
        value = int(angles.value[k])
        if value not in self.known or ("value", value) in self.used:
            return
        p, q = map(int, angles.axis[k])
        if p not in self.place or q not in self.place:
            return
        s, f = int(angles.line[k, 1]), int(angles.base[k, 1])
        if s not in self.place and ((f == GROUND and self.ground) or f in self.place):
            self._turn(k, (p, q), s, None if f == GROUND else f, 1.0)
        elif f != GROUND and f not in self.place and s in self.place:
            self._turn(k, (p, q), f, s, -1.0)

    def _turn(self, k: int, axis: tuple[int, int], pointer: int, start: int | None,
              sign: float) -> None:
        for number in self.net.solids_on[pointer]:
            solid = self.net.solids[number]
            if axis[0] in solid.local and axis[1] in solid.local:
                self._turn_solid(k, number, axis, pointer, start, sign)
                return

    def _turn_solid(self, k: int, number: int, axis: tuple[int, int], pointer: int,
                    start: int | None, sign: float) -> None:
        angles, solid = self.net.eqs.angles, self.net.solids[number]
        missing = [j for j in solid.local if j not in self.place]
        self.used.add(("value", int(angles.value[k])))
        self._hold(number, missing)
        toward = () if start is not None else tuple(map(float, angles.toward[k]))
        here = self.place[axis[0]], self.place[axis[1]]
        begin: Point | None = None if start is None else self.place[start]
        self._spread(missing, lambda dst: Hinge(
            dst=dst, local=tuple(solid.local[j] for j in missing), axis=here,
            axis_local=(solid.local[axis[0]], solid.local[axis[1]]),
            pointer=solid.local[pointer], start=begin, toward=toward,
            value=int(angles.value[k]), zero=float(angles.zero[k]), sign=sign,
            parts=(angles.names[k], solid.name)))

    def _circle(self, joint: int, centre: int, radius: Length, uses: Key, part: str) -> None:
        if not radius.constant and radius.value < 0 and radius.points is None:
            return
        normals: list[tuple[float, ...]] = []
        for pose in self.views:
            (a, b, c), (d, e, f) = pose[joint], pose[centre]
            x, y, z = a - d, b - e, c - f
            long = hypot(x, y, z) or 1.0
            normals.append((x / long, y / long, z / long))
        self._offer(joint, Locus(Circle(self.place[centre], radius), uses, part, normals, centre))


def sliding(net: Net) -> Iterator[tuple[int, int]]:
    """Bodies that two tied rails in one line and a third beside it leave only to shift, as a slider
    on the ground does; each with one of its rails."""
    lines, eqs = net.eqs.lines, net.eqs
    tied = {frozenset(np.flatnonzero(row).tolist()) for row in eqs.ties
            if np.count_nonzero(row) == 2 and row.sum() == 0}
    for number, solid in enumerate(net.solids):
        rails = [k for k in np.flatnonzero(lines.along[:, 0] == GROUND).tolist()
                 if int(lines.joint[k]) in solid.local]
        for a, b in combinations(rails, 2):
            pair = frozenset((int(lines.value[a]), int(lines.value[b])))
            if pair in tied and _beside(lines, a, b) < APART and any(
                    _beside(lines, a, k) > APART and _parallel(lines, a, k) for k in rails):
                yield number, a
                break


def _parallel(lines: Lines, a: int, b: int) -> bool:
    turn = np.cross(lines.direction[a], lines.direction[b])
    return float(np.linalg.norm(turn)) < PARALLEL


def _beside(lines: Lines, a: int, b: int) -> float:
    """How far the second rail's first point is from the first's line."""
    way = lines.through[b] - lines.through[a]
    return float(np.linalg.norm(np.cross(way, lines.direction[a])))


def _square(a: Array | Sequence[tuple[float, ...]], b: Array | Sequence[tuple[float, ...]]) -> (
        float):
    """The largest vector product of two directions, pose by pose."""
    return float(np.nanmax(np.linalg.norm(np.cross(a, b), axis=1)))


def _few_volumes(loci: list[Locus], sets: list[tuple[int, ...]]) -> list[float]:
    """As `_volumes`, in plain numbers: quicker for a few sets."""
    if len(sets[0]) == 3 and len(loci[0].normals) == 1:
        return _single_volumes([x.normals[0] for x in loci], sets)
    found = []
    for chosen in sets:
        first, second, *third = (loci[k].normals for k in chosen)
        best = 0.0
        for k, ((a, b, c), (d, e, f)) in enumerate(zip(first, second, strict=True)):
            if third:
                p, q, r = third[0][k]
                size = abs((b * f - c * e) * p + (c * d - a * f) * q + (a * e - b * d) * r)
            else:
                size = abs(a * d + b * e + c * f)
            best = max(best, float(size) if size == size else 0.0)  # noqa: PLR0124 - not a number
        found.append(best)
    return found


def _single_volumes(normals: list[Sequence[float]], sets: list[tuple[int, ...]]) -> list[float]:
    """What triples of unit normals span in a single pose."""
    found = []
    for i, j, k in sets:
        (a, b, c), (d, e, f), (p, q, r) = normals[i], normals[j], normals[k]
        size = abs((b * f - c * e) * p + (c * d - a * f) * q + (a * e - b * d) * r)
        found.append(float(size) if size == size else 0.0)  # noqa: PLR0124 - not a number
    return found


def _volumes(loci: list[Locus], sets: list[tuple[int, ...]]) -> list[float]:
    """What the unit normals of each set span in the better of the two poses, ``(n_sets,)``."""
    normals = np.array([np.asarray(x.normals) for x in loci])
    pairs = [s for s in sets if len(s) == 2]
    triples = np.array(sets[len(pairs):], dtype=np.intp).reshape(-1, 3)
    first = [np.abs((normals[a] * normals[b]).sum(axis=1)) for a, b in pairs]
    p, q, r = (normals[triples[:, k]] for k in range(3))
    across = np.stack([p[..., 1] * q[..., 2] - p[..., 2] * q[..., 1],
                       p[..., 2] * q[..., 0] - p[..., 0] * q[..., 2],
                       p[..., 0] * q[..., 1] - p[..., 1] * q[..., 0]], axis=-1)
    every = np.concatenate([np.array(first).reshape(len(pairs), normals.shape[1]),
                            np.abs((across * r).sum(axis=-1))])
    largest: list[float] = np.nan_to_num(np.fmax.reduce(every, axis=1), nan=0.0).tolist()
    return largest
