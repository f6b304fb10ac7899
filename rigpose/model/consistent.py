"""What must hold between the parts of a whole rig, copies included."""

from __future__ import annotations

import math

from rigpose.model.bench import Bench
from rigpose.model.names import shown
from rigpose.model.rig import Bone, Joint, Plate, Rail


def check_whole(bench: Bench) -> None:
    """Note plates and bones that contradict one another, slots that nothing carries, and so on."""
    carried = _plates_by_joint(bench)
    for bone in bench.parts.bones.values() if carried else ():
        _check_bone(bench, bone, carried)
    for plate in bench.parts.plates.values():
        _check_plate(bench, plate, carried)
    rigid = _rigid_pairs(bench)
    for rail in bench.parts.rails.values():
        _check_rail(bench, rail, carried, rigid)
    _check_frozen(bench)


def _plates_by_joint(bench: Bench) -> dict[str, list[Plate]]:
    carried: dict[str, list[Plate]] = {}
    for plate in bench.parts.plates.values():
        for joint in plate.joints:
            carried.setdefault(joint, []).append(plate)
    return carried


def _slack(bench: Bench) -> float:
    return bench.slack * bench.size


def _apart(plate: Plate, a: str, b: str) -> float:
    return math.dist(plate.shape[plate.joints.index(a)], plate.shape[plate.joints.index(b)])


def _check_bone(bench: Bench, bone: Bone, carried: dict[str, list[Plate]]) -> None:
    a, b = bone.ends
    for plate in carried.get(a, ()):
        if not any(p is plate for p in carried.get(b, ())):
            continue
        apart = _apart(plate, a, b)
        if abs(apart - bone.length) > _slack(bench) + bone.play:
            rule = (f"the plate {shown(plate.name)} holds {a} and {b} {apart:.9g} apart, so a "
                    f"bone between them has that length within `slack` ({_slack(bench):.3g})")
            bench.notes.add(("bones", bone.name, "length"), rule, f"{bone.length:.9g}",
                            f"write {apart!r}, or leave the bone out")


def _check_plate(bench: Bench, plate: Plate, carried: dict[str, list[Plate]]) -> None:
    """Compare with the plates before it that share its first joint and another one."""
    for other in carried[plate.joints[0]]:
        if other is plate:
            return
        name = other.name
        common = [j for j in plate.joints if j in other.joints]
        for joint in common[1:]:
            here, there = (_apart(p, common[0], joint) for p in (plate, other))
            if abs(here - there) > _slack(bench):
                rule = f"plates that share joints agree on how far they are apart, as {name}'s do"
                got = f"{here:.9g} from {common[0]} to {joint}, not {there:.9g}"
                bench.notes.add(("plates", plate.name), rule, got, "mend one of the shapes")


def _rigid_pairs(bench: Bench) -> set[frozenset[str]]:
    if not any(r.along for r in bench.parts.rails.values()):
        return set()
    return {frozenset(b.ends) for b in bench.parts.bones.values()}


def _check_rail(bench: Bench, rail: Rail, carried: dict[str, list[Plate]],
                rigid: set[frozenset[str]]) -> None:
    if rail.along is None:
        return
    a, b = (bench.parts.joints[n] for n in rail.along)
    if frozenset(rail.along) in rigid or _share_plate(a.name, b.name, carried):
        return
    path = ("rails", rail.name, "along")
    if a.pin and b.pin:
        if a.at == b.at:
            bench.notes.add(path, "the two joints of a slot stand apart",
                            f"both at {shown(list(a.at or ()))}", "move one of them")
        return
    if _carried_by_lost(bench, a, b):
        return
    got = shown(list(rail.along))
    rams = [r.name for r in bench.parts.rams.values() if set(r.ends) == set(rail.along)]
    if rams:
        got += f", the ends of the ram {shown(rams[0])}, which changes its length"
    bench.notes.add(path, "both joints of a slot are pinned, or carried by one plate or bone", got,
                    "pin both, or name two joints of one plate or bone")


def _share_plate(a: str, b: str, carried: dict[str, list[Plate]]) -> bool:
    names = {p.name for p in carried.get(a, ())}
    return any(p.name in names for p in carried.get(b, ()))


def _carried_by_lost(bench: Bench, a: Joint, b: Joint) -> bool:
    """A refused body or joint might have carried them: one complaint is enough."""
    if any(("joint", j.name) in bench.lost for j in (a, b)):
        return True
    return any(kind == "body" for kind, _ in bench.lost)


def _check_frozen(bench: Bench) -> None:
    for group in bench.parts.frozen.values():
        ends = dict.fromkeys(e for n in group.bones for e in bench.parts.bones[n].ends
                             ) if all(n in bench.parts.bones for n in group.bones) else {}
        bench.places(("frozen", group.name, "bones"), ends,
                     "a frozen group keeps the shape that `at` shows",
                     "give `at` for {}")
