"""Bends: to which side a joint lies of the two joints that it is tied to first.

Measured from positions and the rig alone, never from a plan, so a pose has the same bends however
it was found. A joint on a rail lies before or after the foot of the perpendicular from the joint
that it hangs on.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from functools import lru_cache

import numpy as np
from numpy.typing import NDArray

from rigpose.model.equations import Array
from rigpose.model.rig import Rig

Signs = NDArray[np.int8]

STRAIGHT = 1e-7
"""Below this sine a bend is called straight: rounding moves it by up to a few 1e-8."""

POSES = 1 << 11
"""Poses looked at in one go: few enough to stay in the cache."""

SIDES = {1: "left", -1: "right", 0: "straight"}
ALONG = {1: "after", -1: "before", 0: "straight"}


@dataclass(frozen=True, slots=True)
class Bend:
    """What one joint's bend is measured against.

    joint, first, second : joint numbers; on a rail ``first`` is the joint that it hangs on and
    ``second`` is -1
    rail : the rail's number, -1 for none
    third : in space the third joint, -1 where a plane's normal stands for it
    plane : the number of that plane, -1 for none
    """

    joint: int
    first: int
    second: int
    rail: int = -1
    third: int = -1
    plane: int = -1

    def word(self, sign: int) -> str:
        """Left, right, before, after or straight; an empty text where there is no pose."""
        return (SIDES if self.rail < 0 else ALONG).get(int(sign), "")


@lru_cache(maxsize=64)
def bends_of(rig: Rig) -> tuple[Bend, ...]:
    """All joints that have a bend, in the file's order.

    A joint is tied by bones first, then by plates, then by rams, each in the file's order. What
    can't differ (a pin; three joints of one plate) has no bend.
    """
    rails = {r.joint: k for k, r in reversed(list(enumerate(rig.rails)))}
    ties = _ties(rig)
    plates_on: dict[str, list[set[str]]] = {}
    for plate in rig.plates:
        together = set(plate.joints)
        for name in plate.joints:
            plates_on.setdefault(name, []).append(together)
    found = []
    for joint in rig.joints:
        tied = ties.get(joint.name, [])
        if joint.pin or not tied:
            continue
        if joint.name in rails:
            found.append(Bend(rig.index[joint.name], rig.index[tied[0]], -1, rails[joint.name]))
            continue
        if rig.dim == 3:
            found += _in_space(rig, joint.name, tied, plates_on.get(joint.name, []))
            continue
        shared = [p for p in plates_on.get(joint.name, ()) if tied[0] in p]
        second = next((t for t in tied[1:] if not any(t in p for p in shared)), None)
        if second is not None:
            found.append(Bend(rig.index[joint.name], rig.index[tied[0]], rig.index[second]))
    return tuple(found)


def _in_space(rig: Rig, joint: str, tied: list[str], plates: list[set[str]]) -> list[Bend]:
    """To which side of the plane through its first three neighbours a joint lies (where one of
    them is its hinge, through this axis and the other); of a joint that stays in a plane, to which
    side of its first two, seen from the tip of the normal."""
    here = rig.index[joint]
    plane = next((k for k, p in enumerate(rig.planes) if joint in p.joints), -1)
    need = 2 if plane >= 0 else 3
    if len(tied) < need:
        return []
    chosen = tied[:need - 1]
    # All in one plate: that side can't differ.
    others = [t for t in tied[need - 1:] if not any({joint, *chosen, t} <= p for p in plates)]
    if not others:
        return []
    # On the circle of a hinge a joint is seen from the tip of its axis: all else may lie flat.
    axis = (t for t in others if t in rig.helper_joints and joint not in rig.helper_joints
            and any({joint, t, c} <= p for p in plates for c in chosen))
    chosen = [*chosen, next(axis, others[0])]
    a, b, *rest = (rig.index[c] for c in chosen)
    return [Bend(here, a, b, third=rest[0] if rest else -1, plane=plane)]


def _ties(rig: Rig) -> dict[str, list[str]]:
    """Joint to the joints that it is tied to, in order, none twice."""
    ties: dict[str, dict[str, None]] = {}
    groups = [b.ends for b in rig.bones] + [p.joints for p in rig.plates]
    for group in (*groups, *(r.ends for r in rig.rams)):
        for a in group:
            ties.setdefault(a, {}).update((b, None) for b in group if b != a)
    return {joint: list(others) for joint, others in ties.items()}


def measure_bends(rig: Rig, positions: Array) -> Signs:
    """Signs ``(..., n_bends)`` of poses ``(..., n_joints, dim)``: 1 left or after, -1 right or
    before, 0 straight; -2 where there is no pose."""
    bends = bends_of(rig)
    flat = positions.reshape(-1, *positions.shape[-2:])
    out = np.empty((len(flat), len(bends)), dtype=np.int8)
    for start in range(0, len(flat), POSES):
        # Joints lead, so that what follows runs along the poses without gaps.
        block = np.ascontiguousarray(flat[start:start + POSES].transpose(1, 2, 0))
        for k, bend in enumerate(bends):
            out[start:start + POSES, k] = side_of(rig, block, bend)
    return out.reshape(*positions.shape[:-2], len(bends))


def joints_of(rig: Rig, bend: Bend) -> tuple[int, ...]:
    """The joints whose places tell a bend."""
    along = rig.rails[bend.rail].along if bend.rail >= 0 else None
    all_of = (bend.joint, bend.first, bend.second, bend.third, *(rig.index[j] for j in along or ()))
    return tuple(dict.fromkeys(j for j in all_of if j >= 0))


Places = Array | Mapping[int, Array]
"""``(n_joints, dim, m)``, or by the joint's number ``(dim, m)`` or ``(dim, 1)``."""


def side_of(rig: Rig, block: Places, bend: Bend) -> Signs:
    """Signs ``(m,)`` of one bend: 1 left or after, -1 right or before, 0 straight, -2 no pose."""
    away = block[bend.joint] - block[bend.first]
    if bend.rail >= 0:
        e = _rail_direction(rig, block, bend.rail)
        share = _dot(e, away)
    elif rig.dim == 3:
        e = _normal(rig, block, bend)
        share = _dot(e, away)
    else:
        e = block[bend.second] - block[bend.first]
        share = e[0] * away[1]
        share = share - e[1] * away[0]
    sign: Signs = (share > 0).view(np.int8)
    sign += sign
    sign -= 1
    if not np.abs(share).min(initial=np.inf) > STRAIGHT * _longest(e) * _longest(away):
        straight = share * share <= STRAIGHT * STRAIGHT * (_dot(e, e) * _dot(away, away))
        sign[straight] = 0
        sign[np.isnan(share)] = -2
    return sign


def _longest(v: Array) -> float:
    """No less than the length of any of the vectors ``(dim, m)``; NaN where some are."""
    return float(np.sqrt(len(v)) * max(v.max(initial=0.0), -v.min(initial=0.0)))


def _dot(a: Array, b: Array) -> Array:
    """Scalar products ``(m,)`` of vectors ``(dim, m)``."""
    total: Array = a[0] * b[0]
    for mine, theirs in zip(a[1:], b[1:], strict=True):
        total = total + mine * theirs
    return total


def _normal(rig: Rig, block: Places, bend: Bend) -> Array:
    """What a joint's side is measured along, ``(3, m)``."""
    e = block[bend.second] - block[bend.first]
    if bend.plane >= 0:
        normal: Array = np.cross(np.array(rig.planes[bend.plane].normal), e, axisb=0, axisc=0)
        return normal
    f = block[bend.third] - block[bend.first]
    across: Array = np.cross(e, f, axis=0)
    return across


def _rail_direction(rig: Rig, block: Places, number: int) -> Array:
    rail = rig.rails[number]
    if rail.along is None:
        return np.array(rail.direction)[:, None]
    a, b = (rig.index[j] for j in rail.along)
    way: Array = block[b] - block[a]
    return way
