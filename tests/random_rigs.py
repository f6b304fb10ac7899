"""Random plane rigs with a known pose: joints are drawn first, parts are put on them afterwards.

Each rig is driven by one crank or ram and finite, so that the drawn pose is among its branches.
"""

from __future__ import annotations

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
    free: set[str] = field(default_factory=set)

    def add(self, section: str, name: str, part: Any) -> None:
        self.sections.setdefault(section, {})[name] = part

    def joint(self, place: np.ndarray | None = None, pin: bool = False) -> str:
        name = f"j{len(self.joints)}"
        where = self.rng.uniform(-2, 2, 2) if place is None else place
        self.places[name] = where
        self.joints[name] = {"at": where.tolist(), **({"pin": True} if pin else {})}
        return name

    def bone(self, a: str, b: str) -> None:
        self.add("bones", f"b{len(self.sections.get('bones', {}))}", [a, b])

    def placed(self, but: tuple[str, ...] = ()) -> str:
        names = [n for n in self.places if n not in but]
        return names[int(self.rng.integers(len(names)))]

    def rig(self) -> rp.Rig:
        return rp.make_rig(self.joints, **self.sections)


def random_rig(seed: int, steps: int = 4) -> tuple[rp.Rig, dict[str, float]]:
    """A rig of ``steps`` two-way placings and the drives of its drawn pose."""
    draft = Draft(np.random.default_rng(seed))
    for _ in range(2):
        draft.joint(pin=True)
    _crank(draft)
    kinds = [_dyad, _dyad, _plate, _rail, _ram, _slot, _crosshead, _yoke]
    for _ in range(steps):
        kinds[int(draft.rng.integers(len(kinds)))](draft)
    return draft.rig(), draft.drives


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
    name = f"ram{len(draft.drives)}"
    draft.add("rams", name, {"ends": [new, b]})
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
