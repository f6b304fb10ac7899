"""Joints, bones, plates and rams: from a file's tables to checked parts."""

from __future__ import annotations

import math
from collections.abc import Mapping

from rigpose.model.bench import Bench
from rigpose.model.decode import decode
from rigpose.model.names import KeyPath, shown
from rigpose.model.plateshape import plate_shape
from rigpose.model.quick import bone_reader, joint_reader, plate_reader
from rigpose.model.rig import Bone, Coordinates, Joint, Pair, Plate, Ram, Span
from rigpose.model.spec import BoneSpec, JointSpec, PlateSpec, RamSpec

Table = Mapping[str, object]

GROUND = "ground"


def add_joints(bench: Bench, table: Table, places: Mapping[str, Coordinates]) -> None:
    """Add all joints; ``places`` (of a CSV file) win over their own `at`."""
    read = joint_reader(bench)
    for name, raw in table.items():
        quick = None if places else read(name, raw)
        if quick is not None:
            bench.parts.joints[name] = quick
            continue
        short = {"at": raw} if isinstance(raw, list) else raw
        spec = decode(bench.notes, ("joints", name), short, JointSpec)
        good = bench.claim("joints", name)
        joint = None if spec is None else _joint(bench, name, spec, places.get(name))
        if joint is None or not good:
            bench.lose("joint", name)
        bench.parts.joints[name] = joint or Joint(name=name)


def _joint(bench: Bench, name: str, spec: JointSpec, place: Coordinates | None) -> Joint | None:
    path = ("joints", name)
    at = place
    if at is None and spec.at is not None:
        at = bench.coordinates((*path, "at"), spec.at)
        if at is None:
            return None
    if spec.pin and at is None:
        bench.notes.add(path, "a pinned joint needs its place", "no `at`",
                        "give `at`, or take `pin` out")
        return None
    return Joint(name=name, at=at, pin=spec.pin, **bench.common(path, spec))


def _claim_body(bench: Bench, section: str, name: str) -> bool:
    if name == GROUND:
        bench.notes.add((section, name), '"ground" stands for what never moves', shown(name),
                        "rename it")
        return False
    return bench.claim(section, name)


def add_bones(bench: Bench, table: Table) -> None:
    """Add all bones; those without a length are measured."""
    read = bone_reader(bench)
    for name, raw in table.items():
        quick = read(name, raw)
        if quick is not None:
            bench.parts.bones[name] = quick
            continue
        short = {"ends": raw} if isinstance(raw, list) else raw
        spec = decode(bench.notes, ("bones", name), short, BoneSpec)
        good = _claim_body(bench, "bones", name)
        bone = None if spec is None else _bone(bench, name, spec)
        if bone is None or not good:
            bench.lose("body", name)
        else:
            bench.parts.bones[name] = bone


def _bone(bench: Bench, name: str, spec: BoneSpec) -> Bone | None:
    path = ("bones", name)
    ends = bench.pair((*path, "ends"), spec.ends)
    play = bench.number((*path, "play"), spec.play)
    if play is not None and play < 0:
        bench.notes.add((*path, "play"), "`play` is not below 0", shown(spec.play), "leave it out")
    if spec.length is None:
        length = None if ends is None else _measured(bench, path, ends)
    else:
        length = bench.positive((*path, "length"), spec.length, "a length")
    if ends is None or length is None or play is None:
        return None
    return Bone(name=name, ends=ends, length=length, play=play, **bench.common(path, spec))


def _measured(bench: Bench, path: KeyPath, ends: Pair) -> float | None:
    why = "a bone without `length` is measured from the places of its ends"
    places = bench.places(path, ends, why, "give `length`, or `at` for {}")
    if places is None:
        return None
    length = math.dist(*places)
    if length == 0 or not math.isfinite(length):
        got = f"{length!r} from {shown(list(places[0]))} to {shown(list(places[1]))}"
        bench.notes.add(path, f"{why}, and must be more than 0 and finite", got,
                        "move one of them, or give `length`")
        return None
    return length


def add_rams(bench: Bench, table: Table) -> None:
    """Add all rams."""
    for name, raw in table.items():
        spec = decode(bench.notes, ("rams", name), raw, RamSpec)
        good = _claim_body(bench, "rams", name)
        ram = None if spec is None else _ram(bench, name, spec)
        if ram is None or not good:
            bench.lose("body", name)
            bench.lose("drive", name)
        else:
            bench.parts.rams[name] = ram


def _ram(bench: Bench, name: str, spec: RamSpec) -> Ram | None:
    path = ("rams", name)
    ends = bench.pair((*path, "ends"), spec.ends)
    span = bench.span((*path, "range"), spec.range)
    if span is not None and not _is_length(bench, (*path, "range"), span):
        return None
    if ends is None:
        return None
    return Ram(name=name, ends=ends, range=span, **bench.common(path, spec))


def _is_length(bench: Bench, path: KeyPath, span: Span) -> bool:
    if span[0] >= 0 and span[1] > 0:
        return True
    bench.notes.add(path, "a ram's range holds lengths: from 0 or more to more than 0",
                    shown(list(span)), "give its shortest and its longest length")
    return False


def add_plates(bench: Bench, table: Table) -> None:
    """Add all plates, each with its shape."""
    read = plate_reader(bench)
    for name, raw in table.items():
        quick = read(name, raw)
        if quick is not None:
            bench.parts.plates[name] = quick
            continue
        short = {"joints": raw} if isinstance(raw, list) else raw
        spec = decode(bench.notes, ("plates", name), short, PlateSpec)
        good = _claim_body(bench, "plates", name)
        plate = None if spec is None else _plate(bench, name, spec)
        if plate is None or not good:
            bench.lose("body", name)
        else:
            bench.parts.plates[name] = plate


def _plate(bench: Bench, name: str, spec: PlateSpec) -> Plate | None:
    path = ("plates", name)
    if len(spec.joints) == 2:
        bench.notes.add((*path, "joints"), "a plate carries three joints or more",
                        f"2: {shown(spec.joints)}", "make it a bone in [bones]")
        return None
    joints = bench.joints((*path, "joints"), spec.joints, 3)
    if joints is None:
        return None
    shape = plate_shape(bench, path, spec, joints)
    if shape is None:
        return None
    return Plate(name=name, joints=joints, shape=shape, **bench.common(path, spec))
