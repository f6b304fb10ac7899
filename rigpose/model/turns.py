"""Cranks and limits in space: what they turn about, from which joint and to which."""

from __future__ import annotations

import math
from typing import Literal

from msgspec import UNSET

from rigpose.model.bench import Bench
from rigpose.model.bodies import GROUND
from rigpose.model.head import unit_vector
from rigpose.model.names import KeyPath, shown
from rigpose.model.pointers import axis_of, hinge_axis, pointer
from rigpose.model.rig import Coordinates, Crank, Pair
from rigpose.model.spec import CrankSpec, LimitSpec
from rigpose.model.vectors import cross, less, off, unit

Zero = float | Literal["rest"]

PARALLEL = 1e-6
"""A direction at a smaller sine to an axis than this points along it."""


def space_crank(bench: Bench, name: str, spec: CrankSpec) -> Crank | None:
    """A crank about a hinge or about the line of two joints, or None after noting why not."""
    path = ("cranks", name)
    before = len(bench.notes)
    axis = _crank_axis(bench, path, spec)
    span = bench.span((*path, "range"), spec.range)
    common = bench.common(path, spec)
    _check_parts(bench, path, spec)
    line = pointer(bench, path, ("turns", "line"), spec.turns, spec.line, axis)
    base = None if spec.from_ == GROUND else (
        pointer(bench, path, ("from", "from_line"), spec.from_, spec.from_line, axis))
    zero = _zero(bench, path, spec)
    toward = _toward(bench, path, spec, line, axis)
    if line is None or zero is None or len(bench.notes) > before or (
            (base or toward) is None):
        return None
    return Crank(name=name, turns=spec.turns, line=line, base=base, zero=zero, range=span,
                 base_part=spec.from_, axis=axis, toward=toward, **common)


def _check_parts(bench: Bench, path: KeyPath, spec: CrankSpec) -> None:
    if spec.from_ == spec.turns:
        bench.notes.add((*path, "from"), "a crank's angle is between two different parts",
                        f"{shown(spec.turns)} twice", 'write from = "ground" or another part')
    if spec.from_ == GROUND and spec.from_line is not None:
        bench.notes.add((*path, "from_line"), "the ground has no line: the angle counts from the "
                        "direction `toward`", shown(spec.from_line),
                        "write toward = [x, y, z] instead, or say `from`")
    if spec.from_ != GROUND and (spec.toward is not None or isinstance(spec.zero, list)):
        key = "zero" if spec.toward is None else "toward"
        bench.notes.add((*path, key), "only the ground has a direction that stands still",
                        f"from = {shown(spec.from_)}", 'write an angle as `zero`, or "rest"')
    if spec.toward is not None and isinstance(spec.zero, list):
        bench.notes.add((*path, "zero"), "a direction that counts as 0 is written once",
                        "`zero` and `toward`", "take one of them out")


def _crank_axis(bench: Bench, path: KeyPath, spec: CrankSpec) -> Pair | None:
    if spec.axis is not None and spec.about is not None:
        bench.notes.add(path, "a crank turns about a hinge or an axis, not both",
                        f"about = {shown(spec.about)}, axis = {shown(spec.axis)}",
                        "take one of them out")
        return None
    if spec.axis is not None:
        return axis_of(bench, (*path, "axis"), spec.axis)
    if spec.about is None:
        bench.notes.add(path, "in space a crank says what it turns about",
                        "neither `about` nor `axis`",
                        'write about = "HINGE", or axis = [joint, joint]')
        return None
    return hinge_axis(bench, (*path, "about"), spec.about)


def _zero(bench: Bench, path: KeyPath, spec: CrankSpec) -> Zero | None:
    """The angle that counts as 0; a direction is one by itself."""
    if isinstance(spec.zero, list):
        return 0.0
    if spec.zero is UNSET:
        return "rest" if spec.toward is None else 0.0
    return "rest" if spec.zero == "rest" else bench.number((*path, "zero"), spec.zero)


def _toward(bench: Bench, path: KeyPath, spec: CrankSpec, line: Pair | None,
            axis: Pair | None) -> Coordinates | None:
    """From the ground: the direction from which the angle counts, None for other parts."""
    if spec.from_ != GROUND:
        return None
    key = "zero" if isinstance(spec.zero, list) else "toward"
    written = spec.zero if isinstance(spec.zero, list) else spec.toward
    if written is None:
        return _drawn_direction(bench, path, line, axis)
    toward = unit_vector(bench, (*path, key), bench.coordinates((*path, key), written))
    way = None if axis is None else _drawn_axis(bench, axis)
    if toward is None or way is None or math.hypot(*cross(toward, way)) > PARALLEL:
        return toward
    bench.notes.add((*path, key), "a direction from which an angle counts leads away from the axis",
                    f"{shown(list(written))}, along it", "write one at an angle to the axis")
    return None


def _drawn_axis(bench: Bench, axis: Pair) -> Coordinates | None:
    a, b = (bench.parts.joints[j].at for j in axis)
    return None if a is None or b is None else unit(less(b, a))


def _drawn_direction(bench: Bench, path: KeyPath, line: Pair | None, axis: Pair | None) -> (
    Coordinates | None
):
    """Where a part points in the drawing, square to the axis."""
    if line is None or axis is None:
        return None
    places = bench.places(path, (*axis, line[1]), "from the ground an angle counts from where the "
                          "part points in the drawing", "give `at` for {}, or write `toward`")
    if places is None:
        return None
    a, b, tip = places
    return unit(off(tip, a, unit(less(b, a))))


def limit_axis(bench: Bench, path: KeyPath, spec: LimitSpec) -> Pair | None:
    """What a limit in space is signed about; None where it is about nothing, or after a note."""
    if spec.axis is not None:
        axis = axis_of(bench, (*path, "axis"), spec.axis)
        if axis is not None and bench.also.get(spec.at, spec.at) not in axis:
            bench.notes.add((*path, "at"), "a limit about an axis stands at a joint of it",
                            shown(spec.at), f"write at = {shown(axis[0])}")
            return None
        return axis
    return bench.hinges.get(spec.at)


def limit_lines(bench: Bench, path: KeyPath, spec: LimitSpec, axis: Pair) -> (
    tuple[Pair, Pair] | None
):
    """From where to where a limit about an axis counts."""
    first = pointer(bench, path, ("from", "from_line"), spec.from_, spec.from_line, axis)
    second = pointer(bench, path, ("to", "to_line"), spec.to, spec.to_line, axis)
    return None if first is None or second is None else (first, second)
