"""Long rigs of any number of joints, as documents: a lattice mast, a scissor lift, a spire."""

from __future__ import annotations

import math
from collections.abc import Callable
from typing import Any

Document = dict[str, Any]


def mast(joints: int) -> Document:
    """A chain of braced cells in the plane: two booms of joints, each cell with one diagonal."""
    places: dict[str, Any] = {}
    for k in range(joints // 2):
        places[f"a{k}"] = {"at": [float(k), 0.0]}
        places[f"b{k}"] = {"at": [float(k), 1.0 + 0.1 * math.sin(k)]}
    places["a0"]["pin"] = places["b0"]["pin"] = True
    bones: dict[str, Any] = {}
    for k in range(1, joints // 2):
        bones |= {f"t{k}": [f"a{k - 1}", f"a{k}"], f"u{k}": [f"b{k - 1}", f"b{k}"],
                  f"v{k}": [f"a{k}", f"b{k}"], f"w{k}": [f"a{k - 1}", f"b{k}"]}
    return {"rigpose": 1, "name": "mast", "dim": 2, "joints": places, "bones": bones}


def lift(joints: int) -> Document:
    """A scissor lift driven by its foot: in each stage two bars of three joints in line, crossed,
    2 wide and 1 high as drawn."""
    stages = joints // 3
    places: dict[str, Any] = {}
    plates: dict[str, Any] = {}
    for k in range(stages):
        places |= {f"l{k}": [0.0, float(k)], f"r{k}": [2.0, float(k)], f"m{k}": [1.0, k + 0.5]}
        plates |= {f"p{k}": [f"l{k}", f"m{k}", f"r{k + 1}"],
                   f"q{k}": [f"r{k}", f"m{k}", f"l{k + 1}"]}
    places |= {f"l{stages}": [0.0, float(stages)], f"r{stages}": [2.0, float(stages)]}
    places["l0"] = {"at": [0.0, 0.0], "pin": True}
    foot = {"joint": "r0", "through": [0, 0], "direction": [1, 0]}
    return {"rigpose": 1, "name": "lift", "dim": 2, "joints": places, "plates": plates,
            "rails": {"foot": foot}}


def spire(joints: int, braces: int = 4) -> Document:
    """A chain of braced cells in space: each joint tied to three before it, or to a fourth."""
    places: dict[str, Any] = {}
    bones: dict[str, Any] = {}
    for k in range(joints):
        turn = 2.1 * k
        places[f"j{k}"] = {"at": [0.5 * k, math.cos(turn), math.sin(turn)]}
        for d in range(1, min(k, braces) + 1) if k > 2 else ():
            bones[f"e{k}_{d}"] = [f"j{k - d}", f"j{k}"]
    for k in range(3):
        places[f"j{k}"]["pin"] = True
    return {"rigpose": 1, "name": "spire", "dim": 3, "joints": places, "bones": bones}


LONG: dict[str, Callable[[int], Document]] = {"mast": mast, "lift": lift, "spire": spire}
DRIVES: dict[str, dict[str, float]] = {"mast": {}, "lift": {"foot": 2.0}, "spire": {}}
