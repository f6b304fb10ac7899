"""Hinges and universal joints, made into joints and plates: two joints that parts share are an
axis about which they turn, and a cross is a plate that has one axis in each of two parts."""

from __future__ import annotations

import math
from dataclasses import replace

from rigpose.model.bench import Bench, Common
from rigpose.model.bodies import Table
from rigpose.model.decode import decode
from rigpose.model.fittings import Fittings
from rigpose.model.head import unit_vector
from rigpose.model.names import KeyPath, shown
from rigpose.model.rig import Coordinates, Pair, Plate
from rigpose.model.spec import IN_SPACE, HingeSpec, UniversalSpec
from rigpose.model.vectors import cross, less

PARALLEL = 1e-3
"""Two axes of a cross at a smaller sine than this are one, as far as any drawing can tell."""

_IN_THE_PLANE = {
    "planes": "write a rail for each joint",
    "hinges": "parts that share a joint turn about it already",
    "universals": "let the parts share a joint",
    "sliders": "write rails for two joints of the part",
}


def refuse_in_the_plane(bench: Bench, tables: Table) -> None:
    """Note sections that only a rig in space can have."""
    for section in IN_SPACE:
        table = tables.get(section)
        if not isinstance(table, dict) or not table:
            continue
        bench.notes.add((section,), f"only a rig in space (`dim = 3`) has [{section}]", "dim = 2",
                        f"take them out: {_IN_THE_PLANE[section]}")
        for name in table:
            bench.lose("drive", name)
            bench.lose("body", name)


def axis_joint(name: str) -> str:
    """The joint that stands on a hinge's axis beside its own."""
    return f"{name} axis"


def add_helper(fit: Fittings, path: KeyPath, name: str, at: Coordinates, common: Common) -> (
    str | None
):
    """A new joint that no file names, or None after noting that it can't have its name."""
    made = fit.helper(path, name, at, common)
    if made is not None:
        joints = fit.bench.parts.joints
        joints[made] = replace(joints[made], helper=True)
    return made


def add_hinges(fit: Fittings, table: Table) -> None:
    """Read all hinges."""
    for name, raw in table.items():
        spec = decode(fit.bench.notes, ("hinges", name), raw, HingeSpec)
        good = fit.bench.claim("hinges", name)
        if spec is None or not _hinge(fit, name, spec) or not good:
            fit.bench.lose("hinge", name)
            fit.bench.lose("joint", axis_joint(name))


def _hinge(fit: Fittings, name: str, spec: HingeSpec) -> bool:
    path = ("hinges", name)
    joined = _joined(fit, path, spec, "hinge")
    axis = _direction(fit.bench, (*path, "axis"), spec.axis)
    common = fit.bench.common(path, spec)
    if joined is None or axis is None:
        return False
    parts, joint, place = joined
    helper = add_helper(fit, path, axis_joint(name), fit.reach(parts, place, axis), common)
    if helper is None:
        return False
    for part in parts:
        fit.carry(part, joint)
        fit.carry(part, helper, joint)
    fit.bench.hinges[name] = (joint, helper)
    return True


def _joined(fit: Fittings, path: KeyPath, spec: HingeSpec | UniversalSpec, kind: str) -> (
    tuple[Pair, str, Coordinates] | None
):
    """The parts, the joint at which they meet and its place."""
    parts = fit.parts((*path, "parts"), spec.parts, kind)
    at = fit.place((*path, "at"), spec.at, kind)
    if parts is None or at is None or not fit.stands_alone((*path, "at"), parts, at[0]):
        return None
    return parts, *at


def _direction(bench: Bench, path: KeyPath, written: list[int | float | str]) -> (
    Coordinates | None
):
    return unit_vector(bench, path, bench.coordinates(path, written))


def add_universals(fit: Fittings, table: Table) -> None:
    """Read all universal joints; the cross of each is a plate of its name."""
    for name, raw in table.items():
        spec = decode(fit.bench.notes, ("universals", name), raw, UniversalSpec)
        good = fit.bench.claim("universals", name)
        if spec is None or not _universal(fit, name, spec) or not good:
            fit.bench.lose("body", name)
            for helper in _helpers(name):
                fit.bench.lose("joint", helper)


def _helpers(name: str) -> Pair:
    return f"{name} axis 1", f"{name} axis 2"


def _universal(fit: Fittings, name: str, spec: UniversalSpec) -> bool:
    path = ("universals", name)
    joined = _joined(fit, path, spec, "universal")
    axes = _axes(fit.bench, (*path, "axes"), spec)
    common = fit.bench.common(path, spec)
    if joined is None or axes is None:
        return False
    parts, joint, place = joined
    ends = [fit.reach([part], place, axis) for part, axis in zip(parts, axes, strict=True)]
    helpers = [add_helper(fit, path, helper, end, common)
               for helper, end in zip(_helpers(name), ends, strict=True)]
    if helpers[0] is None or helpers[1] is None:
        return False
    for part, helper in zip(parts, helpers, strict=True):
        fit.carry(part, joint)
        fit.carry(part, str(helper), joint)
    _add_cross(fit, name, (joint, helpers[0], helpers[1]), [place, *ends], common)
    return True


def _add_cross(fit: Fittings, name: str, joints: tuple[str, str, str],
               places: list[Coordinates], common: Common) -> None:
    shape = tuple(less(place, places[0]) for place in places)
    fit.bench.parts.plates[name] = Plate(name=name, joints=joints, shape=shape, **common)


def _axes(bench: Bench, path: KeyPath, spec: UniversalSpec) -> list[Coordinates] | None:
    if len(spec.axes) != 2:
        bench.notes.add(path, "a universal turns about two axes", str(len(spec.axes)),
                        "write axes = [[x, y, z], [x, y, z]]")
        return None
    found = [_direction(bench, (*path, k), axis) for k, axis in enumerate(spec.axes)]
    axes = [axis for axis in found if axis is not None]
    if len(axes) < 2:
        return None
    sine = math.hypot(*cross(axes[0], axes[1]))
    if sine < PARALLEL:
        bench.notes.add(path, "the two axes of a universal stand at an angle",
                        f"{math.degrees(math.asin(sine)):.3g} degrees between "
                        f"{shown(list(spec.axes[0]))} and {shown(list(spec.axes[1]))}",
                        "turn one of them, or write a hinge")
        return None
    return axes
