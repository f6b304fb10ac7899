"""The keys of a shot file: each drive and target checked against the rig."""

from __future__ import annotations

import math
from collections.abc import Mapping, Sequence
from dataclasses import dataclass

import msgspec

from rigpose.files.shotspec import KeySpec
from rigpose.ground.errors import BadInput
from rigpose.model.arithmetic import read_number
from rigpose.model.decode import decode, fitting
from rigpose.model.names import KeyPath, shown
from rigpose.model.notes import Notes
from rigpose.model.rig import Drive, Rig, Span
from rigpose.motion.shot import Key


@dataclass
class Desk:
    """What the readers of a shot share; ``rig`` is None where it was refused already."""

    notes: Notes
    sizes: Mapping[str, float]
    rig: Rig | None

    def number(self, path: KeyPath, value: object) -> float | None:
        """A finite number, or None after noting why not."""
        try:
            number = read_number(value, self.sizes)
        except BadInput as bad:
            self.notes.refused(path, bad)
            return None
        # NaN stands for a size that was refused, and noted, before.
        return None if math.isnan(number) else number

    def numbers(self, path: KeyPath, values: object, count: int) -> tuple[float, ...] | None:
        """So many finite numbers, or None after noting what is wrong."""
        if not isinstance(values, list) or len(values) != count:
            self.notes.add(path, f"must be a list of {count} numbers", shown(values))
            return None
        found = [self.number((*path, k), value) for k, value in enumerate(values)]
        clean = tuple(number for number in found if number is not None)
        return clean if len(clean) == count else None

    def knows_joint(self, path: KeyPath, joint: str) -> bool:
        """Whether the rig has this joint; notes it if not."""
        if self.rig is None:
            return False
        if joint not in self.rig.index:
            self.notes.unknown(path, "joint", joint, self.rig.joint_names)
            return False
        return True


def read_keys(desk: Desk, raw: Sequence[object]) -> tuple[Key, ...]:
    """All keys, in the order of their frames; what is wrong is noted."""
    keys = []
    before: float | None = None
    for place, entry in enumerate(raw):
        key = _key(desk, ("keys", place), entry)
        if key is None:
            continue
        _check_order(desk.notes, ("keys", place, "frame"), before, key.frame)
        before = key.frame if before is None else max(key.frame, before)
        keys.append(key)
    return tuple(keys)


def _check_order(notes: Notes, path: KeyPath, before: float | None, frame: float) -> None:
    if before is None or frame > before:
        return
    if frame == before:
        notes.add(path, "a frame has one key", f"a second one at frame {frame:g}",
                  "make one key of both")
    else:
        notes.add(path, "keys stand in the order of their frames",
                  f"frame {frame:g} after frame {before:g}", "move it up")


def _key(desk: Desk, path: KeyPath, raw: object) -> Key | None:
    """One entry, or None where its frame is wrong; all else in it is looked at all the same."""
    whole = decode(desk.notes, path, raw, KeySpec)
    right = fitting(raw, KeySpec)
    spec = whole or msgspec.convert({"frame": 0, **right}, KeySpec)
    if whole is not None and not spec.drive and not spec.target:
        desk.notes.add(path, "a key has a drive or a target", "neither",
                       "write drive = { … } or target = { … }, or take the key out")
    frame = desk.number((*path, "frame"), spec.frame) if "frame" in right else None
    drives, targets = _asked(desk, path, spec)
    return None if frame is None else Key(frame, drives, targets, spec.ease)


def _asked(desk: Desk, path: KeyPath, spec: KeySpec) -> tuple[
        dict[str, float], dict[str, tuple[float | None, ...]]]:
    """An entry's drives and targets."""
    drives, targets = {}, {}
    for name, value in spec.drive.items():
        driven = _drive(desk, (*path, "drive", name), name, value)
        if driven is not None:
            drives[name] = driven
    for name, value in spec.target.items():
        place = _target(desk, (*path, "target", name), name, value)
        if place is not None:
            targets[name] = place
    return drives, targets


def _drive(desk: Desk, path: KeyPath, name: str, raw: object) -> float | None:
    value = desk.number(path, raw)
    if desk.rig is None:
        return None
    if name not in desk.rig.drive_names:
        desk.notes.unknown(path, "crank, ram or rail", name, desk.rig.drive_names)
        return None
    span = _span(desk.rig, name)
    if value is not None and span is not None and not span[0] <= value <= span[1]:
        desk.notes.add(path, f"{shown(name)} stays within its range, {span[0]:g} to {span[1]:g}",
                       f"{value:g}", "change the key, or the range in the rig")
    return value


def _span(rig: Rig, name: str) -> Span | None:
    drives: tuple[Drive, ...] = (*rig.cranks, *rig.rams, *rig.rails)
    return next(drive.range for drive in drives if drive.name == name)


def _target(desk: Desk, path: KeyPath, joint: str,
            raw: object) -> tuple[float | None, ...] | None:
    if not desk.knows_joint(path, joint) or desk.rig is None:
        return None
    if desk.rig.joints[desk.rig.index[joint]].pin:
        desk.notes.add(path, "a pinned joint can't be a target", shown(joint),
                       "take the target out, or the pin in the rig")
        return None
    if isinstance(raw, dict):
        return _some_coordinates(desk, path, raw, "xyz"[:desk.rig.dim])
    return desk.numbers(path, raw, desk.rig.dim)


def _some_coordinates(desk: Desk, path: KeyPath, raw: Mapping[str, object],
                      axes: str) -> tuple[float | None, ...] | None:
    """The coordinates that a table names; None for each that is free."""
    if not raw:
        desk.notes.add(path, "a target has one coordinate or more", "none",
                       f"name one of {', '.join(axes)}")
    for axis in raw:
        if axis not in tuple(axes):
            desk.notes.unknown((*path, axis), "coordinate", axis, tuple(axes))
    return tuple(desk.number((*path, axis), raw[axis]) if axis in raw else None for axis in axes)
