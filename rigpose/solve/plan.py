"""A plan: the order in which joints are placed for one set of known names, without any number
of a frame. Planning is in `planner`, running in `run`.

Points are numbered: ground places of joints have the joints' own numbers, places in the frames
of floating bodies and helper points follow. Every step names the points it reads and writes.
"""

from __future__ import annotations

from dataclasses import dataclass, field
from functools import cached_property

from rigpose.model.equations import Equations
from rigpose.model.record import Record
from rigpose.model.system import System

Point = int
Local = tuple[float, ...] | Point
"""A place in a body's own frame: numbers, or a point of a condensed group's frame."""


class Length(Record, frozen=True):
    """A length: a constant, the value of a ram, or the gap between two points of a frame."""

    constant: float = 0.0
    value: int = -1
    points: tuple[Point, Point] | None = None


class Heading(Record, frozen=True):
    """A direction: ``sign * (value + zero)`` turned from the ground's x axis or from a line."""

    value: int
    zero: float
    sign: float
    base: tuple[Point, Point] | None


class Line(Record, frozen=True):
    """A straight line. One of: constant, through two points, one coordinate given as a target
    (``axis`` of ``joint``), square to a rail at a driven way, from a point with a heading, or
    through the first point in the direction from the second to the third (``slot``).

    ``moved`` shifts it by the way from the first of two points to the second: a body of known
    heading hands the lines of all its joints to one of them.
    """

    kind: str
    through: tuple[float, ...] = ()
    direction: tuple[float, ...] = ()
    points: tuple[Point, ...] = ()
    joint: int = -1
    axis: int = -1
    value: int = -1
    heading: Heading | None = None
    moved: tuple[Point, Point] | None = None


class Sheet(Record, frozen=True):
    """A plane in space: fixed, one coordinate given as a target (``axis`` of ``joint``), square
    to a rail at a driven way (``value``), or through an axis of two points with a heading."""

    kind: str
    through: tuple[float, ...] = ()
    normal: tuple[float, ...] = ()
    joint: int = -1
    axis: int = -1
    value: int = -1


class Circle(Record, frozen=True):
    """All places at a given length from a placed point: a circle, in space a sphere."""

    centre: Point
    radius: Length


class Step(Record, frozen=True, kw_only=True):
    """What every step has: the parts of the file behind it, for messages."""

    parts: tuple[str, ...] = ()


class Given(Step, frozen=True):
    """A joint all of whose coordinates are targets."""

    dst: Point
    joint: int


class Meet(Step, frozen=True):
    """A joint where two curves meet; ``bit`` is the number of its choice (-1: one way only)."""

    dst: Point
    first: Circle | Line
    second: Circle | Line
    bit: int = -1


class Carry(Step, frozen=True):
    """Joints of a body that has two placed points; ``local`` are places or points of a frame."""

    dst: tuple[Point, ...]
    local: tuple[Local, ...]
    placed: tuple[Point, Point]
    base: tuple[Local, Local]


class Aim(Step, frozen=True):
    """Joints of a body with one placed point and a line of known heading."""

    dst: tuple[Point, ...]
    local: tuple[Local, ...]
    pivot: Point
    pivot_local: Local
    line: tuple[Local, Local]
    heading: Heading


class Swing(Step, frozen=True):
    """Joints of a body with one placed point, turned until its slot passes a placed point."""

    dst: tuple[Point, ...]
    local: tuple[Local, ...]
    pivot: Point
    pivot_local: Local
    slot: tuple[Local, Local]
    through: Point
    bit: int


class Slide(Step, frozen=True):
    """A joint at a driven way along a carried line."""

    dst: Point
    line: tuple[Point, Point]
    value: int


class Seat(Step, frozen=True):
    """Fixes the frame of a floating group: the joints of its first body at their own places."""

    dst: tuple[Point, ...]
    local: tuple[Local, ...]


class Shift(Step, frozen=True):
    """Helper point: a placed point moved by what a known heading makes of two local places."""

    dst: Point
    point: Point
    minus: Point
    plus: Point


class Orient(Step, frozen=True):
    """Helper points: the places of a body turned to a known heading, about an origin of its own."""

    dst: tuple[Point, ...]
    local: tuple[Local, ...]
    line: tuple[Local, Local]
    heading: Heading


class Level(Step, frozen=True):
    """Helper points: the places of a body turned so that two of its joints lie on two parallel
    lines, the second ``offset`` to the left of the first along ``direction``."""

    dst: tuple[Point, ...]
    local: tuple[Local, ...]
    pair: tuple[Local, Local]
    direction: tuple[float, float]
    offset: float
    bit: int


class Junction(Step, frozen=True):
    """A joint in space where surfaces meet: lines first, then sheets, then spheres; ``bit`` is the
    number of its choice (-1: one way only); ``fitted`` where more lengths hold the joint, so that
    these three alone don't make its margin."""

    dst: Point
    curves: tuple[Circle | Line | Sheet, ...]
    bit: int = -1
    fitted: bool = False


class Fit(Step, frozen=True):
    """Moves a joint in space onto more lengths than place it, all at once, by least squares."""

    dst: Point
    circles: tuple[Circle, ...]


class Hang(Step, frozen=True):
    """Joints of a body in space carried by three placed points (two, where all lie in a line)."""

    dst: tuple[Point, ...]
    local: tuple[Local, ...]
    placed: tuple[Point, ...]
    base: tuple[Local, ...]


class Ride(Step, frozen=True):
    """Joints of a body that can only be shifted, ``ways`` from one of its joints that is placed."""

    dst: tuple[Point, ...]
    ways: tuple[tuple[float, ...], ...]
    pivot: Point


class Hinge(Step, frozen=True):
    """Joints of a body in space turned about an axis of two placed points by a driven angle.

    The angle is ``sign * (value + zero)`` from the placed point ``start`` (or the direction
    ``toward``) to the body's own ``pointer``.
    """

    dst: tuple[Point, ...]
    local: tuple[Local, ...]
    axis: tuple[Point, Point]
    axis_local: tuple[Local, Local]
    pointer: Local
    start: Point | None
    toward: tuple[float, ...]
    value: int
    zero: float
    sign: float


class Gauge(Step, frozen=True):
    """Reads a value off placed joints, because a tie needs it."""

    value: int


class Tied(Step, frozen=True):
    """A value from a tie all of whose other values are known."""

    value: int
    tie: int


class Check(Step, frozen=True):
    """A condition that the places already fix: prunes.

    kind : distance, body, rail, way, angle, tie, target (equations, within slack), or ram, track,
    fence, hand (inequalities). ``index`` is the row in the equations.
    """

    kind: str
    index: int
    points: tuple[Point, ...]


class Cluster(Step, frozen=True, eq=False):
    """Joints that only several equations together can place; solved by Newton from many starts.

    ``rows`` are row numbers of ``system``, ``square`` an independent choice
    of them, ``around`` the placed joints that they touch, ``bit`` its number among the choices.
    """

    system: System
    joints: tuple[int, ...]
    around: tuple[int, ...]
    rows: tuple[int, ...]
    square: tuple[int, ...]
    bit: int

    def _key(self) -> tuple[object, ...]:
        return self.parts, self.joints, self.around, self.rows, self.square, self.bit

    def __eq__(self, other: object) -> bool:
        return isinstance(other, Cluster) and self._key() == other._key()

    def __hash__(self) -> int:
        return hash(self._key())


@dataclass(frozen=True)
class Group:
    """Steps that share unknowns: their branches are listed by themselves."""

    steps: tuple[Step, ...]
    joints: tuple[int, ...]
    bits: int
    binary: bool


@dataclass(frozen=True)
class Plan:
    """The order for one set of known names.

    base : steps that depend on known things only; groups : independent of one another
    loose : joints that still move; redundant : parts that only check
    singular : parts of meetings that are dead centres at rest and close by
    unreachable : targets along which their joint cannot move
    forced : joints placed where their curves only touch, at rest and close by
    """

    eqs: Equations
    drives: tuple[str, ...]
    targets: tuple[tuple[int, int], ...]
    base: tuple[Step, ...]
    groups: tuple[Group, ...]
    loose: tuple[int, ...]
    redundant: tuple[str, ...]
    points: int
    notes: tuple[str, ...] = field(default=())
    forced: tuple[int, ...] = ()

    @cached_property
    def bits(self) -> int:
        """How many choices all groups have together."""
        return sum(g.bits for g in self.groups)

    @cached_property
    def reads_values(self) -> bool:
        """Whether some value is read off placed joints on the way."""
        steps = (*self.base, *(s for g in self.groups for s in g.steps))
        return any(isinstance(s, Gauge) for s in steps)

    @cached_property
    def clusters(self) -> tuple[Cluster, ...]:
        """Blocks of several joints."""
        return tuple(s for g in self.groups for s in g.steps if isinstance(s, Cluster))
