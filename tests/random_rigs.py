"""Random plane rigs with a known pose: joints are drawn first, parts are put on them afterwards.

Each rig is finite for its drives and targets, and the drawn pose is among its branches.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass, field
from typing import Any

import numpy as np

import rigpose as rp


@dataclass
class Draft:
    """A rig being drawn: sections as in a file, and the places of joints that are placed."""

    rng: np.random.Generator
    joints: dict[str, Any] = field(default_factory=dict)
    places: dict[str, np.ndarray] = field(default_factory=dict)
    sections: dict[str, dict[str, Any]] = field(default_factory=dict)
    drives: dict[str, float] = field(default_factory=dict)
    targets: dict[str, tuple[float | None, float | None]] = field(default_factory=dict)

    def add(self, section: str, name: str, part: Any) -> None:
        self.sections.setdefault(section, {})[name] = part

    def joint(self, place: np.ndarray | None = None, pin: bool = False) -> str:
        name = f"j{len(self.joints)}"
        where = self.rng.uniform(-2, 2, 2) if place is None else place
        self.places[name] = where
        self.joints[name] = {"at": where.tolist(), **({"pin": True} if pin else {})}
        return name

    def new(self, section: str, part: Any) -> str:
        """A part under the next free name of its kind."""
        name = f"{section[:-1]}{len(self.sections.get(section, {}))}"
        self.add(section, name, part)
        return name

    def bone(self, a: str, b: str) -> str:
        name = f"b{len(self.sections.get('bones', {}))}"
        self.add("bones", name, [a, b])
        return name

    def gap(self, a: str, b: str) -> float:
        return float(np.linalg.norm(self.places[b] - self.places[a]))

    def heading(self, a: str, b: str) -> float:
        way = self.places[b] - self.places[a]
        return float(np.degrees(np.arctan2(way[1], way[0])))

    def placed(self, but: tuple[str, ...] = ()) -> str:
        names = [n for n in self.places if n not in but]
        return names[int(self.rng.integers(len(names)))]

    def rig(self) -> rp.Rig:
        return rp.make_rig(self.joints, **self.sections)


@dataclass(frozen=True)
class Case:
    """A rig, what is driven and asked for, and the pose ``(n_joints, 2)`` that was drawn."""

    rig: rp.Rig
    drives: dict[str, float]
    targets: dict[str, tuple[float | None, float | None]]
    drawn: np.ndarray

    @property
    def wishes(self) -> dict[str, dict[str, float]]:
        """Targets by axis, as the verbs take them."""
        return {j: {"xy"[k]: v for k, v in enumerate(place) if v is not None}
                for j, place in self.targets.items()}


def random_rig(seed: int, steps: int = 4) -> tuple[rp.Rig, dict[str, float]]:
    """A rig of ``steps`` two-way placings and the drives of its drawn pose."""
    case = random_case(seed, steps, PLAIN)
    return case.rig, case.drives


def random_case(seed: int, steps: int = 4,
                kinds: Sequence[Callable[[Draft], None]] | None = None) -> Case:
    """A rig of ``steps`` placings of the given kinds, of all of them if none are given."""
    kinds = EVERY if kinds is None else kinds
    draft = Draft(np.random.default_rng(seed))
    for _ in range(2):
        draft.joint(pin=True)
    _crank(draft)
    for _ in range(steps):
        kinds[int(draft.rng.integers(len(kinds)))](draft)
    drawn = np.array(list(draft.places.values()))
    return Case(draft.rig(), draft.drives, draft.targets, drawn)


def _crank(draft: Draft) -> None:
    tip = draft.joint()
    draft.bone("j0", tip)
    draft.add("cranks", "turn", {"turns": "b0", "from": "ground", "about": "j0"})
    way = draft.places[tip] - draft.places["j0"]
    draft.drives["turn"] = float(np.degrees(np.arctan2(way[1], way[0])))


def _two(draft: Draft) -> tuple[str, str]:
    a = draft.placed()
    return a, draft.placed((a,))


def _dyad(draft: Draft) -> None:
    a, b = _two(draft)
    new = draft.joint()
    draft.bone(a, new)
    draft.bone(new, b)


def _ram(draft: Draft) -> None:
    a, b = _two(draft)
    new = draft.joint()
    draft.bone(a, new)
    name = draft.new("rams", {"ends": [new, b]})
    draft.drives[name] = float(np.linalg.norm(draft.places[new] - draft.places[b]))


def _plate(draft: Draft) -> None:
    a, b = _two(draft)
    corner, other = draft.joint(), draft.joint()
    name = f"p{len(draft.sections.get('plates', {}))}"
    draft.add("plates", name, [a, corner, other])
    draft.bone(corner, b)


def _rail(draft: Draft) -> None:
    a = draft.placed()
    new = draft.joint()
    draft.bone(a, new)
    direction = draft.rng.normal(size=2)
    through = draft.places[new] + draft.rng.uniform(-1, 1) * direction
    draft.add("rails", f"r{len(draft.sections.get('rails', {}))}",
              {"joint": new, "through": through.tolist(), "direction": direction.tolist()})


def _slot(draft: Draft) -> None:
    """A lever about a placed joint whose slot passes another placed joint."""
    pivot, slider = _two(draft)
    way = draft.places[slider] - draft.places[pivot]
    end = draft.joint(draft.places[pivot] + way * draft.rng.uniform(1.2, 2.0))
    draft.bone(pivot, end)
    draft.add("rails", f"r{len(draft.sections.get('rails', {}))}",
              {"joint": slider, "along": [pivot, end]})


def _sliding_body(draft: Draft) -> tuple[str, list[str]]:
    """A plate with two joints on one rail, or on two parallel ones, and two joints beside them."""
    names = [draft.joint() for _ in range(4)]
    plate = f"p{len(draft.sections.get('plates', {}))}"
    draft.add("plates", plate, names)
    direction = draft.places[names[1]] - draft.places[names[0]]
    if draft.rng.random() < 0.5:
        direction = direction + draft.rng.normal(size=2) * 0.2
    for name in names[:2]:
        draft.add("rails", f"r{len(draft.sections.get('rails', {}))}",
                  {"joint": name, "through": draft.places[name].tolist(),
                   "direction": direction.tolist()})
    return plate, names


def _crosshead(draft: Draft) -> None:
    """A sliding body pushed by a rod."""
    before = draft.placed()
    _, names = _sliding_body(draft)
    draft.bone(before, names[2])


def _yoke(draft: Draft) -> None:
    """A sliding body with a slot in which a placed joint runs."""
    before = draft.placed()
    _, names = _sliding_body(draft)
    # The slot's far end is drawn so that the slot passes through the joint.
    a, b = names[2], names[3]
    way = draft.places[before] - draft.places[a]
    draft.places[b] = draft.places[a] + way * draft.rng.uniform(1.2, 2.0)
    draft.joints[b]["at"] = draft.places[b].tolist()
    draft.add("rails", f"r{len(draft.sections.get('rails', {}))}",
              {"joint": before, "along": [a, b]})


def _rail_through(draft: Draft, joint: str) -> str:
    direction = draft.rng.normal(size=2)
    direction /= np.linalg.norm(direction)
    through = draft.places[joint] + draft.rng.uniform(-1, 1) * direction
    return draft.new("rails", {"joint": joint, "through": through.tolist(),
                               "direction": direction.tolist()})


def _driven_rail(draft: Draft) -> None:
    """A joint led along a rail."""
    new = draft.joint()
    name = _rail_through(draft, new)
    rail = draft.sections["rails"][name]
    draft.drives[name] = float((draft.places[new] - rail["through"]) @ np.array(rail["direction"]))


def _bar_from_bar(draft: Draft) -> None:
    """A bone whose angle is driven from another bone that it hangs on."""
    bones = [(n, b) for n, b in draft.sections["bones"].items() if b[1] in draft.places]
    name, (a, b) = bones[int(draft.rng.integers(len(bones)))]
    new = draft.joint()
    mine = draft.bone(b, new)
    crank = draft.new("cranks", {"turns": mine, "from": name, "about": b})
    draft.drives[crank] = draft.heading(b, new) - draft.heading(b, a)


def _target(draft: Draft) -> None:
    """A joint on one bone, one of whose coordinates is asked for."""
    new = draft.joint()
    draft.bone(draft.placed((new,)), new)
    axis = int(draft.rng.integers(2))
    place = float(draft.places[new][axis])
    draft.targets[new] = (place, None) if axis == 0 else (None, place)


def _moving_slot(draft: Draft) -> None:
    """A joint on one bone that slides along another, placed one."""
    bones = list(draft.sections["bones"].values())
    a, b = bones[int(draft.rng.integers(len(bones)))]
    way = draft.places[b] - draft.places[a]
    new = draft.joint(draft.places[a] + draft.rng.uniform(-0.5, 1.5) * way)
    draft.new("rails", {"joint": new, "along": [a, b]})
    draft.bone(draft.placed((new, a, b)), new)


def _aimed_plate(draft: Draft) -> None:
    """A plate that keeps a driven heading, held by two bones."""
    corners = [draft.joint() for _ in range(3)]
    plate = draft.new("plates", corners)
    crank = draft.new("cranks", {"turns": plate, "line": corners[:2]})
    draft.drives[crank] = draft.heading(*corners[:2])
    feet = [draft.placed(tuple(corners)) for _ in range(2)]
    draft.bone(feet[0], corners[0])
    draft.bone(feet[1], corners[2])


def _fence(draft: Draft) -> None:
    """A slack ram between two placed joints: it allows some branches only."""
    a, b = _two(draft)
    long = draft.gap(a, b)
    draft.new("rams", {"ends": [a, b], "range": [0.7 * long, 1.3 * long]})


def _surplus(draft: Draft) -> None:
    """A bone between two placed joints, none too many for the drawn pose."""
    a, b = _two(draft)
    if not any({a, b} == set(e) for e in draft.sections["bones"].values()):
        draft.bone(a, b)


def _feet(draft: Draft, corners: Sequence[str]) -> None:
    """A leg from each corner to a placed joint, none used twice."""
    feet: list[str] = []
    for corner in corners:
        feet.append(draft.placed((*corners, *feet)))
        draft.bone(feet[-1], corner)


def _platform(draft: Draft) -> None:
    """A plate on three legs: a block that is solved as one."""
    corners = [draft.joint() for _ in range(3)]
    draft.new("plates", corners)
    _feet(draft, corners)


def _triangle(draft: Draft) -> None:
    """Three bones in a triangle on three legs: it may turn over."""
    corners = [draft.joint() for _ in range(3)]
    for k in range(3):
        draft.bone(corners[k], corners[(k + 1) % 3])
    _feet(draft, corners)


def _trammel(draft: Draft) -> None:
    """A plate with two joints on rails and one on a leg."""
    corners = [draft.joint() for _ in range(3)]
    draft.new("plates", corners)
    for corner in corners[:2]:
        _rail_through(draft, corner)
    draft.bone(draft.placed(tuple(corners)), corners[2])


PLAIN = (_dyad, _dyad, _plate, _rail, _ram, _slot)
ONE_BY_ONE = (*PLAIN, _driven_rail, _bar_from_bar, _target, _moving_slot, _aimed_plate)
PRUNED = (*ONE_BY_ONE, _fence, _surplus)
BLOCKS = (_platform, _triangle, _trammel)
EVERY = (*PRUNED, *BLOCKS)


GRID = [np.array([x, y], dtype=float) for x in range(-1, 3) for y in range(-1, 3)]
WAYS = ((1, 0), (0, 1), (1, 1), (1, -1))


def lattice_case(seed: int, steps: int = 3) -> Case:
    """Joints on a small grid, so that bars lie in line, circles touch and joints coincide."""
    draft = Draft(np.random.default_rng(seed))
    draft.joint(_grid(draft), pin=True)
    draft.joint(_grid(draft, "j0"), pin=True)
    tip = draft.joint(_grid(draft, "j0"))
    bone = draft.bone("j0", tip)
    draft.add("cranks", "turn", {"turns": bone, "about": "j0"})
    draft.drives["turn"] = draft.heading("j0", tip)
    for _ in range(steps):
        a, b = _two(draft)
        kind = int(draft.rng.integers(4))
        if kind == 2:
            new = draft.joint(_grid(draft, a))
            draft.bone(a, new)
            draft.new("rails", {"joint": new, "through": draft.places[new].tolist(),
                                "direction": list(WAYS[int(draft.rng.integers(4))])})
        elif kind == 3:
            corner = draft.joint(_grid(draft, a, b))
            draft.new("plates", [a, corner, draft.joint(_grid(draft, a, corner))])
            draft.bone(corner, b)
        else:
            new = draft.joint(_grid(draft, a, b))
            draft.bone(a, new)
            draft.bone(new, b)
    return Case(draft.rig(), draft.drives, {}, np.array(list(draft.places.values())))


def _grid(draft: Draft, *off: str) -> np.ndarray:
    """A place of the grid where none of these joints lies."""
    free = [p for p in GRID if all((p != draft.places[j]).any() for j in off)]
    return free[int(draft.rng.integers(len(free)))]
