"""What a rig file says about the whole rig."""

from __future__ import annotations

import math
from collections.abc import Mapping
from dataclasses import dataclass, field

from rigpose.model.bench import Bench
from rigpose.model.decode import decode
from rigpose.model.names import KeyPath, shown
from rigpose.model.rig import Coordinates, Stand
from rigpose.model.spec import SECTIONS, HeadSpec, RestSpec, StandSpec

VERSION = 1
SQUARE = 1e-9
"""How far from a right angle (cosine) the two axes of `plane` may be."""
MOST_TOLERANCE = 0.1
ROUNDED = 4e-15
"""How far from 1 rounding takes the length of a direction that was turned."""


@dataclass(frozen=True, slots=True)
class Head:
    """The checked head of a rig."""

    name: str = ""
    dim: int = 2
    unit: str = "m"
    slack: float = 1e-6
    close: float = 1e-6
    plane: Stand = field(default_factory=Stand)
    up: str = "y"
    note: str = ""
    flat: bool = False
    rest: RestSpec | None = None


def check_version(bench: Bench, document: Mapping[str, object]) -> None:
    """Raise BadInput where the document is not of a version that this program reads.

    This comes before all else: a later version's keys would only raise confusing complaints.
    """
    version = document.get("rigpose")
    if type(version) is int and version > VERSION:
        bench.notes.add(("rigpose",), f"this program reads rig files up to version {VERSION}",
                        str(version), "update rigpose, or save the rig as version 1")
    elif version is None:
        bench.notes.add((), "a rig file says which version it is written in", "no key `rigpose`",
                        f"put `rigpose = {VERSION}` at its top")
    elif type(version) is not int or version != VERSION:
        bench.notes.add(("rigpose",), f"the version of a rig file is {VERSION}", shown(version),
                        f"write `rigpose = {VERSION}`")
    bench.notes.stop_if_any()


def read_head(bench: Bench, document: Mapping[str, object], name: str) -> Head:
    """The head; where a part of it is wrong that is noted and the default stands."""
    loose = {key: value for key, value in document.items() if key not in SECTIONS}
    loose = _without_unknown(bench, loose)
    spec = decode(bench.notes, (), loose, HeadSpec)
    if spec is None:
        dim = loose.get("dim", 2)
        return Head(name=name, dim=3 if type(dim) is int and dim == 3 else 2,
                    flat=loose.get("flat") is True)
    stand = _stand(bench, spec) or Stand()
    rest = RestSpec(file=spec.rest) if isinstance(spec.rest, str) else spec.rest
    return Head(
        name=name if spec.name is None else spec.name, dim=spec.dim, unit=spec.unit,
        slack=_tolerance(bench, ("slack",), spec.slack),
        close=_tolerance(bench, ("close",), spec.close),
        plane=stand, up=spec.up, note=spec.note, flat=spec.flat, rest=rest,
    )


def _without_unknown(bench: Bench, loose: Mapping[str, object]) -> dict[str, object]:
    """Take unknown keys out: sections are near names too, which only this place knows."""
    keys = (*HeadSpec.__struct_encode_fields__, *SECTIONS)
    for key in loose:
        if key not in keys:
            kind = "section" if isinstance(loose[key], dict) else "key"
            bench.notes.unknown((key,), kind, key, keys)
    return {key: value for key, value in loose.items() if key in keys}


def _tolerance(bench: Bench, path: KeyPath, value: object) -> float:
    number = bench.number(path, value)
    if number is None:
        return 1e-6
    if not 0 < number <= MOST_TOLERANCE:
        rule = f"must be a fraction of the rig's size, more than 0 and at most {MOST_TOLERANCE}"
        bench.notes.add(path, rule, shown(value), "0.000001 is usual")
    return number


def _stand(bench: Bench, spec: HeadSpec) -> Stand | None:
    if spec.plane is None:
        return None
    if spec.dim != 2:
        bench.notes.add(("plane",), "only a plane rig (`dim = 2`) stands on a plane", "dim = 3",
                        "take `plane` out")
        return None
    return _checked_stand(bench, spec.plane)


def _checked_stand(bench: Bench, spec: StandSpec) -> Stand | None:
    origin = bench.coordinates(("plane", "origin"), spec.origin, 3)
    x = unit_vector(bench, ("plane", "x"), bench.coordinates(("plane", "x"), spec.x, 3))
    y = unit_vector(bench, ("plane", "y"), bench.coordinates(("plane", "y"), spec.y, 3))
    if origin is None or x is None or y is None:
        return None
    off = math.fsum(a * b for a, b in zip(x, y, strict=True))
    if abs(off) > SQUARE:
        degrees = math.degrees(math.acos(max(-1.0, min(1.0, off))))
        bench.notes.add(("plane",), "`x` and `y` of a plane are at a right angle",
                        f"{degrees:.9g} degrees", "turn one of them")
        return None
    return Stand((origin[0], origin[1], origin[2]), (x[0], x[1], x[2]), (y[0], y[1], y[2]))


def unit_vector(bench: Bench, path: KeyPath, vector: Coordinates | None) -> Coordinates | None:
    """The vector at length 1, or None after noting that it has no length.

    One that is of length 1 but for rounding stays as it is, so that a file written from a rig
    reads back to the same numbers.
    """
    if vector is None:
        return None
    largest = max(abs(c) for c in vector)
    if largest == 0:
        bench.notes.add(path, "a direction needs a length", shown(list(vector)),
                        "give it a number other than 0")
        return None
    # Divided by the largest first: squares of very large or small numbers would run over.
    scaled = vector if 0.5 <= largest <= 1 + ROUNDED else tuple(c / largest for c in vector)
    length = math.hypot(*scaled)
    if abs(length - 1) <= ROUNDED:
        return scaled
    return tuple(c / length for c in scaled)
