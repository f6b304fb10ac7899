"""What each part may say in a rig file, short forms aside; the JSON Schema is made from this.

A docstring's first part (up to a semicolon) finishes the sentence "must be …" in messages, and
so does the first part of each key's description: they are written for people, once.
"""

from __future__ import annotations

from typing import Annotated, Any, Literal

from msgspec import UNSET, Meta, Struct, UnsetType, field

Number = int | float | str
Names = list[str]

Place = Annotated[
    list[Number], Meta(description="a list of coordinates, one for each dimension")
]
Range = Annotated[
    list[Number] | None,
    Meta(description="a list of two numbers, lowest and highest; left out: no bounds"),
]
Ends = Annotated[Names, Meta(description="a list of two joint names; from the first to the second")]
Line = Annotated[
    Names | None,
    Meta(
        description="a list of two joint names; a directed line of the part; in space from the "
        "axis to a joint off it"
    ),
]
AxisLine = Annotated[
    Names | None,
    Meta(description="a list of two joint names; in space, the axis, by the right hand"),
]
Vector = Annotated[
    list[Number], Meta(description="a list of three coordinates; of any length but zero")
]
Parts = Annotated[
    Names,
    Meta(description='a list of two names of bones or plates; one of them may be "ground"'),
]


class PartSpec(Struct, kw_only=True, forbid_unknown_fields=True):
    """a table; what every part may carry."""

    note: Annotated[str, Meta(description="text; for people, carried along untouched")] = ""
    layer: Annotated[Number, Meta(description="a number; drawing order, carried along")] = 0.0
    skin: Annotated[str, Meta(description="text; names how the part is drawn, carried along")] = ""


class JointSpec(PartSpec, kw_only=True, forbid_unknown_fields=True):
    """a list of coordinates, or a table; a point of the rig."""

    at: Annotated[
        list[Number] | None,
        Meta(description="a list of coordinates, one for each dimension; the place at rest"),
    ] = None
    pin: Annotated[bool, Meta(description="true or false; true fixes the joint to the ground")] = (
        False
    )


class BoneSpec(PartSpec, kw_only=True, forbid_unknown_fields=True):
    """a list of two joint names, or a table; a rigid length between two joints."""

    ends: Ends
    length: Annotated[
        Number | None,
        Meta(description="a number or arithmetic; wins over `at`; left out: measured from `at`"),
    ] = None
    play: Annotated[
        Number, Meta(description="a number or arithmetic; slack of this bone, in the rig's unit")
    ] = 0.0


class PlateSpec(PartSpec, kw_only=True, forbid_unknown_fields=True):
    """a list of three or more joint names, or a table; a rigid body that is never mirrored."""

    joints: Annotated[Names, Meta(description="a list of three or more joint names")]
    lengths: Annotated[
        list[tuple[str, str, Number]] | None,
        Meta(description="a list of [joint, joint, length]; the shape without `at`; needs `hand`"),
    ] = None
    hand: Annotated[
        Literal["left", "right"] | None,
        Meta(description='"left" or "right"; to which side the first three joints turn'),
    ] = None
    shape: Annotated[
        list[list[Number]] | None,
        Meta(description="a list of coordinates for each joint; the shape in a frame of its own"),
    ] = None


class RailSpec(PartSpec, kw_only=True, forbid_unknown_fields=True):
    """a table with `joint` and a line; a line, or in space a plane, on which a joint slides."""

    joint: Annotated[str, Meta(description="a joint name; the joint that slides")]
    through: Annotated[
        list[Number] | None,
        Meta(description="a list of coordinates; a point of the line; the value counts from it"),
    ] = None
    direction: Annotated[
        list[Number] | None, Meta(description="a list of coordinates; of any length but zero")
    ] = None
    normal: Annotated[
        list[Number] | None,
        Meta(
            description="a list of three coordinates; in space, with `through`: the joint stays "
            "in this plane, and the rail has no value"
        ),
    ] = None
    along: Annotated[
        Names | None,
        Meta(
            description="a list of two joint names; the slot runs through both, and its value "
            "counts from the first; both pinned, or both on one plate or bone"
        ),
    ] = None
    range: Range = None


class RamSpec(PartSpec, kw_only=True, forbid_unknown_fields=True):
    """a table with `ends`; a bone whose length is driven, or free within its range."""

    ends: Ends
    range: Range = None


class CrankSpec(PartSpec, kw_only=True, forbid_unknown_fields=True):
    """a table with `turns`; an angle that may be driven."""

    turns: Annotated[str, Meta(description="the name of a bone, ram or plate; the part that turns")]
    from_: Annotated[
        str,
        Meta(description='"ground" or the name of a bone, ram or plate; where the angle starts'),
    ] = field(default="ground", name="from")
    about: Annotated[
        str | None,
        Meta(
            description="a joint name, in space a hinge's; bones are seen from the joint outwards; "
            "the hinge is what the part turns about"
        ),
    ] = None
    axis: AxisLine = None
    zero: Annotated[
        Number | list[Number] | UnsetType,
        Meta(
            description='a number or arithmetic, "rest", or in space a direction; what counts as '
            '0; left out: 0, in space "rest"'
        ),
    ] = UNSET
    toward: Annotated[
        list[Number] | None,
        Meta(
            description="a list of three coordinates; in space, from which direction of the "
            "ground the angle counts; left out: where the part points at `at`"
        ),
    ] = None
    line: Line = None
    from_line: Line = None
    range: Range = None


class LimitSpec(PartSpec, kw_only=True, forbid_unknown_fields=True):
    """a table with `from`, `to`, `at` and `range`; the allowed turn from one line to another."""

    from_: Annotated[str, Meta(description="the name of a bone, ram or plate; the first line")] = (
        field(name="from")
    )
    to: Annotated[str, Meta(description="the name of a bone, ram or plate; the second line")]
    at: Annotated[
        str,
        Meta(
            description="a joint name, in space also a hinge's; both lines are seen from it "
            "outwards"
        ),
    ]
    range: Annotated[
        list[Number],
        Meta(
            description="a list of two numbers, lowest and highest; degrees counter-clockwise, "
            "in space by the right hand about the hinge or `axis`, modulo 360"
        ),
    ]
    axis: AxisLine = None
    either: Annotated[
        bool, Meta(description="true or false; true takes the angle without its sign, 0 to 180")
    ] = False
    from_line: Line = None
    to_line: Line = None


class PlaneSpec(PartSpec, kw_only=True, forbid_unknown_fields=True):
    """a table with `joints`, `through` and `normal`; in space, a plane in which joints stay."""

    joints: Annotated[Names, Meta(description="a list of joint names")]
    through: Annotated[
        list[Number], Meta(description="a list of three coordinates; a point of the plane")
    ]
    normal: Vector


class HingeSpec(PartSpec, kw_only=True, forbid_unknown_fields=True):
    """a table with `parts`, `at` and `axis`; in space, two parts that turn about one axis."""

    parts: Parts
    at: Annotated[str, Meta(description="a joint name; the axis runs through its place at rest")]
    axis: Vector


class UniversalSpec(PartSpec, kw_only=True, forbid_unknown_fields=True):
    """a table with `parts`, `at` and `axes`; in space, two parts joined by a cross."""

    parts: Parts
    at: Annotated[str, Meta(description="a joint name; the middle of the cross")]
    axes: Annotated[
        list[list[Number]],
        Meta(description="a list of two axes; the cross turns in the first part about the first"),
    ]


class SliderSpec(PartSpec, kw_only=True, forbid_unknown_fields=True):
    """a table with `parts`, `at` and `axis`; in space, a part that slides without turning."""

    parts: Annotated[
        Names,
        Meta(
            description='a list of two names of bones or plates; the second slides along the '
            'first; one of them may be "ground"'
        ),
    ]
    at: Annotated[
        str, Meta(description="a joint name; a joint of the part that slides; its place counts 0")
    ]
    axis: Vector
    range: Range = None


class TieSpec(PartSpec, kw_only=True, forbid_unknown_fields=True):
    """a table with `sum`; a linear condition on the values of cranks, rams and rails."""

    sum: Annotated[
        dict[str, Number], Meta(description="a table of drive names and factors; added up")
    ]
    equals: Annotated[Number, Meta(description="a number or arithmetic; what the sum is")] = 0.0


class FrozenSpec(PartSpec, kw_only=True, forbid_unknown_fields=True):
    """a list of bone names, or a table; bones that keep the shape that `at` shows."""

    bones: Annotated[Names, Meta(description="a list of bone names")]


class CopySpec(PartSpec, kw_only=True, forbid_unknown_fields=True):
    """a table with `of`; another rig file brought in, its parts named `copy/part`."""

    of: Annotated[str, Meta(description="the name of a rig file in this file's folder")]
    join: Annotated[
        dict[str, str],
        Meta(description="a table, joint of the copy = joint of this rig; they become one joint"),
    ] = field(default_factory=dict)
    chain: Annotated[
        dict[str, str],
        Meta(
            description="a table, joint of each copy = joint of the copy before; needs `repeat`"
        ),
    ] = field(default_factory=dict)
    at: Annotated[
        list[Number] | None,
        Meta(description="a list of coordinates; where the file's origin comes to stand"),
    ] = None
    turn: Annotated[
        Number,
        Meta(description="a number or arithmetic; degrees; with `repeat` from each to the next"),
    ] = 0.0
    axis: Annotated[
        list[Number] | None,
        Meta(description="a list of three coordinates; in space, what `turn` turns about"),
    ] = None
    mirror: Annotated[
        Literal["x", "y", "z"] | None,
        Meta(description='"x", "y" or, in space, "z"; this coordinate changes its sign'),
    ] = None
    shift: Annotated[
        list[Number] | None,
        Meta(description="a list of coordinates; with `repeat`, the way from each to the next"),
    ] = None
    repeat: Annotated[
        int | None, Meta(description="a whole number; this many copies, named `copy1`, `copy2`, …")
    ] = None
    sizes: Annotated[
        dict[str, Number], Meta(description="a table of sizes; these win over the file's own")
    ] = field(default_factory=dict)


class StandSpec(Struct, kw_only=True, forbid_unknown_fields=True):
    """a table with `origin`, `x` and `y`; where a plane rig stands in the scene."""

    origin: Annotated[list[Number], Meta(description="a list of three coordinates")] = field(
        default_factory=lambda: [0, 0, 0]
    )
    x: Annotated[
        list[Number], Meta(description="a list of three coordinates; the rig's x in the scene")
    ] = field(default_factory=lambda: [1, 0, 0])
    y: Annotated[
        list[Number], Meta(description="a list of three coordinates; at a right angle to x")
    ] = field(default_factory=lambda: [0, 1, 0])


class RestSpec(Struct, kw_only=True, forbid_unknown_fields=True):
    """the name of a CSV file, or a table with `file`; places of joints by name."""

    file: Annotated[str, Meta(description="the name of a CSV file in this file's folder")]
    unit: Annotated[
        Literal["m", "cm", "mm", "in", "ft"] | None,
        Meta(description="m, cm, mm, in or ft; left out: the rig's own"),
    ] = None
    up: Annotated[
        Literal["y", "z"] | None, Meta(description='"y" or "z"; left out: the rig\'s own')
    ] = None


class HeadSpec(Struct, kw_only=True, forbid_unknown_fields=True):
    """a table; what a rig file says about the whole rig."""

    rigpose: Annotated[Literal[1], Meta(description="1; the version of the file's format")]
    name: Annotated[str | None, Meta(description="text; left out: the file's name")] = None
    dim: Annotated[Literal[2, 3], Meta(description="2 or 3; left out: 2")] = 2
    unit: Annotated[
        Literal["m", "cm", "mm", "in", "ft"], Meta(description="m, cm, mm, in or ft; left out: m")
    ] = "m"
    slack: Annotated[
        Number,
        Meta(description="a number; how far lengths may disagree, as a fraction of the rig's size"),
    ] = 1e-6
    close: Annotated[
        Number,
        Meta(description="a number; how near a met target is, as a fraction of the rig's size"),
    ] = 1e-6
    plane: StandSpec | None = None
    up: Annotated[Literal["y", "z"], Meta(description='"y" or "z"; the scene\'s up axis')] = "y"
    rest: Annotated[
        str | RestSpec | None,
        Meta(description="the name of a CSV file, or a table with `file`; joints' places by name"),
    ] = None
    note: Annotated[str, Meta(description="text; for people, carried along untouched")] = ""
    flat: Annotated[
        bool,
        Meta(description="true or false; true where copies are expanded: names may hold a `/`"),
    ] = False


class RigSpec(HeadSpec, kw_only=True, forbid_unknown_fields=True):
    """a table; a whole rig file, version 1, of which the JSON Schema is made."""

    sizes: Annotated[
        dict[str, Number] | UnsetType,
        Meta(description="named numbers for arithmetic, wherever a number may stand"),
    ] = UNSET
    joints: dict[str, list[Number] | JointSpec] | UnsetType = UNSET
    bones: dict[str, Names | BoneSpec] | UnsetType = UNSET
    plates: dict[str, Names | PlateSpec] | UnsetType = UNSET
    rails: dict[str, RailSpec] | UnsetType = UNSET
    rams: dict[str, RamSpec] | UnsetType = UNSET
    cranks: dict[str, CrankSpec] | UnsetType = UNSET
    limits: dict[str, LimitSpec] | UnsetType = UNSET
    planes: dict[str, PlaneSpec] | UnsetType = UNSET
    hinges: dict[str, HingeSpec] | UnsetType = UNSET
    universals: dict[str, UniversalSpec] | UnsetType = UNSET
    sliders: dict[str, SliderSpec] | UnsetType = UNSET
    ties: dict[str, TieSpec] | UnsetType = UNSET
    frozen: dict[str, Names | FrozenSpec] | UnsetType = UNSET
    copies: dict[str, CopySpec] | UnsetType = UNSET
    branches: Annotated[
        dict[str, dict[str, Literal["left", "right", "straight", "before", "after"]]] | UnsetType,
        Meta(description="names for branches: a table, joint = the side to which it bends"),
    ] = UNSET
    names: Annotated[
        dict[str, str] | UnsetType,
        Meta(description="joint = the studio's own name of it, in files read and written"),
    ] = UNSET
    studio: Annotated[
        dict[str, Any] | UnsetType, Meta(description="anything; carried along untouched")
    ] = UNSET


IN_SPACE = ("planes", "hinges", "universals", "sliders")
"""Sections that only a rig in space has."""
SECTIONS = (
    "sizes", "joints", "bones", "plates", "rails", "rams", "cranks", "limits", *IN_SPACE, "ties",
    "frozen", "copies", "branches", "names", "studio",
)
