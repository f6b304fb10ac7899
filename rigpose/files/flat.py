"""A rig written out flat: copies, sizes, short forms and measured lengths expanded."""

from __future__ import annotations

from collections.abc import Iterator, Mapping

from rigpose.files import tomltext
from rigpose.model.head import VERSION
from rigpose.model.rig import (
    Bone,
    Crank,
    Frozen,
    Joint,
    Limit,
    Part,
    Plane,
    Plate,
    Rail,
    Ram,
    Rig,
    Stand,
    Tie,
)

Table = dict[str, object]


def flat_text(rig: Rig) -> str:
    """TOML that `load_rig` reads back to the same parts, with the same fingerprint.

    Every length is written, in the rig's unit; floats have the shortest digits that read back
    the same. What hinges, universals and sliders made is written as joints, plates and rails: so
    their helper joints are the file's own.
    """
    return "\n".join([*_head(rig), *_sections(rig), ""])


def _head(rig: Rig) -> Iterator[str]:
    head: Table = {"rigpose": VERSION, "flat": True, "name": rig.name, "dim": rig.dim,
                   "unit": rig.unit, "slack": rig.slack, "close": rig.close, "up": rig.up}
    if rig.note:
        head["note"] = rig.note
    if rig.plane != Stand():
        head["plane"] = {"origin": rig.plane.origin, "x": rig.plane.x, "y": rig.plane.y}
    return (f"{name} = {tomltext.value(item)}" for name, item in head.items())


def _sections(rig: Rig) -> Iterator[str]:
    sections: dict[str, Mapping[str, object]] = {
        "joints": {j.name: _joint(j) for j in rig.joints},
        "bones": {b.name: _bone(b) for b in rig.bones},
        "plates": {p.name: _plate(p) for p in rig.plates},
        "planes": {p.name: _plane(p) for p in rig.planes},
        "rails": {r.name: _rail(r) for r in rig.rails},
        "rams": {r.name: _ram(r) for r in rig.rams},
        "cranks": {c.name: _crank(c) for c in rig.cranks},
        "limits": {m.name: _limit(m) for m in rig.limits},
        "ties": {t.name: _tie(t) for t in rig.ties},
        "frozen": {f.name: _frozen(f) for f in rig.frozen},
        "branches": rig.branches, "names": rig.names, "studio": rig.studio,
    }
    for section, table in sections.items():
        if table:
            yield f"\n[{section}]"
            yield from (f"{tomltext.key(n)} = {tomltext.value(v)}" for n, v in table.items())


def _common(part: Part, table: Table) -> Table:
    if part.note:
        table["note"] = part.note
    if part.layer:
        table["layer"] = part.layer
    if part.skin:
        table["skin"] = part.skin
    return {name: item for name, item in table.items() if item is not None}


def _joint(joint: Joint) -> Table:
    return _common(joint, {"at": joint.at, "pin": joint.pin or None})


def _bone(bone: Bone) -> Table:
    return _common(bone, {"ends": bone.ends, "length": bone.length, "play": bone.play or None})


def _plate(plate: Plate) -> Table:
    return _common(plate, {"joints": plate.joints, "shape": plate.shape})


def _plane(plane: Plane) -> Table:
    return _common(plane, {"joints": plane.joints, "through": plane.through,
                           "normal": plane.normal})


def _rail(rail: Rail) -> Table:
    return _common(rail, {"joint": rail.joint, "through": rail.through,
                          "direction": rail.direction, "along": rail.along, "range": rail.range})


def _ram(ram: Ram) -> Table:
    return _common(ram, {"ends": ram.ends, "range": ram.range})


def _crank(crank: Crank) -> Table:
    return _common(crank, {"turns": crank.turns, "line": crank.line, "from": crank.base_part,
                           "from_line": crank.base, "about": crank.about,
                           "axis": crank.axis, "zero": crank.zero, "toward": crank.toward,
                           "range": crank.range})


def _limit(limit: Limit) -> Table:
    return _common(limit, {"from": limit.first_part, "to": limit.second_part, "at": limit.at,
                           "axis": limit.axis, "range": limit.range, "from_line": limit.first,
                           "to_line": limit.second, "either": limit.either or None})


def _tie(tie: Tie) -> Table:
    return _common(tie, {"sum": dict(tie.sum), "equals": tie.equals})


def _frozen(group: Frozen) -> Table:
    return _common(group, {"bones": group.bones})
