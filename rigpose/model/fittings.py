"""What hinges, universals and sliders make of the parts that they join.

Each of them asks parts to carry further joints. When all are read every part becomes one plate of
its own joints and those, and what the ground shall carry is pinned. All places are those of the
drawing: there the axes are given, so the joints of these parts need their `at`.
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass, field, replace
from functools import cached_property

import numpy as np

from rigpose.model.bench import Bench, Common, joints_of
from rigpose.model.bodies import GROUND
from rigpose.model.names import KeyPath, name_fault, shown
from rigpose.model.rig import Body, Bone, Coordinates, Joint, Pair, Plate, Ram
from rigpose.model.vectors import along, dot, less

Matrix = tuple[Coordinates, ...]

SAME = 1e-9
"""Places nearer than this part of the rig's extent are one, and a plate this near to its drawing
lies as drawn."""
SHARE = 10
"""Helper joints stand this part of the rig's extent away: far enough for a sharp direction."""


@dataclass
class Fittings:
    """Joints that parts shall carry: part, joint, and the joint from which its place is measured
    (itself where it is measured from the part as a whole)."""

    bench: Bench
    extra: dict[str, dict[str, str]] = field(default_factory=dict)

    # -- reading ------------------------------------------------------------------------------

    def parts(self, path: KeyPath, names: Sequence[str], kind: str) -> Pair | None:
        """Two different parts that can be joined, or None after noting what is wrong."""
        notes = self.bench.notes
        if len(names) != 2:
            notes.add(path, f"a {kind} joins two parts", f"{len(names)}: {shown(list(names))}",
                      'name two bones or plates, or one and "ground"')
            return None
        if names[0] == names[1]:
            notes.add(path, f"a {kind} joins two different parts", f"{shown(names[0])} twice",
                      "name another part")
            return None
        good = [self._joinable((*path, k), name, kind) for k, name in enumerate(names)]
        return (names[0], names[1]) if all(good) else None

    def _joinable(self, path: KeyPath, name: str, kind: str) -> bool:
        if name == GROUND:
            return True
        notes = self.bench.notes
        body = self.bench.body(path, name)
        if body is None:
            return False
        if isinstance(body, Ram):
            notes.add(path, f"a {kind} joins bones and plates: a ram changes its length",
                      shown(name), "name what the ram's ends belong to")
            return False
        if isinstance(body, Bone) and body.play:
            notes.add(path, f"a {kind} makes a plate of a bone, and a plate has no `play`",
                      f"play = {body.play!r} of {shown(name)}", "take `play` out")
            return False
        group = self._frozen.get(name)
        if group is not None:
            notes.add(path, f"a {kind} makes a plate of a bone, and a frozen group is of bones",
                      f"{shown(name)} of the group {shown(group)}", "take it out of the group")
            return False
        return self._is_drawn(path, body, kind)

    def _is_drawn(self, path: KeyPath, body: Body, kind: str) -> bool:
        why = f"a {kind} is measured from the places of its parts' joints"
        places = self.bench.places(path, joints_of(body), why, "give `at` for {}")
        if places is None:
            return False
        if isinstance(body, Bone) and places[0] == places[1]:
            self.bench.notes.add(path, why, f"both ends of {shown(body.name)} at "
                                 f"{shown(list(places[0]))}", "move one of them")
            return False
        return True

    def place(self, path: KeyPath, name: str, kind: str) -> tuple[str, Coordinates] | None:
        """The joint at which parts are joined, and where it is drawn."""
        joint = self.bench.joint(path, name)
        if joint is None:
            return None
        places = self.bench.places(path, [joint], f"a {kind} stands at the place of its joint",
                                   "give `at` for {}")
        return None if not places else (joint, places[0])

    def joint_at(self, part: str, place: Coordinates) -> str | None:
        """The joint that a part carries at a place, if it has one there."""
        return next((j for j in self.joints(part)
                     if math.dist(self._at(j), place) <= self._same), None)

    def stands_alone(self, path: KeyPath, parts: Sequence[str], joint: str) -> bool:
        """Whether no part has a joint of its own where one comes that it doesn't carry yet."""
        place = self._at(joint)
        for part in parts:
            same = None if joint in self.joints(part) else self.joint_at(part, place)
            if same is not None:
                self.bench.notes.add(path, "two joints of a plate stand at different places",
                                     f"{shown(joint)} where {shown(same)} of {shown(part)} stands",
                                     f"name {shown(same)} here, or move one of them")
                return False
        return True

    def joints(self, part: str) -> list[str]:
        """All joints that a part carries so far; none for the ground, where any two may meet."""
        if part == GROUND:
            return []
        body = self.bench.parts.body(part)
        return [*(() if body is None else joints_of(body)), *self.extra.get(part, ())]

    @cached_property
    def _frozen(self) -> dict[str, str]:
        """Bones of copies' frozen groups, and the group; the rig's own are read later."""
        return {b: f.name for f in self.bench.parts.frozen.values() for b in f.bones}

    def _at(self, joint: str) -> Coordinates:
        at = self.bench.parts.joints[joint].at
        assert at is not None  # looked at when the part or the joint was read
        return at

    @property
    def _size(self) -> float:
        return self.bench.size or 1.0

    @property
    def _same(self) -> float:
        return SAME * self._size

    # -- adding -------------------------------------------------------------------------------

    def reach(self, parts: Sequence[str], start: Coordinates, way: Coordinates) -> Coordinates:
        """A tenth of the rig's extent along a way; halved until no joint of the parts is there."""
        far = self._size / SHARE
        taken = [self._at(j) for part in parts for j in self.joints(part)]
        while any(math.dist(along(start, way, far), t) <= self._same for t in taken):
            far /= 2
        return along(start, way, far)

    def helper(self, path: KeyPath, name: str, at: Coordinates, common: Common) -> str | None:
        """A new joint, or None after noting that it can't have its name."""
        bench = self.bench
        fault = name_fault(name, slash=bench.slash)
        if fault:
            if name_fault(str(path[1]), slash=bench.slash) is None:  # else that is told already
                bench.notes.add(path, fault[0], f"{shown(name)} for its helper joint", fault[1])
            return None
        if name in bench.parts.joints or name in bench.also:
            bench.notes.add(path, "its helper joint has a name that no other joint has",
                            shown(name), "rename that joint, or this")
            return None
        bench.parts.joints[name] = Joint(name=name, at=at, **common)
        return name

    def carry(self, part: str, joint: str, measured_from: str | None = None) -> None:
        """Let a part carry a joint, unless it does so already."""
        if joint not in self.joints(part):
            self.extra.setdefault(part, {}).setdefault(joint, measured_from or joint)

    # -- making plates ------------------------------------------------------------------------

    def finish(self) -> None:
        """Pin what the ground carries and make plates of all other parts."""
        parts = self.bench.parts
        for name, joints in self.extra.items():
            if name == GROUND:
                for joint in joints:
                    parts.joints[joint] = replace(parts.joints[joint], pin=True)
                continue
            body = parts.body(name)
            assert isinstance(body, Bone | Plate)  # looked at when it was read
            if isinstance(body, Bone):
                self.bench.rods[name] = body.ends
                del parts.bones[name]
            parts.plates[name] = self._plate(body, joints)

    def _plate(self, body: Bone | Plate, joints: dict[str, str]) -> Plate:
        own = list(joints_of(body))
        drawn = [self._at(j) for j in own]
        shape = list(body.shape if isinstance(body, Plate) else _rod(drawn, body.length))
        turn = _turn(shape, drawn, self._same) if isinstance(body, Plate) else None
        whole = (_middle(shape), _middle(drawn))
        for joint, anchor in joints.items():
            start, here = whole if anchor == joint else (
                shape[own.index(anchor)], self._at(anchor))
            way = less(self._at(joint), here)
            shape.append(along(start, way if turn is None else _turned(turn, way), 1.0))
            own.append(joint)
        return Plate(name=body.name, joints=tuple(own), note=body.note, layer=body.layer,
                     skin=body.skin, shape=tuple(shape))


def _rod(drawn: Sequence[Coordinates], length: float) -> list[Coordinates]:
    """A bone's ends as drawn, but at its length."""
    way = less(drawn[1], drawn[0])
    zero = (0.0, 0.0, 0.0)
    return [zero, along(zero, way, length / math.dist(drawn[0], drawn[1]))]


def _middle(places: Sequence[Coordinates]) -> Coordinates:
    return tuple(math.fsum(axis) / len(places) for axis in zip(*places, strict=True))


def _turned(rows: Matrix, way: Coordinates) -> Coordinates:
    return tuple(dot(row, way) for row in rows)


def _turn(shape: Sequence[Coordinates], drawn: Sequence[Coordinates], same: float) -> (
    Matrix | None
):
    """Rows of the rotation that takes the drawing into a plate's own frame best (Kabsch 1976; from
    memory); None where the plate was measured from it and lies in it as drawn."""
    own, there = _middle(shape), _middle(drawn)
    if all(math.dist(less(p, own), less(q, there)) <= same
           for p, q in zip(shape, drawn, strict=True)):
        return None
    x, y = np.array(shape) - own, np.array(drawn) - there
    u, _, vt = np.linalg.svd(y.T @ x)
    hand = np.diag([1.0, 1.0, np.sign(np.linalg.det(u @ vt))])
    rows: list[list[float]] = ((u @ hand @ vt).T).tolist()
    return tuple(tuple(row) for row in rows)
