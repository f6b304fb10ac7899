"""Bodies of known heading without a placed joint: the curves of all their joints act on one.

A heading is known from a driven crank, or where two joints of a body slide on parallel rails (a
crosshead, a yoke). The body then only shifts, so that every curve that one of its joints lies on
becomes a curve for its first joint, and two of them place it.
"""

from __future__ import annotations

from collections import Counter
from collections.abc import Iterator
from dataclasses import dataclass, replace
from itertools import combinations, count

import numpy as np

from rigpose.model.equations import GROUND
from rigpose.solve.growth import Growth, Key, Locus
from rigpose.solve.net import Solid
from rigpose.solve.plan import Circle, Level, Line, Meet, Orient, Point, Sheet, Shift, Step

PARALLEL = 1e-9
"""Rails whose directions differ by less than this sine are parallel by intent."""


@dataclass(frozen=True)
class Turned:
    """A body turned to its heading about an origin of its own: a helper point for each joint,
    the step that makes them, and the equations that it stands on."""

    number: int | None
    solid: Solid
    helper: dict[int, Point]
    step: Step
    uses: frozenset[Key]


def turned_by_crank(ground: Growth, points: count[int]) -> bool:
    """Place a body whose line a driven crank turns; True where one was placed."""
    angles = ground.net.eqs.angles
    for k in range(len(angles.names)):
        value = int(angles.value[k])
        if value not in ground.known or ("value", value) in ground.used:
            continue
        for back in (False, True):
            a, b = map(int, angles.base[k] if back else angles.line[k])
            heading = ground._heading(k, back) if a != GROUND else None
            carrier = ground._carrier(a, b, placed=0) if heading else None
            if heading is None or carrier is None:
                continue
            number, solid = carrier
            helper = {j: next(points) for j in solid.local}
            step = Orient(dst=tuple(helper.values()), local=tuple(solid.local.values()),
                          line=(solid.local[a], solid.local[b]), heading=heading,
                          parts=(angles.names[k], solid.name))
            body = Turned(number, solid, helper, step, frozenset({("value", value)}))
            if _shifted(ground, body, points):
                return True
    return False


def turned_by_rails(ground: Growth, points: count[int]) -> bool:
    """Place a body two of whose joints slide on parallel rails; True where one was placed."""
    lines = ground.net.eqs.lines
    guided: Counter[int] = Counter(number for j, on in zip(lines.joint, lines.along[:, 0],
                                                           strict=True) if on == GROUND
                                   for number in ground.net.solids_on.get(int(j), ()))
    for number in sorted(k for k, rails in guided.items() if rails > 1):
        solid = ground.net.solids[number]
        if any(j in ground.place for j in solid.local) or not any(
                number in ground.net.solids_on[j] for j in solid.local):
            continue
        for r, s in _parallel(ground, solid):
            i, j = int(lines.joint[r]), int(lines.joint[s])
            helper = {k: next(points) for k in solid.local}
            d = lines.direction[r]
            offset = float(d[0] * (lines.through[s] - lines.through[r])[1]
                           - d[1] * (lines.through[s] - lines.through[r])[0])
            step = Level(dst=tuple(helper.values()), local=tuple(solid.local.values()),
                         pair=(solid.local[i], solid.local[j]),
                         direction=(float(d[0]), float(d[1])), offset=offset, bit=0,
                         parts=(lines.names[r], lines.names[s]))
            body = Turned(number, solid, helper, step, frozenset({("rail", r), ("rail", s)}))
            if _shifted(ground, body, points):
                return True
    return False


def _parallel(ground: Growth, solid: Solid) -> Iterator[tuple[int, int]]:
    """Pairs of parallel fixed rails on which two different joints of a body slide."""
    lines = ground.net.eqs.lines
    fixed = [k for j in solid.local for k in ground.net.rails_on[j]
             if int(lines.joint[k]) == j and lines.along[k, 0] == GROUND]
    for r, s in combinations(fixed, 2):
        d, e = lines.direction[r], lines.direction[s]
        i, j = int(lines.joint[r]), int(lines.joint[s])
        if i != j and abs(float(d[0] * e[1] - d[1] * e[0])) < PARALLEL and _apart(solid, i, j):
            yield r, s


def _apart(solid: Solid, i: int, j: int) -> bool:
    a, b = solid.local[i], solid.local[j]
    return not (isinstance(a, tuple) and isinstance(b, tuple) and np.hypot(
        a[0] - b[0], a[1] - b[1]) == 0.0)


def _shifted(ground: Growth, body: Turned, points: count[int]) -> bool:
    """Place the first joint by two of the body's curves, and the others with it."""
    joints = list(body.solid.local)
    first, steps = joints[0], [body.step]
    found = ground._best_pair(list(_curves(ground, body, first, steps, points)))
    if found is None:
        return False
    one, two = found
    curves: list[Circle | Line] = [c for c in (one.curve, two.curve) if not isinstance(c, Sheet)]
    curves.sort(key=lambda c: isinstance(c, Circle))
    bit = -1 if all(isinstance(c, Line) for c in curves) else 0
    steps.append(Meet(dst=first, first=curves[0], second=curves[1], bit=bit,
                      parts=(one.part, two.part)))
    steps += [Shift(dst=j, point=first, minus=body.helper[first], plus=body.helper[j],
                    parts=(body.solid.name,)) for j in joints[1:]]
    ground.used |= {one.uses, two.uses} | _standing_on(body, {one.uses, two.uses})
    ground.used |= body.solid.uses if body.number is None else set()
    ground.steps += steps
    ground._hold(body.number, joints)
    for j in joints:
        ground.place[j] = j
    for j in joints:
        ground._arrived(j)
    return True


def _standing_on(body: Turned, taken: set[Key]) -> set[Key]:
    """The equations that the heading uses up.

    Two parallel rails make one heading and one line. Where one of them places as well, both are
    used up; where neither does, the second is the heading and the first is left to be checked.
    """
    if isinstance(body.step, Level) and not body.uses & taken:
        return {max(body.uses)}
    return set(body.uses)


def _curves(ground: Growth, body: Turned, first: int, steps: list[Step],
            points: count[int]) -> Iterator[Locus]:
    """The curves of all joints, as curves for the first one."""
    helper = body.helper
    for j in body.solid.local:
        for locus in ground.loci[j]:
            yield _handed_on(locus, helper[j], helper[first], j == first, steps, points)
    lines = ground.net.eqs.lines
    for k in {k for j in body.solid.local for k in ground.net.rails_on[j]}:
        a, b, slider = *map(int, lines.along[k]), int(lines.joint[k])
        if a in helper and b in helper and slider in ground.place and slider not in helper:
            e = ground.poses[:, b] - ground.poses[:, a]
            normal = np.stack([-e[:, 1], e[:, 0]], axis=1)
            normal /= np.linalg.norm(e, axis=1)[:, None]
            line = Line("slot", points=(ground.place[slider], helper[a], helper[b]),
                        moved=(helper[a], helper[first]))
            yield Locus(line, ("rail", k), lines.names[k], normal)


def _handed_on(locus: Locus, mine: Point, theirs: Point, same: bool, steps: list[Step],
               points: count[int]) -> Locus:
    if same:
        return locus
    if isinstance(locus.curve, Line):
        return replace(locus, curve=replace(locus.curve, moved=(mine, theirs)))
    assert isinstance(locus.curve, Circle)  # sheets belong to space
    point = next(points)
    steps.append(Shift(dst=point, point=locus.curve.centre, minus=mine, plus=theirs,
                       parts=(locus.part,)))
    return replace(locus, curve=Circle(point, locus.curve.radius))

