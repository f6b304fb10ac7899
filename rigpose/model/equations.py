"""The rig as plain arrays, scaled to size one about an origin of its own.

Above this module nothing asks which kind a part is: there are squared distances, rigid bodies,
points on lines, angles between lines and linear ties between values, each with an index back to
the names of the parts. ``n`` is the number of joints, ``v`` the number of values.
"""

from __future__ import annotations

from dataclasses import dataclass, field
from functools import cached_property

import numpy as np
from numpy.typing import NDArray

from rigpose.model.rig import Rig

Array = NDArray[np.float64]
Ints = NDArray[np.intp]

GROUND = -1
"""Stands for the ground's x axis where a joint's index is expected."""


@dataclass(frozen=True)
class Distances:
    """Squared distances: ``ends (m, 2)``, ``length (m,)``; ``value (m,)`` is -1 for a bone.

    A ram's row names its value instead; its length is NaN until it is known. ``play (m,)`` is
    the slack that the bone itself is given.
    """

    names: tuple[str, ...]
    ends: Ints
    length: Array
    value: Ints
    play: Array


@dataclass(frozen=True)
class Body:
    """A rigid body: its joints ``(k,)`` and their places ``(k, dim)`` in a frame of its own.

    ``base`` holds the positions (not joint numbers) of its two joints farthest apart.
    """

    name: str
    joints: Ints
    shape: Array

    @cached_property
    def base(self) -> tuple[int, int]:
        gap = np.linalg.norm(self.shape[:, None] - self.shape[None], axis=-1)
        a, b = np.unravel_index(int(np.argmax(np.triu(gap))), gap.shape)
        return int(a), int(b)

    @cached_property
    def where(self) -> dict[int, int]:
        """Joint number to its place in ``joints``."""
        return {int(j): k for k, j in enumerate(self.joints)}

    def distance(self, i: int, j: int) -> float:
        """Between two of its joints, given by joint numbers."""
        return float(np.linalg.norm(self.shape[self.where[i]] - self.shape[self.where[j]]))


@dataclass(frozen=True)
class Lines:
    """Joints on straight lines: ``joint (r,)``; fixed ones by ``through`` and ``direction``
    ``(r, dim)``, carried ones by ``along (r, 2)`` (GROUND twice where the line is fixed);
    ``value (r,)`` is the value that measures the way along."""

    names: tuple[str, ...]
    joint: Ints
    through: Array
    direction: Array
    along: Ints
    value: Ints


@dataclass(frozen=True)
class Angles:
    """Cranks: ``line (c, 2)``, ``base (c, 2)`` (GROUND twice: the x axis), ``zero (c,)`` in
    radians (NaN: counted from rest), ``value (c,)``.

    In space the second joints of line and base are seen about ``axis (c, 2)``; where the base is
    GROUND it is the direction ``toward (c, 3)``.
    """

    names: tuple[str, ...]
    line: Ints
    base: Ints
    zero: Array
    value: Ints
    axis: Ints
    toward: Array


@dataclass(frozen=True)
class Planes:
    """Joints in fixed planes: ``joint (p,)``, ``through`` and ``normal`` ``(p, 3)``."""

    names: tuple[str, ...]
    joint: Ints
    through: Array
    normal: Array


@dataclass(frozen=True)
class Fences:
    """Limits: turns from ``first (l, 2)`` to ``second (l, 2)`` in ``low .. low + width``; in
    space signed ones are about ``axis (l, 2)`` (GROUND twice: none)."""

    names: tuple[str, ...]
    first: Ints
    second: Ints
    low: Array
    width: Array
    either: NDArray[np.bool_]
    axis: Ints


@dataclass(frozen=True)
class Equations:
    """All conditions of one rig. Lengths and places are divided by ``scale`` after ``origin``
    was taken off; angles are radians."""

    rig: Rig
    scale: float
    origin: Array
    at: Array
    pinned: NDArray[np.bool_]
    distances: Distances
    bodies: tuple[Body, ...]
    lines: Lines
    angles: Angles
    fences: Fences
    planes: Planes
    values: tuple[str, ...]
    span: Array
    unit: Array
    tie_names: tuple[str, ...]
    ties: Array
    tie_equals: Array
    hands: tuple[tuple[str, tuple[int, int, int], float], ...] = field(default=())

    @property
    def dim(self) -> int:
        """2 or 3."""
        return self.rig.dim

    @property
    def n(self) -> int:
        """How many joints."""
        return len(self.at)

    @cached_property
    def value_index(self) -> dict[str, int]:
        """Drive name to its place in ``values``."""
        return {name: k for k, name in enumerate(self.values)}

    @cached_property
    def ram_of(self) -> dict[int, int]:
        """Value number to the distance row that it is the length of."""
        return {int(v): k for k, v in enumerate(self.distances.value) if v >= 0}

    def inward(self, positions: Array) -> Array:
        """Positions ``(..., dim)`` in the rig's frame to the scaled frame."""
        return (positions - self.origin) / self.scale

    def outward(self, positions: Array) -> Array:
        """The way back of `inward`."""
        return positions * self.scale + self.origin
