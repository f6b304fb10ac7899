"""The half-built rig: what the builders of all kinds of part look up, check and add to."""

from __future__ import annotations

import math
from collections.abc import Collection, Iterable, Mapping, Sequence
from dataclasses import dataclass, field, fields
from typing import TypedDict

from rigpose.ground.errors import BadInput
from rigpose.model.arithmetic import read_number
from rigpose.model.names import KeyPath, name_fault, shown
from rigpose.model.notes import Notes
from rigpose.model.rig import (
    Body,
    Bone,
    Coordinates,
    Crank,
    Drive,
    Frozen,
    Joint,
    Limit,
    Pair,
    Plane,
    Plate,
    Rail,
    Ram,
    Rig,
    Span,
    Tie,
)
from rigpose.model.spec import PartSpec


class Common(TypedDict):
    """What every part may carry, as keyword arguments."""

    note: str
    layer: float
    skin: str


@dataclass
class Parts:
    """Parts by name, each kind in the order in which it comes in the file."""

    joints: dict[str, Joint] = field(default_factory=dict)
    bones: dict[str, Bone] = field(default_factory=dict)
    plates: dict[str, Plate] = field(default_factory=dict)
    rails: dict[str, Rail] = field(default_factory=dict)
    rams: dict[str, Ram] = field(default_factory=dict)
    cranks: dict[str, Crank] = field(default_factory=dict)
    limits: dict[str, Limit] = field(default_factory=dict)
    planes: dict[str, Plane] = field(default_factory=dict)
    ties: dict[str, Tie] = field(default_factory=dict)
    frozen: dict[str, Frozen] = field(default_factory=dict)
    branches: dict[str, dict[str, str]] = field(default_factory=dict)

    def add(self, rig: Rig) -> None:
        """Add all parts of a rig whose names are already those they shall have here."""
        for kind in fields(self):
            if kind.name != "branches":
                getattr(self, kind.name).update({p.name: p for p in getattr(rig, kind.name)})
        self.branches.update({name: dict(bends) for name, bends in rig.branches.items()})

    def body(self, name: str) -> Body | None:
        """The bone, plate or ram of this name."""
        return self.bones.get(name) or self.plates.get(name) or self.rams.get(name)

    def drive(self, name: str) -> Drive | None:
        """The crank, ram or rail of this name."""
        return self.cranks.get(name) or self.rams.get(name) or self.rails.get(name)

    def body_names(self) -> list[str]:
        """Names of all bones, plates and rams."""
        return [*self.bones, *self.plates, *self.rams]

    def drive_names(self) -> list[str]:
        """Names of all cranks, rams and rails."""
        return [*self.cranks, *self.rams, *self.rails]


BODIES = "bones, plates and rams"
DRIVES = "cranks, rams and rails"
REST = "sizes, limits, ties, frozen groups, copies and branches"
SPACES = {
    "joints": "joints",
    **dict.fromkeys(("bones", "plates", "universals"), BODIES),
    **dict.fromkeys(("rails", "cranks", "sliders"), DRIVES),
    **dict.fromkeys(("sizes", "limits", "planes", "hinges", "ties", "frozen", "copies",
                     "branches"), REST),
}
"""Which sections share names. Rams are bodies and drives; a universal is its cross, a slider its
first rail."""
IN_SPACE = {BODIES: "universals", DRIVES: "sliders", REST: "planes, hinges"}
"""What else has names in these spaces, in space."""


def spaces_of(section: str) -> tuple[str, ...]:
    """The name spaces in which a section's parts live."""
    return (BODIES, DRIVES) if section == "rams" else (SPACES[section],)


@dataclass
class Bench:
    """What the builders share.

    ``lost`` holds what was refused already, as (kind, name): it raises no second complaint.
    ``also`` maps the names that a copy's joints gave up in joining to those they became.
    ``size`` is that of the given places, 0 where there are none. ``hinges`` maps a hinge to the
    two joints of its axis, ``rods`` a plate that was a bone before it was hinged to its ends.
    """

    notes: Notes
    dim: int = 2
    slack: float = 1e-6
    size: float = 0.0
    slash: bool = False
    sizes: Mapping[str, float] = field(default_factory=dict)
    parts: Parts = field(default_factory=Parts)
    also: dict[str, str] = field(default_factory=dict)
    lost: set[tuple[str, str]] = field(default_factory=set)
    taken: dict[str, dict[str, str]] = field(default_factory=dict)
    hinges: dict[str, Pair] = field(default_factory=dict)
    rods: dict[str, Pair] = field(default_factory=dict)

    def claim(self, section: str, name: str) -> bool:
        """Whether a part may have this name; takes it, or notes why not."""
        fault = name_fault(name, slash=self.slash)
        if fault:
            self.notes.add((section, name), fault[0], shown(name), fault[1])
            return False
        return all(self.reserve(space, name, section, (section, name))
                   for space in spaces_of(section))

    def reserve(self, space: str, name: str, section: str, path: KeyPath) -> bool:
        """Take a name in one space for a section, or note that another section has it."""
        holder = self.taken.setdefault(space, {}).setdefault(name, section)
        if holder != section:
            kinds = f"{IN_SPACE[space]}, {space}" if self.dim == 3 and space in IN_SPACE else space
            self.notes.add(path, f"{kinds} share their names, and [{holder}] has this one already",
                           shown(name), "rename one of them")
        return holder == section

    def lose(self, kind: str, name: str) -> None:
        """Remember that a joint, body, drive or copy was refused."""
        self.lost.add((kind, name))

    def is_lost(self, kind: str, name: str) -> bool:
        """Whether this, or the copy that it belongs to, was refused already."""
        copy = name.split("/", maxsplit=1)[0]
        return (kind, name) in self.lost or ("copy", copy) in self.lost

    def number(self, path: KeyPath, value: object) -> float | None:
        """A finite number, or None after noting why not."""
        if type(value) is float and math.isfinite(value):
            return value
        try:
            number = read_number(value, self.sizes)
        except BadInput as bad:
            self.notes.refused(path, bad)
            return None
        return None if math.isnan(number) else number

    def positive(self, path: KeyPath, value: object, what: str) -> float | None:
        """A number above zero, or None after noting why not."""
        number = self.number(path, value)
        if number is not None and number <= 0:
            self.notes.add(path, f"{what} must be more than 0", shown(value), "give it a size")
            return None
        return number

    def numbers(self, path: KeyPath, values: Sequence[object]) -> Coordinates | None:
        """All of a list's numbers, or None after noting what is wrong."""
        found = [self.number((*path, k), v) for k, v in enumerate(values)]
        clean = tuple(x for x in found if x is not None)
        return clean if len(clean) == len(found) else None

    def coordinates(self, path: KeyPath, values: Sequence[object], dim: int = 0) -> (
        Coordinates | None
    ):
        """A point of the rig's dimension (or ``dim``), or None after noting what is wrong."""
        wanted = dim or self.dim
        if len(values) != wanted:
            mend = "give one number for each" if dim else "or change `dim`"
            rule = f"must have {wanted} coordinates" + ("" if dim else f", as `dim` is {wanted}")
            self.notes.add(path, rule, f"{len(values)}: {shown(list(values))}", mend)
            return None
        return self.numbers(path, values)

    def span(self, path: KeyPath, values: Sequence[object] | None) -> Span | None:
        """A range, lowest first, or None (also where none is given)."""
        if values is None:
            return None
        if len(values) != 2:
            self.notes.add(path, "must be a list of two numbers, lowest and highest",
                           shown(list(values)), "write [lowest, highest]")
            return None
        ends = self.numbers(path, values)
        if ends is None:
            return None
        if ends[0] > ends[1]:
            self.notes.add(path, "a range runs from its lowest to its highest number",
                           shown(list(values)), f"write {shown([ends[1], ends[0]])}")
            return None
        return ends[0], ends[1]

    def joint(self, path: KeyPath, name: str) -> str | None:
        """The joint that a name stands for, or None after noting that there is none."""
        if name in self.parts.joints:
            return name
        if name in self.also:
            return self.also[name]
        if not self.is_lost("joint", name):
            self.notes.unknown(path, "joint", name, self.parts.joints)
        return None

    def joints(self, path: KeyPath, names: Sequence[str], fewest: int, most: int = 0) -> (
        tuple[str, ...] | None
    ):
        """Different joints, as many as asked for, or None after noting what is wrong."""
        if len(names) < fewest or (most and len(names) > most):
            count = str(fewest) if most else f"{fewest} or more"
            self.notes.add(path, f"must list {count} joints", f"{len(names)}: {shown(names)}",
                           "list as many joints")
            return None
        found = [self.joint((*path, k), n) for k, n in enumerate(names)]
        clean = tuple(n for n in found if n is not None)
        if len(clean) < len(found):
            return None
        if len(set(clean)) < len(clean):
            twice = next(n for n in clean if clean.count(n) > 1)
            self.notes.add(path, "must list different joints", f"{shown(twice)} twice",
                           "put another joint in its place or take it out")
            return None
        return clean

    def pair(self, path: KeyPath, names: Sequence[str]) -> Pair | None:
        """Two different joints, or None after noting what is wrong."""
        found = self.joints(path, names, 2, 2)
        return None if found is None else (found[0], found[1])

    def body(self, path: KeyPath, name: str) -> Body | None:
        """The body of this name, or None after noting that there is none."""
        found = self.parts.body(name)
        if found is None and not self.is_lost("body", name):
            self.notes.unknown(path, "bone, plate or ram", name, self.parts.body_names())
        return found

    def places(self, path: KeyPath, names: Iterable[str], why: str, mend: str) -> (
        list[Coordinates] | None
    ):
        """Where joints are at rest as written, or None after noting those without `at`."""
        joints = [self.parts.joints[n] for n in names]
        lacking = [j.name for j in joints if j.at is None and ("joint", j.name) not in self.lost]
        if lacking:
            mend = mend.format(shown(lacking[0]))
            self.notes.add(path, why, f"no `at` for {', '.join(map(shown, lacking))}", mend)
        found = [j.at for j in joints if j.at is not None]
        return found if len(found) == len(joints) else None

    def common(self, path: KeyPath, spec: PartSpec) -> Common:
        """What any part may carry."""
        layer = self.number((*path, "layer"), spec.layer)
        return {"note": spec.note, "layer": layer or 0.0, "skin": spec.skin}


def joints_of(body: Body) -> Collection[str]:
    """All joints of a bone, ram or plate."""
    return body.joints if isinstance(body, Plate) else body.ends
