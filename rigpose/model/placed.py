"""A whole rig moved, turned, mirrored, scaled and renamed, as one copy inside another.

The copy's ground moves with it: a crank of the copy has the same value in the same pose as in
its own file. In a mirrored copy of the plane angles stay counter-clockwise, so their values change
sign, and with them ranges and ties. In space it is the axis that is turned round: a mirror image
by the right hand about the axis is the image about the opposite one, so all values stay. The sides
of named branches change in both.
"""

from __future__ import annotations

import math
from collections.abc import Mapping
from dataclasses import dataclass, replace
from typing import TypeVar

from rigpose.model.bodies import GROUND
from rigpose.model.rig import (
    Bone,
    Coordinates,
    Crank,
    Frozen,
    Joint,
    Limit,
    Pair,
    Plane,
    Plate,
    Rail,
    Ram,
    Rig,
    Span,
    Tie,
)

Matrix = tuple[Coordinates, ...]
PartT = TypeVar("PartT", Joint, Bone, Plate, Plane, Rail, Ram, Crank, Limit, Tie, Frozen)

QUARTERS = {0.0: (1.0, 0.0), 90.0: (0.0, 1.0), 180.0: (-1.0, 0.0), 270.0: (0.0, -1.0)}
"""Cosine and sine that must come out exactly: quarter turns are what people build with."""
OTHER_SIDE = {"left": "right", "right": "left"}


@dataclass(frozen=True, slots=True)
class Move:
    """Where a copy comes to stand: mirrored first, then turned, scaled, shifted.

    matrix : (dim, dim) rows of mirror and turn together; shift : (dim,), in the parent's unit
    scale : one unit of the copy's file in the parent's
    mirrored : whether left has become right
    x_axis : in the plane, where the copy's own x axis points afterwards, degrees
    """

    matrix: Matrix
    shift: Coordinates
    scale: float = 1.0
    mirrored: bool = False
    x_axis: float = 0.0

    def way(self, vector: Coordinates) -> Coordinates:
        """A direction after the move; its length stays."""
        return tuple(math.fsum(m * v for m, v in zip(row, vector, strict=True))
                     for row in self.matrix)

    def place(self, point: Coordinates) -> Coordinates:
        """A place after the move."""
        turned = self.way(point)
        return tuple(c * self.scale + s for c, s in zip(turned, self.shift, strict=True))

    def span(self, span: Span | None) -> Span | None:
        """A range of lengths after the move."""
        return None if span is None else (span[0] * self.scale, span[1] * self.scale)

    @property
    def sign(self) -> float:
        """What values of angles are multiplied by; in space their axes turn round instead."""
        return -1.0 if self.mirrored and len(self.matrix) == 2 else 1.0

    def angles(self, span: Span) -> Span:
        """A range of signed angles after the move."""
        return (0.0 - span[1], 0.0 - span[0]) if self.sign < 0 else span

    def axis(self, axis: Pair) -> Pair:
        """The two joints of an axis in space, in the order that keeps the sense of turning."""
        return (axis[1], axis[0]) if self.mirrored else axis


def cosine_sine(degrees: float) -> tuple[float, float]:
    """Both of an angle, exact for quarter turns.

    >>> cosine_sine(-90)
    (0.0, -1.0)
    """
    rest = math.fmod(degrees, 360.0)
    rest = rest + 360.0 if rest < 0 else rest
    angle = math.radians(rest)
    return QUARTERS.get(rest) or (math.cos(angle), math.sin(angle))


def plane_move(degrees: float, mirror: str | None, scale: float) -> Move:
    """A move in the plane, not yet shifted; `mirror` names the coordinate that changes sign."""
    c, s = cosine_sine(degrees)
    x, y = (-1.0 if mirror == "x" else 1.0), (-1.0 if mirror == "y" else 1.0)
    matrix = ((c * x, -s * y), (s * x, c * y))
    start = 180.0 if mirror == "x" else 0.0
    return Move(matrix, (0.0, 0.0), scale, mirror is not None, start + degrees)


def space_move(degrees: float, axis: Coordinates, mirror: str | None, scale: float) -> Move:
    """A move in space: a turn about a unit ``axis`` (Rodrigues 1840) after the mirror."""
    c, s = cosine_sine(degrees)
    a = axis
    cross = ((0.0, -a[2], a[1]), (a[2], 0.0, -a[0]), (-a[1], a[0], 0.0))
    signs = [-1.0 if mirror == name else 1.0 for name in "xyz"]
    matrix = tuple(
        tuple(((c if i == k else 0.0) + s * cross[i][k] + (1 - c) * a[i] * a[k]) * signs[k]
              for k in range(3))
        for i in range(3))
    return Move(matrix, (0.0, 0.0, 0.0), scale, mirror is not None)


@dataclass(frozen=True)
class _Naming:
    prefix: str
    joined: Mapping[str, str]

    def joint(self, name: str) -> str:
        return self.joined.get(name) or f"{self.prefix}/{name}"

    def part(self, name: str) -> str:
        return f"{self.prefix}/{name}"

    def pair(self, pair: Pair) -> Pair:
        return self.joint(pair[0]), self.joint(pair[1])

    def of(self, part: PartT) -> PartT:
        return replace(part, name=self.part(part.name))


def placed(rig: Rig, move: Move, prefix: str, joined: Mapping[str, str]) -> Rig:
    """The rig after a move, its parts named ``prefix/part``; joined joints are left out.

    ``joined`` maps joints of the rig to the names of those that they become one with.
    Lengths are kept as they were measured in the rig's own file. Bends of joined joints are left
    out of named branches: what such a joint hangs on is no longer the copy's own affair.
    """
    n = _Naming(prefix, joined)
    cranks = {c.name for c in rig.cranks}
    return replace(
        rig,
        joints=tuple(_joint(n.of(j), move) for j in rig.joints if j.name not in joined),
        bones=tuple(replace(n.of(b), ends=n.pair(b.ends), length=b.length * move.scale,
                            play=b.play * move.scale) for b in rig.bones),
        plates=tuple(_plate(n.of(p), move, n) for p in rig.plates),
        rails=tuple(_rail(n.of(r), move, n) for r in rig.rails),
        planes=tuple(_plane(n.of(p), move, n) for p in rig.planes),
        rams=tuple(replace(n.of(r), ends=n.pair(r.ends), range=move.span(r.range))
                   for r in rig.rams),
        cranks=tuple(_crank(n.of(c), move, n) for c in rig.cranks),
        limits=tuple(_limit(n.of(m), move, n) for m in rig.limits),
        ties=tuple(_tie(n.of(t), move, n, cranks) for t in rig.ties),
        frozen=tuple(replace(n.of(f), bones=tuple(map(n.part, f.bones))) for f in rig.frozen),
        branches=_branches(rig, move, n), names={},
    )


def placed_axes(hinges: Mapping[str, Pair], move: Move, prefix: str,
                joined: Mapping[str, str]) -> dict[str, Pair]:
    """The axes of a rig's hinges after a move, by their new names."""
    n = _Naming(prefix, joined)
    return {n.part(name): n.pair(move.axis(axis)) for name, axis in hinges.items()}


def _joint(joint: Joint, move: Move) -> Joint:
    return joint if joint.at is None else replace(joint, at=move.place(joint.at))


def _plate(plate: Plate, move: Move, n: _Naming) -> Plate:
    """The shape turns along, which changes nothing; mirrored it is the mirror image."""
    shape = tuple(tuple(c * move.scale for c in move.way(p)) for p in plate.shape)
    return replace(plate, joints=tuple(map(n.joint, plate.joints)), shape=shape)


def _rail(rail: Rail, move: Move, n: _Naming) -> Rail:
    return replace(
        rail, joint=n.joint(rail.joint), range=move.span(rail.range),
        along=None if rail.along is None else n.pair(rail.along),
        through=None if rail.through is None else move.place(rail.through),
        direction=None if rail.direction is None else move.way(rail.direction),
    )


def _plane(plane: Plane, move: Move, n: _Naming) -> Plane:
    return replace(plane, joints=tuple(map(n.joint, plane.joints)),
                   through=move.place(plane.through), normal=move.way(plane.normal))


def _crank(crank: Crank, move: Move, n: _Naming) -> Crank:
    zero = crank.zero
    if not isinstance(zero, str):
        start = 0.0 if crank.base or crank.axis else move.x_axis
        zero = start + move.sign * zero
    axis = None if crank.axis is None else n.pair(move.axis(crank.axis))
    return replace(
        crank, turns=n.part(crank.turns), line=_from_axis(n.pair(crank.line), axis), zero=zero,
        base=None if crank.base is None else _from_axis(n.pair(crank.base), axis),
        base_part=crank.base_part if crank.base is None else n.part(crank.base_part),
        about=None if crank.about is None else n.joint(crank.about), axis=axis,
        toward=None if crank.toward is None else move.way(crank.toward),
        range=None if crank.range is None else move.angles(crank.range),
    )


def _from_axis(line: Pair, axis: Pair | None) -> Pair:
    """In space a line starts at the first joint of its axis."""
    return line if axis is None else (axis[0], line[1])


def _limit(limit: Limit, move: Move, n: _Naming) -> Limit:
    axis = None if limit.axis is None else n.pair(move.axis(limit.axis))
    first, second = (_from_axis(n.pair(line), axis) for line in (limit.first, limit.second))
    return replace(
        limit, first=first, second=second, at=first[0], axis=axis,
        first_part=_part(limit.first_part, n), second_part=_part(limit.second_part, n),
        range=limit.range if limit.either else move.angles(limit.range),
    )


def _part(name: str, n: _Naming) -> str:
    return name if name == GROUND else n.part(name)


def _tie(tie: Tie, move: Move, n: _Naming, cranks: set[str]) -> Tie:
    """The same condition on the copy's values: mirrored angles and scaled ways undo it."""
    return replace(tie, sum=tuple(
        (n.part(drive), factor * move.sign if drive in cranks else factor / move.scale)
        for drive, factor in tie.sum))


def _branches(rig: Rig, move: Move, n: _Naming) -> dict[str, dict[str, str]]:
    found = {}
    for name, bends in rig.branches.items():
        own = {n.joint(joint): OTHER_SIDE.get(side, side) if move.mirrored else side
               for joint, side in bends.items() if joint not in n.joined}
        if own:
            found[n.part(name)] = own
    return found
