"""Bodies that slide on the ground, in space: pushed by rods, placed where a line meets a sphere."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pytest
from scipy.optimize import brentq

import rigpose as rp

PIN = {"pin": True}


def piston(axis: tuple[float, float, float] = (1, 0, 0)) -> rp.Rig:
    """A crank about z, a rod between two balls, and a block that slides on the ground."""
    return rp.make_rig(
        {"o": {"at": [0, 0, 0], **PIN}, "k": [0, 1, 0], "a": [3, 0, 0], "b": [3, 0.2, 0.3],
         "c": [3, -1, 1]},
        {"crank": ["o", "k"], "rod": ["k", "b"]}, dim=3, plates={"block": ["a", "b", "c"]},
        hinges={"shaft": {"parts": ["ground", "crank"], "at": "o", "axis": [0, 0, 1]}},
        cranks={"turn": {"turns": "crank", "about": "shaft"}},
        sliders={"way": {"parts": ["ground", "block"], "at": "a", "axis": list(axis)}})


def test_a_piston_in_space_follows_pythagoras() -> None:
    """Offset slider-crank whose rod also rises: x = r cos t + sqrt(l2 - (r sin t - e)2 - h2)."""
    turn = np.linspace(0, 360, 361)
    rig = piston()
    found = rp.find_branches(rig, {"turn": turn})
    assert (len(found), found.found) == (2, rp.Found.COMPLETE)
    t, rod2 = np.radians(turn + 90), 3**2 + 0.8**2 + 0.3**2
    root = np.sqrt(rod2 - (np.sin(t) - 0.2) ** 2 - 0.3**2)
    x = found.positions[:, :, rig.index["b"], 0]
    assert x[0] == pytest.approx(np.cos(t) + root, abs=1e-12)
    assert x[1] == pytest.approx(np.cos(t) - root, abs=1e-12)
    assert rp.judge(rig, found.positions, found.size).worst()[0] < 1e-12
    # It never turns: the other joints of the block keep their ways from it.
    for joint, way in (("a", (0, -0.2, -0.3)), ("c", (0, -1.2, 0.7))):
        away = found.positions[:, :, rig.index[joint]] - found.positions[:, :, rig.index["b"]]
        assert np.abs(away - way).max() < 1e-12
    assert found.values["way"][0] == pytest.approx(x[0] - 3, abs=1e-12)


def test_a_motion_read_back_has_its_helper_joints_again(tmp_path: Path) -> None:
    """A studio's file has no such joints; the block that they belong to tells where they are."""
    rig = piston()
    motion = rp.find_branches(rig, {"turn": np.linspace(0, 90, 10)}).take([0]).motion()
    rp.save_motion(motion, tmp_path / "piston.csv")
    assert "way axis" not in (tmp_path / "piston.csv").read_text()
    again = rp.load_motion(tmp_path / "piston.csv", rig)
    for joint in ("way axis", "way side"):
        assert again[joint] == pytest.approx(motion[joint], abs=1e-12)
    assert rp.compare(motion, again).worst < 1e-12


def test_its_block_may_be_driven_instead() -> None:
    found = rp.find_branches(piston(), {"way": 0.3})
    assert (len(found), found.found) == (2, rp.Found.COMPLETE)


def test_a_slanting_way_is_that_of_a_root_finder() -> None:
    axis = np.array([2.0, 0.5, -1.0])
    unit = axis / np.linalg.norm(axis)
    rig = piston((2.0, 0.5, -1.0))
    found = rp.find_branches(rig, {"turn": 40.0})
    start = np.array([3, 0.2, 0.3])
    k = np.array([np.cos(np.radians(130)), np.sin(np.radians(130)), 0])
    rod = float(np.linalg.norm(start - [0, 1, 0]))

    def off(way: float) -> float:
        return float(np.linalg.norm(start + way * unit - k)) - rod

    middle = float((k - start) @ unit)
    want = sorted(brentq(off, middle + low, middle + high, xtol=1e-14)
                  for low, high in ((-9, 0), (0, 9)))
    assert sorted(found.values["way"][:, 0]) == pytest.approx(want, abs=1e-12)
    assert found.found is rp.Found.COMPLETE
