"""What a finished order leaves to check: surplus conditions, ranges, limits and hands."""

from __future__ import annotations

from collections.abc import Iterator

import numpy as np

from rigpose.model.equations import GROUND, Equations
from rigpose.solve.growth import Growth
from rigpose.solve.net import Net
from rigpose.solve.plan import Check

Key = tuple[str, int]


def check_key(eqs: Equations, check: Check) -> Key:
    """The equation that a check measures."""
    if check.kind == "angle":
        return "value", int(eqs.angles.value[check.index])
    if check.kind == "way":
        return "value", int(eqs.lines.value[check.index])
    return check.kind, check.index


def checks_for(
    eqs: Equations, net: Net, frame: Growth, used: frozenset[Key]
) -> Iterator[Check]:
    """Checks of all conditions within a frame that no step has used."""
    yield from _distances(eqs, frame, used)
    yield from _bodies(eqs, frame, used)
    yield from _rails(eqs, frame, used)
    yield from _angles(eqs, frame, used)
    if frame.ground:
        yield from _targets(eqs, frame, used)
        yield from _planes(eqs, frame, used)
        yield from _ties(eqs, frame, used)
        yield from _inequalities(eqs, frame)


def _inside(frame: Growth, joints: list[int]) -> tuple[int, ...] | None:
    if all(j in frame.place for j in joints):
        return tuple(frame.place[j] for j in joints)
    return None


def _distances(eqs: Equations, frame: Growth, used: frozenset[Key]) -> Iterator[Check]:
    d = eqs.distances
    for k, ends in enumerate(d.ends):
        value = int(d.value[k])
        if ("distance", k) in used or (value >= 0 and value not in frame.known):
            continue
        a, b = map(int, ends)
        if eqs.pinned[a] and eqs.pinned[b] and not frame.ground:
            continue
        points = _inside(frame, [a, b])
        if points:
            yield Check(kind="distance", index=k, points=points, parts=(d.names[k],))


def _bodies(eqs: Equations, frame: Growth, used: frozenset[Key]) -> Iterator[Check]:
    for k, body in enumerate(eqs.bodies):
        if {("body", k), ("solid", k)} & used:
            continue
        points = _inside(frame, [int(j) for j in body.joints])
        if points:
            yield Check(kind="body", index=k, points=points, parts=(body.name,))


def _rails(eqs: Equations, frame: Growth, used: frozenset[Key]) -> Iterator[Check]:
    lines = eqs.lines
    for k, name in enumerate(lines.names):
        fixed = lines.along[k, 0] == GROUND
        if fixed and not frame.ground:
            continue
        joints = [int(lines.joint[k])] + ([] if fixed else [int(j) for j in lines.along[k]])
        points = _inside(frame, joints)
        if points is None:
            continue
        if ("rail", k) not in used:
            yield Check(kind="rail", index=k, points=points, parts=(name,))
        value = int(lines.value[k])
        if value in frame.known and ("value", value) not in used:
            yield Check(kind="way", index=k, points=points, parts=(name,))


def _angles(eqs: Equations, frame: Growth, used: frozenset[Key]) -> Iterator[Check]:
    angles = eqs.angles
    for k, name in enumerate(angles.names):
        value = int(angles.value[k])
        if value not in frame.known or ("value", value) in used:
            continue
        on_ground = angles.base[k, 0] == GROUND
        if on_ground and not frame.ground:
            continue
        joints = [int(j) for j in (*angles.line[k], *angles.base[k]) if j != GROUND]
        if eqs.dim == 3:
            ends = [int(angles.line[k, 1])] + ([] if on_ground else [int(angles.base[k, 1])])
            joints = [*map(int, angles.axis[k]), *ends]
        points = _inside(frame, joints)
        if points:
            yield Check(kind="angle", index=k, points=points, parts=(name,))


def _targets(eqs: Equations, frame: Growth, used: frozenset[Key]) -> Iterator[Check]:
    for j, axis in sorted(frame.targets):
        key = ("target", j * eqs.dim + axis)
        if key not in used and j in frame.place:
            yield Check(kind="target", index=key[1], points=(j,),
                        parts=(eqs.rig.joint_names[j],))


def _planes(eqs: Equations, frame: Growth, used: frozenset[Key]) -> Iterator[Check]:
    for k, name in enumerate(eqs.planes.names):
        j = int(eqs.planes.joint[k])
        if ("plane", k) not in used and j in frame.place:
            yield Check(kind="plane", index=k, points=(j,), parts=(name,))


def _ties(eqs: Equations, frame: Growth, used: frozenset[Key]) -> Iterator[Check]:
    for t, row in enumerate(eqs.ties):
        if ("tie", t) in used:
            continue
        if all(int(v) in frame.known for v in np.flatnonzero(row)):
            yield Check(kind="tie", index=t, points=(), parts=(eqs.tie_names[t],))


def _inequalities(eqs: Equations, frame: Growth) -> Iterator[Check]:
    for value, k in eqs.ram_of.items():
        points = _inside(frame, [int(j) for j in eqs.distances.ends[k]])
        if np.isfinite(eqs.span[value]).any() and points:
            yield Check(kind="ram", index=value, points=points, parts=(eqs.values[value],))
    for k, v in enumerate(eqs.lines.value):
        joints = [int(eqs.lines.joint[k])]
        joints += [int(j) for j in eqs.lines.along[k] if j != GROUND]
        points = _inside(frame, joints)
        if np.isfinite(eqs.span[v]).any() and points:
            yield Check(kind="track", index=k, points=points, parts=(eqs.lines.names[k],))
    for k, name in enumerate(eqs.fences.names):
        both = (*eqs.fences.first[k], *eqs.fences.second[k], *eqs.fences.axis[k])
        points = _inside(frame, [int(j) for j in both if j != GROUND])
        if points:
            yield Check(kind="fence", index=k, points=points, parts=(name,))
    for k, (name, joints3, _) in enumerate(eqs.hands):
        points = _inside(frame, list(joints3))
        if points:
            yield Check(kind="hand", index=k, points=points, parts=(name,))
