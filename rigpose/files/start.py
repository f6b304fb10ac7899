"""A new rig file with the joints of a CSV file in place and everything else to fill in."""

from __future__ import annotations

import unicodedata
from collections.abc import Collection, Mapping
from pathlib import Path

from rigpose.files import tomltext
from rigpose.files.locators import Locators, read_locators
from rigpose.ground.errors import BadInput, Problem
from rigpose.model.head import VERSION
from rigpose.model.names import LONGEST_NAME, meant, name_fault, shown
from rigpose.model.rig import METRES, Coordinates

_SECTIONS = """
# Mark what is fixed to the ground in [joints]: NAME = { at = [...], pin = true }

# Rigid lengths between two joints; without `length` they are measured from the places above.
# [bones]
# NAME = ["JOINT", "JOINT"]
# NAME = { ends = ["JOINT", "JOINT"], length = 2.5 }

# Rigid bodies that carry three joints or more.
# [plates]
# NAME = ["JOINT", "JOINT", "JOINT"]

# Joints that slide on a line: on the ground, or in a slot that two joints carry.
# [rails]
# NAME = { joint = "JOINT", through = ORIGIN, direction = XAXIS, range = [-1, 1] }
# NAME = { joint = "JOINT", along = ["JOINT", "JOINT"] }

# Bones whose length is driven, or free within its range.
# [rams]
# NAME = { ends = ["JOINT", "JOINT"], range = [1, 2] }
"""
_TURNS = """
# Angles that may be driven, in degrees counter-clockwise.
# [cranks]
# NAME = { turns = "BONE", from = "ground", about = "JOINT", zero = "rest" }

# Angles between two bones that may not be left.
# [limits]
# NAME = { from = "BONE", to = "BONE", at = "JOINT", range = [10, 170] }
"""
_TURNS_IN_SPACE = """
# Bones or plates that turn about one axis; without it they meet in a ball joint.
# [hinges]
# NAME = { parts = ["ground", "BONE"], at = "JOINT", axis = [0, 1, 0] }

# Parts that slide along one another and never turn; universals have a cross between them.
# [sliders]
# NAME = { parts = ["BONE", "BONE"], at = "JOINT", axis = [0, 0, 1], range = [-1, 1] }
# [universals]
# NAME = { parts = ["BONE", "BONE"], at = "JOINT", axes = [[1, 0, 0], [0, 1, 0]] }

# Joints that stay in a plane on the ground.
# [planes]
# NAME = { joints = ["JOINT"], through = [0, 0, 0], normal = [0, 0, 1] }

# Angles that may be driven, in degrees by the right hand about the hinge.
# [cranks]
# NAME = { turns = "BONE", from = "ground", about = "HINGE" }

# Angles about a hinge that may not be left.
# [limits]
# NAME = { from = "BONE", to = "BONE", at = "HINGE", range = [10, 170] }
"""

_PLANES = ((2, (0, 1), ([1, 0, 0], [0, 1, 0])), (1, (0, 2), ([1, 0, 0], [0, 0, 1])),
           (0, (1, 2), ([0, 1, 0], [0, 0, 1])))
"""The axis that doesn't change, the two that remain, and where they point in the scene."""


def start_text(csv_path: str | Path, unit: str = "m", up: str = "y") -> str:
    """A rig file (TOML) with the joints of a CSV file and all sections as comments.

    The file has columns joint (or name), x, y and perhaps z, in ``unit`` and with ``up`` ("y"
    or "z") upwards; both are written into the rig. Joints that all lie in one plane of the axes
    make a plane rig. Names that a rig cannot have get one that it can, and [names] keeps theirs.
    Raises BadInput for a wrong unit or axis and for all that is wrong with the CSV file.
    """
    _check_frame(unit, up)
    path = Path(csv_path)
    found = read_locators(path)
    names = _joint_names(found.places)
    plane = _plane(found)
    head = [f"rigpose = {VERSION}", f"name = {tomltext.text(path.stem)}",
            f"dim = {3 if plane is None else 2}", f"unit = {tomltext.text(unit)}",
            f"up = {tomltext.text(up)}"]
    axes = (0, 1, 2) if plane is None else plane[0]
    if plane is not None and plane[1]:
        head.append(plane[1])
    joints = [f"{tomltext.key(names[n])} = {tomltext.value([p[a] for a in axes])}"
              for n, p in found.places.items()]
    return "\n".join([*head, "", "[joints]", *joints, *_studio_names(names),
                      _sections(plane is None)])


def _sections(in_space: bool) -> str:
    """All other sections as comments."""
    zeros, one = ("[0, 0, 0]", "[1, 0, 0]") if in_space else ("[0, 0]", "[1, 0]")
    shared = _SECTIONS.replace("ORIGIN", zeros).replace("XAXIS", one)
    return shared + (_TURNS_IN_SPACE if in_space else _TURNS)


def _check_frame(unit: str, up: str) -> None:
    problems = []
    if unit not in METRES:
        problems.append(Problem("", "unit", f"a unit is one of {', '.join(METRES)}", shown(unit),
                                meant(unit, METRES)))
    if up not in ("y", "z"):
        problems.append(Problem("", "up", "up is y or z", shown(up), "write y or z"))
    if problems:
        raise BadInput(problems)


def _joint_names(names: Collection[str]) -> dict[str, str]:
    """A name that a rig may have for each: its own where it can be, else the end of it."""
    found: dict[str, str] = {}
    taken = {n for n in names if name_fault(n) is None}
    for name in names:
        if name in taken:
            found[name] = name
            continue
        plain = _plain(name)
        k, choice = 1, plain
        while choice in taken:
            k += 1
            choice = f"{plain}_{k}"
        taken.add(choice)
        found[name] = choice
    return found


def _plain(name: str) -> str:
    end = unicodedata.normalize("NFC", name.rsplit(":", maxsplit=1)[-1].strip() or name)
    clean = "".join("_" if name_fault("a" + sign + "a") else sign for sign in end)
    return clean[: LONGEST_NAME - 10].strip() or "joint"


def _plane(found: Locators) -> tuple[tuple[int, ...], str] | None:
    """The axes of a plane rig and its `plane` as text; None where the joints fill space."""
    if found.dim == 2:
        return (0, 1), ""
    points = list(found.places.values())
    for still, axes, (x, y) in _PLANES:
        level = points[0][still]
        if all(p[still] == level for p in points):
            return axes, _stand(still, level, x, y)
    return None


def _stand(still: int, level: float, x: list[int], y: list[int]) -> str:
    if still == 2 and level == 0:
        return ""
    origin: Coordinates = tuple(level if k == still else 0.0 for k in range(3))
    return f"plane = {tomltext.value({'origin': origin, 'x': x, 'y': y})}"


def _studio_names(names: Mapping[str, str]) -> list[str]:
    changed = {new: old for old, new in names.items() if new != old}
    if not changed:
        return []
    return ["", "# Names that a rig cannot have; files are read and written with these.", "[names]",
            *[f"{tomltext.key(new)} = {tomltext.text(old)}" for new, old in changed.items()]]
