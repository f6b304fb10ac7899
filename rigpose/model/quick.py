"""The usual short forms of joints, bones and plates, read without ceremony.

A rig of 100,000 joints is made of these almost wholly. What is in any way unusual, and all that is
wrong, gives None here and is read by the careful way, which tells what is wrong with it.
"""

from __future__ import annotations

import math
from collections.abc import Callable

from rigpose.model.bench import BODIES, Bench
from rigpose.model.names import LONGEST_NAME
from rigpose.model.plateshape import centred
from rigpose.model.rig import Bone, Coordinates, Joint, Plate

LARGEST_INT = 1 << 53


def joint_reader(bench: Bench) -> Callable[[str, object], Joint | None]:
    """Reads a joint given as coordinates, or as a table of `at` and `pin`, and takes its name."""
    take, dim = bench.taken.setdefault("joints", {}).setdefault, bench.dim

    def read(name: str, raw: object) -> Joint | None:
        pin = False
        if type(raw) is dict:
            pin = raw.get("pin", False)
            if type(pin) is not bool or len(raw) != 1 + ("pin" in raw):
                return None
            raw = raw.get("at")
        if type(raw) is not list or len(raw) != dim or not _is_plain(name):
            return None
        at = _place(raw)
        if at is None:
            return None
        take(name, "joints")
        return Joint(name=name, at=at, pin=pin)

    return read


def _place(values: list[object]) -> Coordinates | None:
    """Finite numbers as a place."""
    place = []
    for v in values:
        if type(v) is float and v - v == 0.0:
            place.append(v)
        elif type(v) is int and -LARGEST_INT < v < LARGEST_INT:
            place.append(float(v))
        else:
            return None
    return tuple(place)


def _is_plain(name: str) -> bool:
    return (type(name) is str and name.isascii() and name.isidentifier()
            and len(name) <= LONGEST_NAME)


def bone_reader(bench: Bench) -> Callable[[str, object], Bone | None]:
    """Reads a bone given as two joints that have places, or as a table of `ends` and `length`."""
    joint, take = bench.parts.joints.get, bench.taken.setdefault(BODIES, {}).setdefault
    dist, far = math.dist, math.inf

    def read(name: str, raw: object) -> Bone | None:
        length: object = None
        if type(raw) is dict:
            length = raw.get("length")
            if len(raw) != 1 + ("length" in raw):
                return None
            raw = raw.get("ends")
        if type(raw) is not list or len(raw) != 2:
            return None
        a, b = raw
        first = joint(a) if type(a) is str else None
        second = joint(b) if type(b) is str else None
        if first is None or second is None or a == b:
            return None
        if length is None and first.at is not None and second.at is not None:
            length = dist(first.at, second.at)
        if type(length) is not float or not 0.0 < length < far:
            return None
        if not _is_plain(name) or name == "ground" or take(name, "bones") != "bones":
            return None
        return Bone(name=name, ends=(a, b), length=length)

    return read


def plate_reader(bench: Bench) -> Callable[[str, object], Plate | None]:
    """Reads a plate given as joints that have places."""
    find, take = bench.parts.joints.get, bench.taken.setdefault(BODIES, {}).setdefault

    def read(name: str, raw: object) -> Plate | None:
        if type(raw) is not list or len(raw) < 3:
            return None
        places = []
        for j in raw:
            joint = find(j) if type(j) is str else None
            if joint is None or joint.at is None:
                return None
            places.append(joint.at)
        if len(set(raw)) < len(raw):
            return None
        shape = centred(places)
        if len(set(shape)) < len(shape) or not _is_plain(name) or name == "ground" or (
                take(name, "plates") != "plates"):
            return None
        return Plate(name=name, joints=tuple(raw), shape=shape)

    return read
