"""Planes on the ground in which joints stay, from a file's tables to checked parts."""

from __future__ import annotations

from rigpose.model.bench import Bench
from rigpose.model.bodies import Table
from rigpose.model.decode import decode
from rigpose.model.head import unit_vector
from rigpose.model.names import KeyPath, shown
from rigpose.model.rig import Plane
from rigpose.model.spec import PlaneSpec, RailSpec


def add_planes(bench: Bench, table: Table) -> None:
    """Add all planes; in a plane rig the section as a whole has been refused."""
    for name, raw in table.items() if bench.dim == 3 else ():
        spec = decode(bench.notes, ("planes", name), raw, PlaneSpec)
        good = bench.claim("planes", name)
        plane = None if spec is None else _plane(bench, name, spec)
        if plane is not None and good:
            bench.parts.planes[name] = plane


def _plane(bench: Bench, name: str, spec: PlaneSpec) -> Plane | None:
    path = ("planes", name)
    joints = bench.joints((*path, "joints"), spec.joints, 1)
    through = bench.coordinates((*path, "through"), spec.through)
    written = bench.coordinates((*path, "normal"), spec.normal)
    normal = unit_vector(bench, (*path, "normal"), written)
    common = bench.common(path, spec)
    if joints is None or through is None or normal is None:
        return None
    return Plane(name=name, joints=joints, through=through, normal=normal, **common)


def add_plane_of_rail(bench: Bench, name: str, spec: RailSpec) -> None:
    """A rail with a `normal` has no way along a line: it is a plane of this name."""
    path = ("rails", name)
    if not _says_plane(bench, path, spec):
        return
    joint = bench.joint((*path, "joint"), spec.joint)
    through = bench.coordinates((*path, "through"), spec.through or ())
    written = bench.coordinates((*path, "normal"), spec.normal or ())
    normal = unit_vector(bench, (*path, "normal"), written)
    common = bench.common(path, spec)
    if name in bench.parts.planes:
        bench.notes.add(path, "a rail in a plane shares the names of planes, and [planes] has this "
                        "one already", shown(name), "rename one of them")
    elif joint is not None and through is not None and normal is not None:
        bench.parts.planes[name] = Plane(name=name, joints=(joint,), through=through,
                                         normal=normal, **common)


def _says_plane(bench: Bench, path: KeyPath, spec: RailSpec) -> bool:
    """Whether a rail with a `normal` has what a plane needs and nothing that only a line has."""
    before = len(bench.notes)
    if bench.dim == 2:
        bench.notes.add((*path, "normal"), "only in space (`dim = 3`) does a joint slide in a "
                        "plane", "dim = 2", "write `direction` for a line, or take the rail out")
        return False
    other = [key for key in ("direction", "along") if getattr(spec, key) is not None]
    if other:
        bench.notes.add(path, "a rail runs along a line or in a plane, not both",
                        f"`normal` and `{other[0]}`", "take one of them out")
    elif spec.through is None:
        bench.notes.add(path, "a rail in a plane needs `through`, a point of the plane",
                        "`normal` alone", "write through = [x, y, z]")
    if spec.range is not None:
        bench.notes.add((*path, "range"), "a rail in a plane has no value, and so no range",
                        shown(spec.range), "take it out")
    return len(bench.notes) == before
