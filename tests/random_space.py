"""Random rigs in space with a known pose, as `random_rigs` in the plane: joints are drawn first,
parts are put on them afterwards, and every length is measured from the drawing.

Each rig is finite for its drives and targets, and the drawn pose is among its branches.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass, field
from typing import Any

import numpy as np

import rigpose as rp
from rigpose.model.equations import Array

Wish = tuple[float | None, float | None, float | None]


@dataclass
class Draft:
    """A rig being drawn: sections as in a file, and the places of joints that are placed.

    ``solid`` holds the bodies that others may be hinged to: plates placed with their spin.
    """

    rng: np.random.Generator
    joints: dict[str, Any] = field(default_factory=dict)
    places: dict[str, Array] = field(default_factory=dict)
    sections: dict[str, dict[str, Any]] = field(default_factory=dict)
    drives: dict[str, float] = field(default_factory=dict)
    targets: dict[str, Wish] = field(default_factory=dict)
    solid: list[str] = field(default_factory=list)

    def add(self, section: str, name: str, part: Any) -> None:
        self.sections.setdefault(section, {})[name] = part

    def number(self, section: str) -> int:
        return len(self.sections.get(section, {}))

    def new(self, section: str, part: Any) -> str:
        """A part under the next free name of its kind."""
        name = f"{section[:-1]}{self.number(section)}"
        self.add(section, name, part)
        return name

    def joint(self, place: Array | None = None, pin: bool = False) -> str:
        name = f"j{len(self.joints)}"
        where = self.rng.uniform(-2, 2, 3) if place is None else place
        self.places[name] = where
        self.joints[name] = {"at": where.tolist(), **({"pin": True} if pin else {})}
        return name

    def bone(self, a: str, b: str) -> str:
        name = f"b{self.number('bones')}"
        self.add("bones", name, [a, b])
        return name

    def plate(self, joints: Sequence[str], solid: bool = True) -> str:
        name = f"p{self.number('plates')}"
        self.add("plates", name, list(joints))
        if solid:
            self.solid.append(name)
        return name

    def gap(self, a: str, b: str) -> float:
        return float(np.linalg.norm(self.places[b] - self.places[a]))

    def some(self, count: int, but: Sequence[str] = ()) -> list[str]:
        """Different joints; three never in one line, about which what they hold could turn."""
        names = [n for n in self.places if n not in but]
        while True:
            chosen = [names[k] for k in self.rng.choice(len(names), count, replace=False)]
            if count < 3 or self.spread(chosen):
                return chosen

    def spread(self, joints: Sequence[str]) -> bool:
        a, b, c = (self.places[j] for j in joints)
        across = np.linalg.norm(np.cross(b - a, c - a))
        return bool(across > 1e-6 * np.linalg.norm(b - a) * np.linalg.norm(c - a))

    def turn(self, axis: Array, start: Array, first: Array, second: Array) -> float:
        """Degrees about an axis through ``start``, from one place to another, by the right hand:
        from coordinates in a frame with the axis as its third direction."""
        z = axis / np.linalg.norm(axis)
        x = first - start
        x = x - (x @ z) * z
        x /= np.linalg.norm(x)
        way = second - start
        return float(np.degrees(np.arctan2(way @ np.cross(z, x), way @ x)))

    def rig(self) -> rp.Rig:
        return rp.make_rig(self.joints, dim=3, **self.sections)


Kind = Callable[[Draft], None]


@dataclass(frozen=True)
class Case:
    """A rig, what is driven and asked for; its drawing is a pose ``(n_joints, 3)`` that it has."""

    rig: rp.Rig
    drives: dict[str, float]
    targets: dict[str, Wish]

    @property
    def drawn(self) -> Array:
        """All joints' places, those that hinges and sliders brought along too."""
        return np.array([j.at for j in self.rig.joints], dtype=float)

    @property
    def wishes(self) -> dict[str, dict[str, float]]:
        """Targets by axis, as the verbs take them."""
        return {j: {"xyz"[k]: v for k, v in enumerate(place) if v is not None}
                for j, place in self.targets.items()}


def random_space_rig(seed: int, steps: int = 3) -> tuple[rp.Rig, dict[str, float]]:
    """A rig of ``steps`` placings and the drives of its drawn pose."""
    case = random_space_case(seed, steps, PLAIN)
    return case.rig, case.drives


def random_space_case(seed: int, steps: int = 3, kinds: Sequence[Kind] | None = None) -> Case:
    """A rig of ``steps`` placings of the given kinds, of all of them if none are given."""
    kinds = EVERY if kinds is None else kinds
    draft = Draft(np.random.default_rng(seed))
    for _ in range(3):
        draft.joint(pin=True)
    for _ in range(steps):
        kinds[int(draft.rng.integers(len(kinds)))](draft)
    return Case(draft.rig(), draft.drives, draft.targets)


# -- one joint, or one body, at a time ------------------------------------------------------------

def _tripod(draft: Draft) -> None:
    feet = draft.some(3)
    top = draft.joint()
    for foot in feet:
        draft.bone(foot, top)


def _ram(draft: Draft) -> None:
    a, b, c = draft.some(3)
    top = draft.joint()
    draft.bone(a, top)
    draft.bone(b, top)
    name = draft.new("rams", {"ends": [c, top]})
    draft.drives[name] = draft.gap(c, top)


def _sheet(draft: Draft) -> None:
    a, b = draft.some(2)
    top = draft.joint()
    draft.bone(a, top)
    draft.bone(b, top)
    _plane_through(draft, top)


def _plane_through(draft: Draft, joint: str) -> None:
    draft.add("planes", f"s{draft.number('planes')}", {
        "joints": [joint], "through": draft.places[joint].tolist(),
        "normal": draft.rng.normal(size=3).tolist()})


def _fold(draft: Draft) -> None:
    """A joint in two planes, on one bone."""
    (a,) = draft.some(1)
    new = draft.joint()
    draft.bone(a, new)
    for _ in range(2):
        _plane_through(draft, new)


def _rail(draft: Draft) -> None:
    (a,) = draft.some(1)
    slider = draft.joint()
    draft.bone(a, slider)
    _rail_through(draft, slider)


def _rail_through(draft: Draft, joint: str) -> str:
    direction = draft.rng.normal(size=3)
    direction /= np.linalg.norm(direction)
    through = draft.places[joint] + draft.rng.uniform(-1, 1) * direction
    name = f"r{draft.number('rails')}"
    draft.add("rails", name, {"joint": joint, "through": through.tolist(),
                              "direction": direction.tolist()})
    return name


def _driven_rail(draft: Draft) -> None:
    """A joint led along a rail."""
    new = draft.joint()
    name = _rail_through(draft, new)
    rail = draft.sections["rails"][name]
    draft.drives[name] = float((draft.places[new] - rail["through"]) @ np.array(rail["direction"]))


def _slot(draft: Draft) -> None:
    """A joint on a line through two of a plate's, at a given distance from a third joint."""
    a, b, c = draft.some(3)
    slider = _on_line(draft, a, b)
    corner = draft.joint()
    draft.plate([a, b, corner])
    draft.bone(c, corner)
    draft.bone(c, slider)


def _on_line(draft: Draft, a: str, b: str) -> str:
    share = draft.rng.uniform(-0.5, 1.5)
    slider = draft.joint(draft.places[a] + share * (draft.places[b] - draft.places[a]))
    draft.add("rails", f"r{draft.number('rails')}", {"joint": slider, "along": [a, b]})
    return slider


def _bone_slot(draft: Draft) -> None:
    """A joint that slides along a bone, on a bone of its own."""
    bones = list(draft.sections.get("bones", {}).values())
    if not bones:
        _tripod(draft)
        return
    a, b = bones[int(draft.rng.integers(len(bones)))]
    slider = _on_line(draft, a, b)
    draft.bone(draft.some(1, (slider, a, b))[0], slider)


def _driven_slot(draft: Draft) -> None:
    """A joint led along a line that a bone carries."""
    bones = list(draft.sections.get("bones", {}).values())
    if not bones:
        _tripod(draft)
        return
    a, b = bones[int(draft.rng.integers(len(bones)))]
    slider = _on_line(draft, a, b)
    e = draft.places[b] - draft.places[a]
    way = draft.places[slider] - draft.places[a]
    draft.drives[f"r{draft.number('rails') - 1}"] = float(way @ e / np.linalg.norm(e))


def _plate(draft: Draft) -> None:
    """A body hinged on two placed joints, held by a bone."""
    a, b, c = draft.some(3)
    corner, other = draft.joint(), draft.joint()
    draft.plate([a, b, corner, other])
    draft.bone(c, corner)


def _hung(draft: Draft) -> None:
    """A body on one placed joint, with three bones: two more joints placed one by one."""
    a, b, c = draft.some(3)
    corner, other, tip = draft.joint(), draft.joint(), draft.joint()
    draft.plate([a, corner, other, tip])
    draft.bone(b, corner)
    draft.bone(c, corner)
    draft.bone(b, other)


def _posted(draft: Draft) -> None:
    """A body on one placed joint that runs in a plane and on a rail."""
    (a,) = draft.some(1)
    corner, other, tip = draft.joint(), draft.joint(), draft.joint()
    draft.plate([a, corner, other, tip])
    _rail_through(draft, corner)
    _plane_through(draft, other)


# -- hinges and cranks ----------------------------------------------------------------------------

def _door(draft: Draft) -> None:
    """A plate hinged to the ground, held by a bone."""
    (c,) = draft.some(1)
    plate, corners = _hinged(draft, "ground", None)
    draft.bone(c, corners[1])
    draft.solid.append(plate)


def _hinged(draft: Draft, to: str, joint: str | None) -> tuple[str, list[str]]:
    """A new plate on a hinge, at a new joint of the ground or at one of another plate."""
    corners = [draft.joint() if joint is None else joint, draft.joint(), draft.joint()]
    plate = draft.plate(corners, solid=False)
    draft.add("hinges", f"h{draft.number('hinges')}", {
        "parts": [to, plate], "at": corners[0], "axis": draft.rng.normal(size=3).tolist()})
    return plate, corners


def _driven_door(draft: Draft) -> None:
    """A plate hinged to the ground and turned by a crank, counted from rest or a direction."""
    plate, corners = _hinged(draft, "ground", None)
    hinge = f"h{draft.number('hinges') - 1}"
    crank = {"turns": plate, "about": hinge, "line": [corners[0], corners[1]]}
    value = 0.0
    if draft.rng.random() < 0.7:
        zero = draft.rng.normal(size=3)
        crank["zero"] = zero.tolist()
        start = draft.places[corners[0]]
        value = draft.turn(np.array(draft.sections["hinges"][hinge]["axis"]), start, start + zero,
                           draft.places[corners[1]])
    draft.drives[draft.new("cranks", crank)] = value
    draft.solid.append(plate)


def _body(draft: Draft) -> str | None:
    return draft.solid[int(draft.rng.integers(len(draft.solid)))] if draft.solid else None


def _knee(draft: Draft) -> None:
    """A plate hinged to another, held by a bone."""
    body = _body(draft)
    if body is None:
        _door(draft)
        return
    own = draft.sections["plates"][body]
    plate, corners = _hinged(draft, body, own[int(draft.rng.integers(len(own)))])
    draft.bone(draft.some(1, (*corners, *own))[0], corners[1])
    draft.solid.append(plate)


def _driven_knee(draft: Draft) -> None:
    """A plate hinged to another and turned from it by a crank."""
    body = _body(draft)
    if body is None:
        _driven_door(draft)
        return
    own = draft.sections["plates"][body]
    at = own[int(draft.rng.integers(len(own)))]
    plate, corners = _hinged(draft, body, at)
    hinge = f"h{draft.number('hinges') - 1}"
    first = next(j for j in own if j != at)
    value = draft.turn(np.array(draft.sections["hinges"][hinge]["axis"]), draft.places[at],
                       draft.places[first], draft.places[corners[2]])
    crank = draft.new("cranks", {
        "turns": plate, "from": body, "about": hinge, "line": [at, corners[2]],
        "from_line": [at, first], "zero": 0})
    draft.drives[crank] = value
    draft.solid.append(plate)


def _axle(draft: Draft) -> None:
    """A plate on two placed joints, turned by a crank about their line."""
    p, q = (list(draft.places)[k] for k in draft.rng.choice(3, 2, replace=False))
    tip, other = draft.joint(), draft.joint()
    plate = draft.plate([p, q, tip, other])
    zero = draft.rng.normal(size=3)
    start = draft.places[p]
    value = draft.turn(draft.places[q] - start, start, start + zero, draft.places[tip])
    crank = draft.new("cranks", {"turns": plate, "axis": [p, q], "line": [p, tip],
                                 "zero": zero.tolist()})
    draft.drives[crank] = value


def _block(draft: Draft) -> None:
    """A body that slides along an axis on the ground, pushed by a rod or driven."""
    (a,) = draft.some(1)
    corners = [draft.joint() for _ in range(3)]
    plate = draft.plate(corners)
    name = f"slide{draft.number('sliders')}"
    draft.add("sliders", name, {"parts": ["ground", plate], "at": corners[0],
                                "axis": draft.rng.normal(size=3).tolist()})
    if draft.rng.random() < 0.5:
        draft.bone(a, corners[1])
    else:
        draft.drives[name] = 0.0


# -- targets --------------------------------------------------------------------------------------

def _target(draft: Draft) -> None:
    """A joint on one bone or two, two or one of whose coordinates are asked for."""
    asked = int(draft.rng.integers(1, 3))
    feet = draft.some(3 - asked)
    new = draft.joint()
    for foot in feet:
        draft.bone(foot, new)
    axes = set(draft.rng.choice(3, asked, replace=False).tolist())
    x, y, z = (float(v) if k in axes else None for k, v in enumerate(draft.places[new]))
    draft.targets[new] = (x, y, z)


def _led_body(draft: Draft) -> None:
    """A body one of whose joints is led, held by three bones."""
    b, c, d = draft.some(3)
    led, corner, other = (draft.joint() for _ in range(3))
    draft.plate([led, corner, other])
    x, y, z = (float(v) for v in draft.places[led])
    draft.targets[led] = (x, y, z)
    draft.bone(b, corner)
    draft.bone(c, corner)
    draft.bone(d, other)


# -- what allows some branches only ---------------------------------------------------------------

def _fence(draft: Draft) -> None:
    """A slack ram between two placed joints."""
    a, b = draft.some(2)
    long = draft.gap(a, b)
    draft.new("rams", {"ends": [a, b], "range": [0.7 * long, 1.3 * long]})


def _surplus(draft: Draft) -> None:
    """A bone between two placed joints, none too many for the drawn pose."""
    a, b = draft.some(2)
    if not any({a, b} == set(e) for e in draft.sections.get("bones", {}).values()):
        draft.bone(a, b)


def _wedge(draft: Draft) -> None:
    """A limit of the angle between two bones at a joint, without its sign."""
    bones = list(draft.sections.get("bones", {}).items())
    meets = [(m, n, (set(e) & set(f)).pop()) for m, e in bones for n, f in bones
             if m < n and len(set(e) & set(f)) == 1]
    if not meets:
        return
    first, second, at = meets[int(draft.rng.integers(len(meets)))]
    u, v = (draft.places[(set(dict(bones)[n]) - {at}).pop()] - draft.places[at]
            for n in (first, second))
    angle = np.degrees(np.arctan2(np.linalg.norm(np.cross(u, v)), u @ v))
    draft.new("limits", {"from": first, "to": second, "at": at, "either": True, "range": [
        max(float(angle) - 25, 0.0), min(float(angle) + 25, 180.0)]})


def _stop(draft: Draft) -> None:
    """A limit about a hinge of two plates, by the right hand."""
    hinges = [(n, h) for n, h in draft.sections.get("hinges", {}).items()
              if h["parts"][0] != "ground"]
    if not hinges:
        return
    name, hinge = hinges[int(draft.rng.integers(len(hinges)))]
    at = hinge["at"]
    ends = [next(j for j in draft.sections["plates"][p] if j != at) for p in hinge["parts"]]
    value = draft.turn(np.array(hinge["axis"]), draft.places[at],
                       draft.places[ends[0]], draft.places[ends[1]])
    draft.new("limits", {"from": hinge["parts"][0], "to": hinge["parts"][1], "at": name,
                         "from_line": [at, ends[0]], "to_line": [at, ends[1]],
                         "range": [value - 40, value + 40]})


# -- what is solved as one ------------------------------------------------------------------------

def _legs(draft: Draft, corners: Sequence[str], count: int) -> None:
    """Six bones from corners in turn to ``count`` joints, no two of them alike: new pins, or
    placed ones where three are enough."""
    feet = draft.some(3, corners) if count == 3 else [draft.joint(pin=True) for _ in range(count)]
    for k in range(6):
        # Three corners on three feet: each corner on the next foot too.
        foot = feet[(k % 3 + k // 3) % 3] if count == 3 else feet[k % count]
        draft.bone(foot, corners[k % len(corners)])


def _platform(draft: Draft) -> None:
    """A plate on six bones, two from each of its three corners, on three joints
    or on six."""
    corners = [draft.joint() for _ in range(3)]
    draft.plate(corners)
    _legs(draft, corners, int(draft.rng.choice([3, 6])))


def _deck(draft: Draft) -> None:
    """A plate of six corners on six legs: up to 40 poses."""
    corners = [draft.joint() for _ in range(6)]
    draft.plate(corners)
    _legs(draft, corners, 6)


def _tetrahedron(draft: Draft) -> None:
    """Four joints and their six bones, on six more: it may be its own mirror image."""
    corners = [draft.joint() for _ in range(4)]
    for k in range(4):
        for j in range(k):
            draft.bone(corners[j], corners[k])
    _legs(draft, corners, 6)


def _loop(draft: Draft) -> None:
    """Two doors on hinges of the ground, tied by two bones over a plate: solved together."""
    _, one = _hinged(draft, "ground", None)
    _, two = _hinged(draft, "ground", None)
    draft.bone(one[1], two[1])
    draft.bone(one[2], two[2])


PLAIN: Sequence[Kind] = (_tripod, _tripod, _plate, _rail, _ram, _sheet, _slot, _hung)
HINGED: Sequence[Kind] = (_door, _driven_door, _knee, _driven_knee, _axle)
ONE_BY_ONE: Sequence[Kind] = (*PLAIN, *HINGED, _fold, _driven_rail, _bone_slot, _driven_slot,
                              _posted, _block, _target, _led_body)
PRUNED: Sequence[Kind] = (*ONE_BY_ONE, _fence, _fence, _surplus, _wedge, _wedge, _stop, _stop)
BLOCKS: Sequence[Kind] = (_platform, _tetrahedron, _loop)
DECKS: Sequence[Kind] = (_deck,)
EVERY: Sequence[Kind] = (*PRUNED, *BLOCKS)
MOVING: Sequence[Kind] = (
    _driven_door, _driven_knee, _axle, _ram, _driven_rail, _driven_slot, _tripod, _plate, _hung,
    _knee, _door, _rail, _sheet, _slot, _target)
"""Many drives, and nothing that is solved as one."""

# -- special places -------------------------------------------------------------------------------

GRID = [np.array([x, y, z], dtype=float) for x in range(3) for y in range(3) for z in range(2)]
STRAIGHT = ((1, 0, 0), (0, 1, 0), (0, 0, 1), (1, 1, 0), (1, 0, -1))


def lattice_space_case(seed: int, steps: int = 3) -> Case:
    """Joints on a small grid, so that bars lie in line, balls touch and joints coincide."""
    draft = Draft(np.random.default_rng(seed))
    for _ in range(3):
        draft.joint(_grid(draft, *draft.places), pin=True)
    while not draft.spread(list(draft.places)):
        draft.places["j2"] = _grid(draft, "j0", "j1")
        draft.joints["j2"]["at"] = draft.places["j2"].tolist()
    for _ in range(steps):
        LATTICE[int(draft.rng.integers(len(LATTICE)))](draft)
    return Case(draft.rig(), draft.drives, draft.targets)


def _grid(draft: Draft, *off: str) -> Array:
    """A place of the grid where none of these joints lies."""
    free = [p for p in GRID if all((p != draft.places[j]).any() for j in off)]
    return free[int(draft.rng.integers(len(free)))]


def _grid_tripod(draft: Draft) -> None:
    feet = draft.some(3)
    top = draft.joint(_grid(draft, *feet))
    for foot in feet:
        draft.bone(foot, top)


def _grid_ram(draft: Draft) -> None:
    a, b, c = draft.some(3)
    top = draft.joint(_grid(draft, a, b, c))
    draft.bone(a, top)
    draft.bone(b, top)
    name = draft.new("rams", {"ends": [c, top]})
    draft.drives[name] = draft.gap(c, top)


def _grid_rail(draft: Draft) -> None:
    (a,) = draft.some(1)
    slider = draft.joint(_grid(draft, a))
    draft.bone(a, slider)
    draft.add("rails", f"r{draft.number('rails')}", {
        "joint": slider, "through": draft.places[slider].tolist(),
        "direction": list(STRAIGHT[int(draft.rng.integers(len(STRAIGHT)))])})


def _grid_sheet(draft: Draft) -> None:
    a, b = draft.some(2)
    top = draft.joint(_grid(draft, a, b))
    draft.bone(a, top)
    draft.bone(b, top)
    draft.add("planes", f"s{draft.number('planes')}", {
        "joints": [top], "through": draft.places[top].tolist(),
        "normal": list(STRAIGHT[int(draft.rng.integers(len(STRAIGHT)))])})


def _grid_plate(draft: Draft) -> None:
    a, b, c = draft.some(3)
    corner = draft.joint(_grid(draft, a, b, c))
    draft.plate([a, b, corner, draft.joint(_grid(draft, a, b, corner))])
    draft.bone(c, corner)


LATTICE: Sequence[Kind] = (_grid_tripod, _grid_tripod, _grid_ram, _grid_rail, _grid_sheet,
                           _grid_plate)
