"""The rig as plain, immutable data: what a rig file says once copies and sizes are expanded.

Knows nothing of solving. Lengths are in the rig's own unit, angles in degrees,
counter-clockwise positive. Joints are named by strings here; `lower` makes arrays of them.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field
from functools import cached_property
from hashlib import sha256
from typing import ClassVar, Literal

from rigpose.model.record import Record

Pair = tuple[str, str]
Span = tuple[float, float]
Coordinates = tuple[float, ...]

METRES = {"m": 1.0, "cm": 0.01, "mm": 0.001, "in": 0.0254, "ft": 0.3048}
"""One unit in metres; inch and foot are the international ones (exact since 1959)."""


class Part(Record, frozen=True, kw_only=True):
    """What every part has. ``layer``, ``skin`` and ``note`` are carried along untouched."""

    unshown: ClassVar[frozenset[str]] = frozenset({
        "note", "layer", "skin", "base_part", "first_part", "second_part", "helper"})
    name: str
    note: str = ""
    layer: float = 0.0
    skin: str = ""


class Joint(Part, frozen=True, kw_only=True):
    """A point; ``at`` is its place at rest as written, None where the file gives none.

    A ``helper`` stands in no file: a hinge, a universal or a slider made it to hold an axis. Two
    joints that say the same of a point are equal, whichever made them; rigs tell these apart.
    """

    at: Coordinates | None = None
    pin: bool = False
    helper: bool = False

    @property
    def _said(self) -> tuple[object, ...]:
        return self.name, self.at, self.pin, self.note, self.layer, self.skin

    def __eq__(self, other: object) -> bool:
        return isinstance(other, Joint) and self._said == other._said

    def __hash__(self) -> int:
        return hash(self._said)


class Bone(Part, frozen=True, kw_only=True):
    """A rigid length between two joints; ``play`` is slack for this bone, in the rig's unit."""

    ends: Pair
    length: float
    play: float = 0.0


class Plate(Part, frozen=True, kw_only=True):
    """A rigid body; ``shape`` holds its joints' places in a frame of its own, handed."""

    joints: tuple[str, ...]
    shape: tuple[Coordinates, ...]


class Rail(Part, frozen=True, kw_only=True):
    """A straight line on which ``joint`` slides, on the ground or along two joints.

    On the ground ``through`` and ``direction`` (unit length) are set; ``along`` is set for a
    moving slot. Its value is the way from ``through``, or from the first joint of ``along``.
    """

    joint: str
    through: Coordinates | None = None
    direction: Coordinates | None = None
    along: Pair | None = None
    range: Span | None = None


class Ram(Part, frozen=True, kw_only=True):
    """A bone whose length is driven, or free between the two ends of ``range``."""

    ends: Pair
    range: Span | None = None


class Crank(Part, frozen=True, kw_only=True):
    """An angle that may be driven: from ``base`` (None: the ground's x axis) to ``line``.

    Both are directed pairs of joints. ``turns`` and ``about`` are kept for people. The value is
    the counter-clockwise angle in degrees minus ``zero``; "rest" counts from the rest pose.
    ``base_part`` names the part that carries ``base``.

    In space the angle is about ``axis``, by the right hand from its first joint to its second,
    from the second joint of ``base`` (or the direction ``toward``, on the ground) to the second
    joint of ``line``; all three start on the axis.
    """

    turns: str
    line: Pair
    base: Pair | None = None
    about: str | None = None
    zero: float | Literal["rest"] = 0.0
    range: Span | None = None
    base_part: str = "ground"
    axis: Pair | None = None
    toward: Coordinates | None = None


Body = Bone | Plate | Ram
Drive = Crank | Ram | Rail


class Limit(Part, frozen=True, kw_only=True):
    """Allowed counter-clockwise turn from the first line to the second, in degrees.

    Lines are directed pairs, both seen from ``at`` outwards; ``either`` makes it unsigned. In
    space a signed one is about ``axis``, by the right hand.
    ``first_part`` and ``second_part`` name the parts that carry the lines.
    """

    first: Pair
    second: Pair
    at: str
    range: Span
    either: bool = False
    first_part: str = ""
    second_part: str = ""
    axis: Pair | None = None


class Plane(Part, frozen=True, kw_only=True):
    """A plane on the ground, in space, in which joints stay; ``normal`` has unit length."""

    joints: tuple[str, ...]
    through: Coordinates
    normal: Coordinates


class Tie(Part, frozen=True, kw_only=True):
    """A linear condition on drive values: sum of factor times value equals ``equals``."""

    sum: tuple[tuple[str, float], ...]
    equals: float = 0.0


class Frozen(Part, frozen=True, kw_only=True):
    """A rigid group of bones that keeps the shape that ``at`` shows, never its mirror image."""

    bones: tuple[str, ...]


@dataclass(frozen=True, slots=True)
class Stand:
    """Where a plane rig stands in the scene: an origin and two unit vectors at a right angle."""

    origin: tuple[float, float, float] = (0.0, 0.0, 0.0)
    x: tuple[float, float, float] = (1.0, 0.0, 0.0)
    y: tuple[float, float, float] = (0.0, 1.0, 0.0)


@dataclass(frozen=True)
class Rig:
    """A whole rig. Build it with `load_rig` or `make_rig`; both check everything.

    helper_joints : the names of the joints that hinges, universals and sliders made
    """

    name: str
    dim: int
    joints: tuple[Joint, ...]
    bones: tuple[Bone, ...] = ()
    plates: tuple[Plate, ...] = ()
    rails: tuple[Rail, ...] = ()
    rams: tuple[Ram, ...] = ()
    cranks: tuple[Crank, ...] = ()
    limits: tuple[Limit, ...] = ()
    ties: tuple[Tie, ...] = ()
    planes: tuple[Plane, ...] = ()
    frozen: tuple[Frozen, ...] = ()
    branches: Mapping[str, Mapping[str, str]] = field(default_factory=dict)
    names: Mapping[str, str] = field(default_factory=dict)
    unit: str = "m"
    slack: float = 1e-6
    close: float = 1e-6
    plane: Stand = field(default_factory=Stand)
    up: str = "y"
    note: str = ""
    source: str = ""
    studio: Mapping[str, object] = field(default_factory=dict)
    helper_joints: frozenset[str] = field(init=False, repr=False)

    def __post_init__(self) -> None:
        # Kept as a field, since rigs that differ in it alone are met in different words.
        made = frozenset(j.name for j in self.joints if j.helper)
        object.__setattr__(self, "helper_joints", made)

    def __hash__(self) -> int:
        # Cheap on purpose: caches ask for it often, and equality decides in the end.
        return hash((self.name, self.source, len(self.joints), len(self.bones)))

    @cached_property
    def joint_names(self) -> tuple[str, ...]:
        """The joints' names in the file's order, helpers too: the order of all arrays."""
        return tuple(j.name for j in self.joints)

    @cached_property
    def own_joints(self) -> tuple[str, ...]:
        """The names of the joints that people know: all but helpers, in the same order."""
        return tuple(j.name for j in self.joints if not j.helper)

    @cached_property
    def index(self) -> Mapping[str, int]:
        """Joint name to its place in the order."""
        return {name: k for k, name in enumerate(self.joint_names)}

    @cached_property
    def drive_names(self) -> tuple[str, ...]:
        """Cranks, then rams, then rails: whatever may be driven, or read off as a gauge."""
        return tuple(p.name for p in (*self.cranks, *self.rams, *self.rails))

    @cached_property
    def fingerprint(self) -> str:
        """A hash of everything that decides poses; notes, layers and skins don't count.

        It stands on the parts' repr, from which what decides no pose is left out.
        """
        parts = (self.dim, self.joints, self.bones, self.plates, self.rails, self.rams,
                 self.cranks, self.limits, self.ties, self.planes, self.frozen, self.unit)
        return sha256(repr(parts).encode()).hexdigest()[:16]
