"""Random rigs in space with a known pose, as `random_rigs` in the plane."""

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

    def add(self, section: str, name: str, part: Any) -> None:
        self.sections.setdefault(section, {})[name] = part

    def number(self, section: str) -> int:
        return len(self.sections.get(section, {}))

    def joint(self, place: np.ndarray | None = None, pin: bool = False) -> str:
        name = f"j{len(self.joints)}"
        where = self.rng.uniform(-2, 2, 3) if place is None else place
        self.places[name] = where
        self.joints[name] = {"at": where.tolist(), **({"pin": True} if pin else {})}
        return name

    def bone(self, a: str, b: str) -> None:
        self.add("bones", f"b{self.number('bones')}", [a, b])

    def some(self, count: int) -> list[str]:
        names = list(self.places)
        return [names[k] for k in self.rng.choice(len(names), count, replace=False)]

    def rig(self) -> rp.Rig:
        return rp.make_rig(self.joints, dim=3, **self.sections)


def random_space_rig(seed: int, steps: int = 3) -> tuple[rp.Rig, dict[str, float]]:
    """A rig of ``steps`` placings and the drives of its drawn pose."""
    draft = Draft(np.random.default_rng(seed))
    for _ in range(3):
        draft.joint(pin=True)
    kinds = [_tripod, _tripod, _plate, _rail, _ram, _sheet, _slot, _hung]
    for _ in range(steps):
        kinds[int(draft.rng.integers(len(kinds)))](draft)
    return draft.rig(), draft.drives


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
    name = f"ram{draft.number('rams')}"
    draft.add("rams", name, {"ends": [c, top]})
    draft.drives[name] = float(np.linalg.norm(draft.places[c] - draft.places[top]))


def _sheet(draft: Draft) -> None:
    a, b = draft.some(2)
    top = draft.joint()
    draft.bone(a, top)
    draft.bone(b, top)
    draft.add("planes", f"s{draft.number('planes')}", {
        "joints": [top], "through": draft.places[top].tolist(),
        "normal": draft.rng.normal(size=3).tolist()})


def _rail(draft: Draft) -> None:
    (a,) = draft.some(1)
    slider = draft.joint()
    draft.bone(a, slider)
    draft.add("rails", f"r{draft.number('rails')}", {
        "joint": slider, "through": draft.places[slider].tolist(),
        "direction": draft.rng.normal(size=3).tolist()})


def _slot(draft: Draft) -> None:
    """A joint on a line through two others, at a given distance from a third."""
    a, b, c = draft.some(3)
    share = draft.rng.uniform(-0.5, 1.5)
    slider = draft.joint(draft.places[a] + share * (draft.places[b] - draft.places[a]))
    plate = f"p{draft.number('plates')}"
    corner = draft.joint()
    draft.add("plates", plate, [a, b, corner])
    draft.bone(c, corner)
    draft.bone(c, slider)
    draft.add("rails", f"r{draft.number('rails')}", {"joint": slider, "along": [a, b]})


def _plate(draft: Draft) -> None:
    """A body hinged on two placed joints, held by a bone."""
    a, b, c = draft.some(3)
    corner, other = draft.joint(), draft.joint()
    draft.add("plates", f"p{draft.number('plates')}", [a, b, corner, other])
    draft.bone(c, corner)


def _hung(draft: Draft) -> None:
    """A body on one placed joint, with three bones: two more joints placed one by one."""
    a, b, c = draft.some(3)
    corner, other, tip = draft.joint(), draft.joint(), draft.joint()
    draft.add("plates", f"p{draft.number('plates')}", [a, corner, other, tip])
    draft.bone(b, corner)
    draft.bone(c, corner)
    draft.bone(b, other)
