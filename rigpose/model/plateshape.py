"""The shape of a plate: from its joints' places, from lengths and a hand, or as written."""

from __future__ import annotations

import math
from collections.abc import Sequence

from rigpose.model.bench import Bench
from rigpose.model.names import KeyPath, shown
from rigpose.model.platelengths import Lengths, shape_from_lengths
from rigpose.model.rig import Coordinates
from rigpose.model.spec import PlateSpec

Shape = tuple[Coordinates, ...]

IN_LINE = 1e-12
"""Joints whose triangle is flatter than this (area over the square of its size) have no hand."""


def plate_shape(bench: Bench, path: KeyPath, spec: PlateSpec, joints: tuple[str, ...]) -> (
    Shape | None
):
    """The places of a plate's joints in a frame of its own, or None after noting why not."""
    if spec.shape is not None and spec.lengths is not None:
        bench.notes.add(path, "a plate has `shape` or `lengths`, not both", "both",
                        "take one of them out")
        return None
    if spec.shape is not None:
        shape = _written(bench, path, spec.shape, len(joints))
    elif spec.lengths is not None:
        return _from_lengths(bench, path, spec, joints)
    else:
        shape = _from_places(bench, path, joints)
    if shape is None or not _apart(bench, path, joints, shape):
        return None
    return shape if _hand_holds(bench, path, spec, joints, shape) else None


def _written(bench: Bench, path: KeyPath, shape: Sequence[Sequence[object]], count: int) -> (
    Shape | None
):
    path = (*path, "shape")
    if len(shape) != count:
        bench.notes.add(path, "must have one list of coordinates for each joint",
                        f"{len(shape)} for {count} joints", "give as many as there are joints")
        return None
    found = [bench.coordinates((*path, k), place) for k, place in enumerate(shape)]
    clean = tuple(p for p in found if p is not None)
    return clean if len(clean) == count else None


def _from_places(bench: Bench, path: KeyPath, joints: tuple[str, ...]) -> Shape | None:
    why = "a plate without `lengths` has its shape from the places of its joints"
    places = bench.places(path, joints, why, "give `lengths` and `hand`, or `at` for {}")
    return None if places is None else centred(places)


def centred(places: Sequence[Coordinates]) -> Shape:
    """The same places about their middle: large coordinates would cost the shape its digits."""
    middle = [math.fsum(axis) / len(places) for axis in zip(*places, strict=True)]
    return tuple(tuple(c - m for c, m in zip(p, middle, strict=True)) for p in places)


def _apart(bench: Bench, path: KeyPath, joints: tuple[str, ...], shape: Shape) -> bool:
    seen: dict[Coordinates, str] = {}
    for joint, place in zip(joints, shape, strict=True):
        other = seen.setdefault(place, joint)
        if other != joint:
            bench.notes.add(path, "two joints of a plate stand at different places",
                            f"{shown(other)} and {shown(joint)} at the same", "move one of them")
            return False
    return True


def _hand_holds(bench: Bench, path: KeyPath, spec: PlateSpec, joints: tuple[str, ...],
                shape: Shape) -> bool:
    if spec.hand is None:
        return True
    if bench.dim != 2:
        bench.notes.add((*path, "hand"), "only a plate in the plane has a `hand`", "dim = 3",
                        "take it out; the places say enough")
        return False
    side = hand_of(shape[0], shape[1], shape[2])
    if side == spec.hand:
        return True
    got = f'{shown(spec.hand)}, but {", ".join(joints[:3])} turn to the {side}' if side else (
        f'{shown(spec.hand)}, but {", ".join(joints[:3])} lie in line')
    bench.notes.add((*path, "hand"), "`hand` is the side to which the first three joints turn",
                    got, "change `hand` or the places")
    return False


def hand_of(a: Coordinates, b: Coordinates, c: Coordinates) -> str:
    """To which side three joints of the plane turn; empty where they lie in line.

    >>> hand_of((0.0, 0.0), (1.0, 0.0), (1.0, 1.0))
    'left'
    """
    area = (b[0] - a[0]) * (c[1] - a[1]) - (b[1] - a[1]) * (c[0] - a[0])
    size = max(math.dist(a, b), math.dist(b, c), math.dist(a, c))
    if abs(area) <= IN_LINE * size * size:
        return ""
    return "left" if area > 0 else "right"


def _from_lengths(bench: Bench, path: KeyPath, spec: PlateSpec, joints: tuple[str, ...]) -> (
    Shape | None
):
    if bench.dim != 2:
        bench.notes.add((*path, "lengths"), "only a plate in the plane has its shape from lengths",
                        "dim = 3", "give the joints' places with `at`, or `shape`")
        return None
    if spec.hand is None:
        bench.notes.add(path, "a plate with `lengths` needs `hand`", "none",
                        'write hand = "left" or hand = "right" for its first three joints')
        return None
    lengths = _read_lengths(bench, (*path, "lengths"), spec, joints)
    if lengths is None:
        return None
    shape = shape_from_lengths(bench, path, joints, lengths, spec.hand == "left")
    return None if shape is None else centred(shape)


def _read_lengths(bench: Bench, path: KeyPath, spec: PlateSpec, joints: tuple[str, ...]) -> (
    Lengths | None
):
    found: Lengths = {}
    before = len(bench.notes)
    for k, (a, b, value) in enumerate(spec.lengths or ()):
        pair = bench.pair((*path, k), (a, b))
        length = bench.positive((*path, k), value, "a length")
        if pair is None or length is None:
            continue
        if not set(pair) <= set(joints):
            bench.notes.add((*path, k), "lengths of a plate are between its own joints",
                            shown(list(pair)), f"its joints are {', '.join(joints[:6])}")
        elif frozenset(pair) in found:
            bench.notes.add((*path, k), "a pair has one length", f"{shown(list(pair))} again",
                            "take one of them out")
        else:
            found[frozenset(pair)] = length
    return found if len(bench.notes) == before else None
