"""Frozen groups, named branches and the studio's own names."""

from __future__ import annotations

from collections.abc import Mapping

from rigpose.model.bench import Bench
from rigpose.model.bodies import Table
from rigpose.model.decode import decode
from rigpose.model.names import KeyPath, shown
from rigpose.model.rig import Frozen
from rigpose.model.spec import FrozenSpec

BENDS = ("left", "right", "straight", "before", "after")


def add_frozen(bench: Bench, table: Table) -> None:
    """Add all frozen groups."""
    for name, raw in table.items():
        short = {"bones": raw} if isinstance(raw, list) else raw
        spec = decode(bench.notes, ("frozen", name), short, FrozenSpec)
        good = bench.claim("frozen", name)
        group = None if spec is None else _frozen(bench, name, spec)
        if group is not None and good:
            bench.parts.frozen[name] = group


def _frozen(bench: Bench, name: str, spec: FrozenSpec) -> Frozen | None:
    path = ("frozen", name)
    before = len(bench.notes)
    bones = spec.bones
    if not bones:
        bench.notes.add((*path, "bones"), "must list one bone or more", "none", "list the bones")
    for k, bone in enumerate(bones):
        if bone in bench.rods:
            bench.notes.add((*path, "bones", k), "a hinge makes a plate of a bone, and a plate "
                            "keeps its shape anyway", shown(bone), "take it out of the group")
        elif bone not in bench.parts.bones and not bench.is_lost("body", bone):
            bench.notes.unknown((*path, "bones", k), "bone", bone, bench.parts.bones)
    if len(set(bones)) < len(bones):
        twice = next(b for k, b in enumerate(bones) if b in bones[:k])
        bench.notes.add((*path, "bones"), "must list different bones", f"{shown(twice)} twice",
                        "list it once")
    common = bench.common(path, spec)
    return None if len(bench.notes) > before else Frozen(name=name, bones=tuple(bones), **common)


def add_branches(bench: Bench, table: Table) -> None:
    """Add all named branches."""
    for name, raw in table.items():
        path = ("branches", name)
        if not bench.claim("branches", name):
            continue
        if not isinstance(raw, dict) or not raw:
            bench.notes.add(path, "must be a table, joint = the side to which it bends",
                            shown(raw), 'write { joint = "left" }')
            continue
        bends = [_bend(bench, (*path, joint), joint, side) for joint, side in raw.items()]
        bench.parts.branches[name] = dict(b for b in bends if b is not None)


def _bend(bench: Bench, path: KeyPath, joint: str, side: object) -> tuple[str, str] | None:
    found = bench.joint(path, joint)
    if not isinstance(side, str):
        bench.notes.add(path, "must be left, right, straight, before or after", shown(side),
                        'write for instance "left"')
        return None
    if side not in BENDS:
        bench.notes.unknown(path, "bend", side, BENDS)
        return None
    return None if found is None else (found, side)


def read_names(bench: Bench, table: Table) -> Mapping[str, str]:
    """The studio's own names of joints, each of one joint only."""
    names: dict[str, str] = {}
    holders: dict[str, str] = {}
    for joint, studio in table.items():
        path = ("names", joint)
        found = bench.joint(path, joint)
        if not isinstance(studio, str) or not studio or studio != studio.strip():
            bench.notes.add(path, "must be the studio's name of the joint, a text without blanks "
                            "at its ends", shown(studio), 'write for instance "crane01:elbow"')
        elif found is not None and holders.setdefault(studio, found) != found:
            bench.notes.add(path, "the studio's names belong to one joint each",
                            f"{shown(studio)}, which {shown(holders[studio])} has already",
                            "give one of them another")
        elif found is not None:
            names[found] = studio
    return names
