"""Bends: to which side a joint lies of the two joints that it is tied to first.

Measured from positions and the rig alone, never from a plan, so a pose has the same bends however
it was found. A joint on a rail lies before or after the foot of the perpendicular from the joint
that it hangs on.
"""

from __future__ import annotations

from dataclasses import dataclass
from functools import lru_cache

import numpy as np
from numpy.typing import NDArray

from rigpose.model.equations import Array
from rigpose.model.rig import Rig

Signs = NDArray[np.int8]

STRAIGHT = 1e-7
"""Below this sine a bend is called straight: rounding moves it by up to a few 1e-8."""

SIDES = {1: "left", -1: "right", 0: "straight"}
ALONG = {1: "after", -1: "before", 0: "straight"}


@dataclass(frozen=True, slots=True)
class Bend:
    """What one joint's bend is measured against.

    joint, first, second : joint numbers; on a rail ``first`` is the joint that it hangs on and
    ``second`` is -1
    rail : the rail's number, -1 for none
    """

    joint: int
    first: int
    second: int
    rail: int = -1

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
    plates = [set(p.joints) for p in rig.plates]
    found = []
    for joint in rig.joints:
        tied = ties.get(joint.name, [])
        if joint.pin or not tied:
            continue
        if joint.name in rails:
            found.append(Bend(rig.index[joint.name], rig.index[tied[0]], -1, rails[joint.name]))
            continue
        together = [p for p in plates if {joint.name, tied[0]} <= p]
        second = next((t for t in tied[1:] if not any(t in p for p in together)), None)
        if second is not None:
            found.append(Bend(rig.index[joint.name], rig.index[tied[0]], rig.index[second]))
    return tuple(found)


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
    out = np.empty((*positions.shape[:-2], len(bends)), dtype=np.int8)
    for k, bend in enumerate(bends):
        out[..., k] = _signs(_sine(rig, positions, bend))
    return out


def _signs(sine: Array) -> Signs:
    sign = (sine > STRAIGHT).astype(np.int8) - (sine < -STRAIGHT).astype(np.int8)
    sign[np.isnan(sine)] = -2
    return sign


def _sine(rig: Rig, positions: Array, bend: Bend) -> Array:
    """A number in -1 … 1 whose sign is the bend."""
    place = positions[..., bend.joint, :]
    away = place - positions[..., bend.first, :]
    if bend.rail >= 0:
        e = _rail_direction(rig, positions, bend.rail)
        share = away[..., 0] * e[..., 0] + away[..., 1] * e[..., 1]
    else:
        e = positions[..., bend.second, :] - positions[..., bend.first, :]
        share = e[..., 0] * away[..., 1] - e[..., 1] * away[..., 0]
    long = np.sqrt((e[..., 0] ** 2 + e[..., 1] ** 2) * (away[..., 0] ** 2 + away[..., 1] ** 2))
    with np.errstate(invalid="ignore", divide="ignore"):
        sine: Array = np.where(long > 0, share / long, np.where(np.isnan(long), np.nan, 0.0))
    return sine


def _rail_direction(rig: Rig, positions: Array, number: int) -> Array:
    rail = rig.rails[number]
    if rail.along is None:
        return np.array(rail.direction)
    a, b = (rig.index[j] for j in rail.along)
    way: Array = positions[..., b, :] - positions[..., a, :]
    return way
