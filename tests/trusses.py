"""Bars, plates and wheels that are looked over, and their freedoms."""

from __future__ import annotations

from collections.abc import Iterable
from typing import Any

import numpy as np

from rigpose.model.make import make_rig
from rigpose.model.rig import Rig
from rigpose.solve.report import Report

Places = Iterable[tuple[float, float]]
Edges = Iterable[tuple[int, int]]


def bars(places: Places, edges: Edges, pins: Iterable[int] = (), **more: Any) -> Rig:
    """Joints ``j0, j1, …`` and bones ``0-2, …`` measured from their places."""
    held = set(pins)
    joints = {f"j{k}": {"at": [float(x), float(y)], "pin": k in held}
              for k, (x, y) in enumerate(places)}
    return make_rig(joints, {f"{a}-{b}": [f"j{a}", f"j{b}"] for a, b in edges}, **more)


def freedoms(report: Report) -> tuple[int, int, int]:
    assert report.freedoms is not None and report.freedoms_first_order is not None
    return report.freedoms, report.freedoms_first_order, report.freedoms_counted


LOOP = [(0, 2), (2, 3), (3, 1)]
K33 = [(a, b) for a in (0, 2, 4) for b in (1, 3, 5)]
PRISM = [(0, 1), (1, 2), (0, 2), (3, 4), (4, 5), (3, 5), (0, 3), (1, 4), (2, 5)]
TRIANGLE = np.array([(0, 0), (2, 0), (0.7, 1.5)])
RISE = np.array([0.4, 2.0])


def four_bar(**more: Any) -> Rig:
    joints = {"quay": {"at": [0, 0], "pin": True}, "post": {"at": [3, 0], "pin": True},
              "pin": [0, 1], "knee": [3, 2]}
    bones = {"crank": ["quay", "pin"], "rod": ["pin", "knee"], "rocker": ["knee", "post"]}
    turn = {"turns": "crank", "from": "ground", "about": "quay"}
    return make_rig(joints, bones, cranks={"turn": turn}, **more)


def five_bar() -> Rig:
    joints = {"quay": {"at": [0, 0], "pin": True}, "post": {"at": [3, 0], "pin": True},
              "left": [-0.3, 1], "tip": [1.5, 2.2], "right": [3.4, 1.4]}
    bones = {"crank": ["quay", "left"], "rod": ["left", "tip"], "stay": ["tip", "right"],
             "rocker": ["right", "post"]}
    return make_rig(joints, bones, cranks={
        "west": {"turns": "crank", "from": "ground", "about": "quay"},
        "east": {"turns": "rocker", "from": "ground", "about": "post"}})


def wheels(third: float = 1.0, angle: float = 0.7, **more: Any) -> Rig:
    """Three equal cranks on one stiff rod; the third's length may differ."""
    cos, sin = float(np.cos(angle)), float(np.sin(angle))
    joints: dict[str, Any] = {}
    for k, x in enumerate((0.0, 2.0, 5.0), 1):
        joints[f"hub{k}"] = {"at": [x, 0.0], "pin": True}
        joints[f"pin{k}"] = [x + cos, sin]
    bones = {f"wheel{k}": {"ends": [f"hub{k}", f"pin{k}"], "length": third if k == 3 else 1.0}
             for k in (1, 2, 3)}
    return make_rig(joints, bones, plates={"rod": ["pin1", "pin2", "pin3"]}, **more)


def on_ellipse() -> np.ndarray:
    turn = np.radians([10, 80, 130, 200, 260, 330])
    return np.stack([2 * np.cos(turn), np.sin(turn)], axis=1)


def nearly() -> Rig:
    """Three wheels that close exactly as drawn and nowhere else: one hub is a little off."""
    base = wheels()
    joints = {j.name: {"at": j.at, "pin": j.pin} for j in base.joints}
    joints["hub3"] = {"at": (5.0003, 0.0), "pin": True}
    bones = {b.name: list(b.ends) for b in base.bones}
    return make_rig(joints, bones, plates={"rod": ["pin1", "pin2", "pin3"]})
