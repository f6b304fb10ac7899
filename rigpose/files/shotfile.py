"""Shot files: from TOML to a checked `Shot`, with everything that is wrong told at once."""

from __future__ import annotations

import re
from collections.abc import Mapping
from fractions import Fraction
from pathlib import Path
from typing import get_args

import msgspec

from rigpose.files.document import read_document
from rigpose.files.rigfile import load_rig
from rigpose.files.shotkeys import Desk, read_keys
from rigpose.files.shotspec import ShotSpec, Side
from rigpose.ground.errors import BadInput
from rigpose.model.decode import decode, fitting
from rigpose.model.names import shown
from rigpose.model.notes import Notes
from rigpose.model.rig import Rig
from rigpose.model.sizes import resolve_sizes
from rigpose.motion.shot import Shot

VERSION = 1
MOST_FRAMES = 100_000_000
BENDS = get_args(Side)

_REFUSED = "\0"
"""Stands for a rig's path that is missing or no text, which is noted already."""
_RATE = re.compile(r"[0-9]{1,9}(\.[0-9]{1,9})?|[0-9]{1,9}/0*[1-9][0-9]{0,8}")


def load_shot(path: str | Path) -> Shot:
    """Loads a shot file and the rig that it names.

    Places of targets and of ``near`` are in the rig's own frame and unit, drives in degrees
    (cranks) or the rig's unit.

    Raises BadInput with all problems of the shot and of its rig, up to 20.
    """
    file = Path(path)
    document = read_document(file)
    notes = Notes(document.where)
    _check_version(notes, document.data)
    spec = _spec(notes, document.data)
    sizes = resolve_sizes(notes, spec.sizes)
    rig = _rig(notes, file, spec.rig)
    desk = Desk(notes, sizes, rig)
    fps, (frames, step) = _rate(notes, spec.fps), _range(desk, spec)
    keys = read_keys(desk, spec.keys)
    branch, near = _branch(notes, rig, spec.branch), _near(desk, spec.near)
    notes.stop_if_any()
    assert rig is not None  # where it isn't, that is noted
    name = re.sub(r"(\.shot)?\.toml$", "", file.name) if spec.name is None else spec.name
    return Shot(name, rig, fps, frames, step, branch, near, keys, str(file))


def _check_version(notes: Notes, data: Mapping[str, object]) -> None:
    """Stops at another version before its unknown keys raise confusing complaints."""
    version = data.get("rigpose")
    if "rigpose" not in data:
        notes.add((), "a shot file says which version it is written in", "no key `rigpose`",
                  f"put `rigpose = {VERSION}` at its top")
    elif type(version) is int and version > VERSION:
        notes.add(("rigpose",), f"this program reads shot files up to version {VERSION}",
                  str(version), "update rigpose, or save the shot as version 1")
    elif type(version) is not int or version != VERSION:
        notes.add(("rigpose",), f"the version of a shot file is {VERSION}", shown(version),
                  f"write `rigpose = {VERSION}`")
    notes.stop_if_any()


def _spec(notes: Notes, data: Mapping[str, object]) -> ShotSpec:
    """The document with its types checked.

    Where some of it is wrong that is noted, and what is right is still given back, so that the
    keys' problems are told together with the head's.
    """
    spec = decode(notes, (), data, ShotSpec)
    if spec is not None:
        return spec
    least = {"rigpose": VERSION, "rig": _REFUSED, "fps": 24, "frames": [1, 1]}
    return msgspec.convert(least | fitting(data, ShotSpec), ShotSpec)


def _rig(notes: Notes, file: Path, name: str) -> Rig | None:
    """The shot's rig, or None after noting all that is wrong with it."""
    if name == _REFUSED:
        return None
    if not name.strip():
        notes.add(("rig",), "must be the path of a rig file", shown(name), "name one")
        return None
    try:
        return load_rig(file.parent / name)
    except BadInput as bad:
        notes.take(bad.problems)
        return None


def _rate(notes: Notes, fps: int | float | str) -> Fraction:
    """The exact rate; a decimal number is taken as it is written, not as the float behind it."""
    text = fps if isinstance(fps, str) else repr(fps)
    rate = Fraction(text) if _RATE.fullmatch(text) else Fraction(0)
    if rate <= 0:
        notes.add(("fps",), "must be a number above 0, or a fraction of two whole numbers",
                  shown(fps), 'write 24 or "24000/1001"')
    return rate


def _range(desk: Desk, spec: ShotSpec) -> tuple[tuple[float, float], float]:
    """The first and the last frame and the step, which goes evenly into the way between."""
    ends = desk.numbers(("frames",), spec.frames, 2)
    step = desk.number(("step",), spec.step)
    if step is not None and step <= 0:
        desk.notes.add(("step",), "must be more than 0", shown(spec.step), "frames only go on")
    elif ends and step:
        _check_range(desk.notes, ends[0], ends[1], step)
    return (ends[0], ends[1]) if ends else (0.0, 0.0), step or 1.0


def _check_range(notes: Notes, first: float, last: float, step: float) -> None:
    if first > last:
        notes.add(("frames",), "the first frame isn't after the last", f"{first:g} … {last:g}",
                  f"write [{last:g}, {first:g}]")
        return
    steps = (last - first) / step
    if steps >= MOST_FRAMES:
        notes.add(("frames",), f"a shot has at most {MOST_FRAMES:,} frames", f"{steps + 1:.10g}",
                  "cut it or take a larger step")
    elif abs(steps - round(steps)) > 1e-9 * max(1.0, steps):
        near = first + round(steps) * step
        notes.add(("step",), "must go evenly from the first frame to the last",
                  f"{step:g} for {first:g} … {last:g}", f"end at {near:g} or change the step")


def _branch(notes: Notes, rig: Rig | None,
            raw: str | Mapping[str, object] | None) -> Mapping[str, str] | str | None:
    if rig is None or raw is None:
        return None
    if isinstance(raw, str):
        if raw not in rig.branches:
            notes.unknown(("branch",), "branch in the rig's [branches]", raw, rig.branches)
        return raw
    bends = {}
    for joint, bend in raw.items():
        if joint not in rig.index:
            notes.unknown(("branch", joint), "joint", joint, rig.joint_names)
        elif bend not in BENDS:
            notes.add(("branch", joint), f"must be one of {', '.join(BENDS)}", shown(bend))
        bends[joint] = str(bend)
    return bends


def _near(desk: Desk, raw: Mapping[str, object]) -> Mapping[str, tuple[float, ...]]:
    near = {}
    for joint, place in raw.items():
        if desk.knows_joint(("near", joint), joint) and desk.rig is not None:
            found = desk.numbers(("near", joint), place, desk.rig.dim)
            near[joint] = found or ()
    return near
