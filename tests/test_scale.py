"""Long rigs: freedoms told right or not at all, lengths held, poses found without listing any."""

from __future__ import annotations

import json
from pathlib import Path
from typing import Any

import numpy as np
import pytest
from longrigs import lift, mast, spire

import rigpose as rp
from rigpose.model.make import make_rig
from rigpose.solve.planner import plan_for


def made(document: dict[str, Any], **more: Any) -> rp.Rig:
    sections = {k: v for k, v in document.items() if k not in ("rigpose", "joints", "bones")}
    return make_rig(document["joints"], document.get("bones"), **{**sections, **more})


def held(rig: rp.Rig, found: rp.Branches) -> None:
    assert len(found) == 1
    assert rp.judge(rig, found.positions, found.size).worst(found.redundant)[0] < 1e-12


def test_a_long_mast_is_rigid_and_stands_as_drawn(tmp_path: Path) -> None:
    file = tmp_path / "mast.json"
    file.write_text(json.dumps(mast(5000)), encoding="utf-8")
    rig = rp.load_rig(file)
    report = rp.check(rig)
    # Joint by joint on two bones each, from two pins: as many conditions as coordinates.
    assert (report.freedoms, report.freedoms_first_order, report.freedoms_counted) == (0, 0, 0)
    assert report.measured and report.finite and not report.gaps
    assert "at most" in str(report)
    found = rp.nearest_branch(rig)
    held(rig, found)
    assert found.found is rp.Found.COMPLETE
    drawn = np.array([j.at for j in rig.joints])
    assert np.abs(found.positions[0, 0] - drawn).max() < 1e-9 * found.size


STAGES = 1666


def raised(width: float) -> np.ndarray:
    """All joints of a lift with every stage up: a bar spans the width and the height of a stage,
    drawn 2 wide and 1 high (Pythagoras)."""
    high = np.sqrt(5.0 - width**2)
    places = [(x, y) for k in range(STAGES)
              for x, y in ((0.0, k), (width, k), (width / 2, k + 0.5))]
    return np.array([*places, (0.0, STAGES), (width, STAGES)]) * (1.0, high)


def test_a_long_lift_has_one_freedom_and_its_foot_drives_it() -> None:
    rig = made(lift(3 * STAGES))
    report = rp.check(rig)
    assert report.freedoms == report.freedoms_first_order == report.freedoms_counted == 1
    assert [m.freedoms for m in report.moving] == [1]
    assert len(report.moving[0].joints) == len(rig.joints) - 1
    assert str(report.suggestions[0]) == "drive foot"
    found = rp.nearest_branch(rig, {"foot": 2.0})
    held(rig, found)
    assert found.found is rp.Found.COMPLETE
    assert np.abs(found.positions[0, 0] - raised(2.0)).max() < 1e-9 * found.size


def test_a_long_lift_moved_is_told_as_the_nearest_found() -> None:
    # Its poses are far too many to exclude them all. With some stages turned over it stays nearer
    # to rest than with all of them up.
    rig = made(lift(3 * STAGES))
    found = rp.nearest_branch(rig, {"foot": 1.9})
    held(rig, found)
    assert found.found is rp.Found.BUDGET
    rest = raised(2.0)
    assert ((found.positions[0, 0] - rest) ** 2).sum() <= ((raised(1.9) - rest) ** 2).sum()


@pytest.mark.parametrize("braces", [3, 4])
def test_a_long_spire_is_rigid(braces: int) -> None:
    rig = made(spire(2500, braces))
    report = rp.check(rig)
    assert report.freedoms == report.freedoms_first_order == 0
    assert report.measured == (braces == 3)
    held(rig, rp.nearest_branch(rig))


def test_a_long_mast_on_one_pin_turns_and_without_pins_moves_as_a_whole() -> None:
    document = mast(2000)
    del document["joints"]["b0"]["pin"]
    document["bones"]["v0"] = ["a0", "b0"]
    assert rp.check(made(document)).freedoms == 1
    del document["joints"]["a0"]["pin"]
    assert rp.check(made(document)).freedoms == 3


def test_a_long_chain_of_bars_has_a_freedom_for_each() -> None:
    count = 1500
    joints: dict[str, Any] = {f"c{k}": [float(k), 0.1 * (k % 3)] for k in range(count + 1)}
    joints["c0"] = {"at": [0.0, 0.0], "pin": True}
    report = rp.check(make_rig(joints, {f"b{k}": [f"c{k}", f"c{k + 1}"] for k in range(count)}))
    assert report.freedoms == report.freedoms_counted == count
    assert [m.freedoms for m in report.moving] == [count]


def test_where_the_order_of_placing_decides_nothing_no_number_is_told() -> None:
    # Equal parallel cranks on one bar move, all but two of them redundant: counting can't know.
    count = 400
    joints: dict[str, Any] = {}
    for k in range(count):
        joints[f"hub{k}"] = {"at": [float(k), 0.0], "pin": True}
        joints[f"pin{k}"] = [k + 0.6, 0.8]
    rig = make_rig(joints, {f"crank{k}": [f"hub{k}", f"pin{k}"] for k in range(count)},
                   plates={"bar": [f"pin{k}" for k in range(count)]})
    report = rp.check(rig)
    assert report.freedoms is None and report.freedoms_first_order is None
    assert not report.finite and not report.moving and not report.suggestions
    assert "Freedoms: not known" in str(report)
    assert json.loads(json.dumps(report.as_dict()))["freedoms"] is None


def test_a_block_is_found_among_very_many_open_joints() -> None:
    # A deck on three legs, whose joints only a block of several equations places, and a mast on it.
    document = mast(1800)
    joints, bones = document["joints"], document["bones"]
    for j in ("a0", "b0"):
        del joints[j]["pin"]
    joints["c"] = [0.7, 0.4]
    feet = {"a0": [-0.4, -2.0], "b0": [-1.2, -1.7], "c": [1.5, -1.6]}
    for joint, foot in feet.items():
        joints[f"foot_{joint}"] = {"at": foot, "pin": True}
        bones[f"leg_{joint}"] = [f"foot_{joint}", joint]
    rig = made(document, plates={"deck": ["a0", "b0", "c"]})
    plan = plan_for(rig, frozenset(), frozenset())
    assert not plan.loose
    assert {rig.joint_names[j] for c in plan.clusters for j in c.joints} >= {"a0", "b0"}
    assert max(len(c.joints) for c in plan.clusters) <= 4
    assert rp.check(rig).freedoms == 0


def test_counts_too_large_for_json_are_text() -> None:
    told: Any = rp.check(made(mast(3000))).as_dict()["groups"]
    assert isinstance(told[0]["branches"], str)
    json.dumps(told)
