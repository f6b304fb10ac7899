"""What a shot file may say; docstrings and descriptions finish the sentence "must be …".

`ShotSpec` and `KeySpec` leave the values of named things open, since each is checked by itself
against the rig; `ShotForm` and `KeyForm` say what they look like, for the JSON Schema.
"""

from __future__ import annotations

from typing import Annotated, Any, Literal

from msgspec import Meta, Struct, field

from rigpose.motion.shot import Ease

Number = int | float | str
Side = Literal["left", "right", "straight", "before", "after"]

BRANCH = Meta(description="a name from the rig's [branches] or a table, joint = its bend")
SIZES = Meta(description="a table of named numbers; for arithmetic, wherever a number may stand")
NEAR = Meta(description="a table, joint = its place in the first frame; settles the branch")
KEYS = Meta(description="a list of tables, each headed [[keys]]")
DRIVE = Meta(description="a table, drive = value; degrees of a crank, else the rig's unit")
TARGET = Meta(description="a table, joint = place; [x, y], or { y = 2.0 } with the rest free")


class ShotSpec(Struct, kw_only=True, forbid_unknown_fields=True):
    """a table; a shot file, version 1."""

    rigpose: Annotated[Literal[1], Meta(description="1; the version of the file's format")]
    rig: Annotated[str, Meta(description="the path of a rig file, seen from the shot's folder")]
    name: Annotated[str | None, Meta(description="text; left out: the file's name")] = None
    note: Annotated[str, Meta(description="text; for people")] = ""
    fps: Annotated[
        Number, Meta(description='a number above 0 or a fraction as "24000/1001"; frames a second')
    ]
    frames: Annotated[
        list[Number], Meta(description="a list of two numbers; the first and the last frame")
    ]
    step: Annotated[
        Number, Meta(description="a number or arithmetic; the way from one frame to the next")
    ] = 1
    sizes: Annotated[dict[str, Any], SIZES] = field(default_factory=dict)
    branch: Annotated[str | dict[str, Any] | None, BRANCH] = None
    near: Annotated[dict[str, Any], NEAR] = field(default_factory=dict)
    keys: Annotated[list[Any], KEYS] = field(default_factory=list)


class KeySpec(Struct, kw_only=True, forbid_unknown_fields=True):
    """a table; what is asked for at one frame."""

    frame: Annotated[Number, Meta(description="a number or arithmetic; it may lie between frames")]
    drive: Annotated[dict[str, Any], DRIVE] = field(default_factory=dict)
    target: Annotated[dict[str, Any], TARGET] = field(default_factory=dict)
    ease: Annotated[
        Ease, Meta(description="linear, smooth or hold; the way to the next key")
    ] = "smooth"


class KeyForm(KeySpec, kw_only=True, forbid_unknown_fields=True):
    """a table; what is asked for at one frame."""

    drive: Annotated[dict[str, Number], DRIVE] = field(default_factory=dict)
    target: Annotated[
        dict[str, list[Number] | dict[Literal["x", "y", "z"], Number]], TARGET
    ] = field(default_factory=dict)


class ShotForm(ShotSpec, kw_only=True, forbid_unknown_fields=True):
    """a table; a whole shot file, version 1, of which the JSON Schema is made."""

    sizes: Annotated[dict[str, Number], SIZES] = field(default_factory=dict)
    branch: Annotated[str | dict[str, Side] | None, BRANCH] = None
    near: Annotated[dict[str, list[Number]], NEAR] = field(default_factory=dict)
    keys: Annotated[list[KeyForm], KEYS] = field(default_factory=list)
