"""What people meet of a rig with hinges: its own joints in names, files and messages, and helper
joints only where nothing else tells branches apart.

What a studio may meet is the project's own rule, so the checks stand on the rig files: a helper is
a joint that no [joints] table holds.
"""

from __future__ import annotations

import csv
import json
import re
import shutil
import tomllib
from pathlib import Path

import numpy as np
import pytest
from calling import Capture, data, said
from test_hinged import parallel_four_bar, slider_crank

import rigpose as rp
from rigpose.cli.show import event_dict, known_event
from rigpose.ground.errors import BadInput
from rigpose.model.bends import bends_of
from rigpose.model.sliders import stands_at
from rigpose.motion.motion import Event
from rigpose.motion.naming import name_rows

ROOT = Path(__file__).resolve().parent.parent


@pytest.fixture
def quay(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> Path:
    shutil.copytree(ROOT / "rigs", tmp_path, dirs_exist_ok=True)
    monkeypatch.chdir(tmp_path)
    return tmp_path


def written(name: str) -> list[str]:
    """The joints that a rig's own file names; for rigs without copies all that people know."""
    with (ROOT / "rigs" / f"{name}.toml").open("rb") as file:
        return list(tomllib.load(file)["joints"])


RIB = """rigpose = 1
dim = 3
[joints]
crown = { at = [0.1, 0, 3], pin = true }
anchor = { at = [0.1, 0, 3.12], pin = true }
collar = [0, 0, 2.4]
pushed = [0.9, 0, 2.9]
elbow = [1.7, 0, 2.8]
horn = [1.72, 0, 2.93]
tip = [3.0, 0, 2.5]
[plates]
inner = ["crown", "pushed", "elbow"]
outer = ["elbow", "horn", "tip"]
[bones]
strut = ["collar", "pushed"]
rod = ["anchor", "horn"]
[rails]
mast = { joint = "collar", through = [0, 0, 0], direction = [0, 0, 1] }
[hinges]
crown = { parts = ["ground", "inner"], at = "crown", axis = [0, -1, 0] }
elbow = { parts = ["inner", "outer"], at = "elbow", axis = [0, -1, 0] }
"""


def rib(folder: Path) -> rp.Rig:
    """A canopy's rib: all that it is named for lies in one plane, so that sides of its own joints
    differ only as seen from the tips of the hinges' axes."""
    (folder / "rib.toml").write_text(RIB, encoding="utf-8")
    return rp.load_rig(folder / "rib.toml")


# which joints are helpers

@pytest.mark.parametrize("name", ["gull_leg", "lamplighter", "beacon_lift", "weather_loop",
                                  "quay_crane"])
def test_own_joints_are_those_that_the_file_names(name: str) -> None:
    rig = rp.load_rig(ROOT / "rigs" / f"{name}.toml")
    assert list(rig.own_joints) == written(name)
    assert [j for j in rig.joint_names if j not in rig.helper_joints] == written(name)


def test_copies_keep_their_helpers() -> None:
    rig = rp.load_rig(ROOT / "rigs" / "market_canopy.toml")
    assert rig.helper_joints == {f"rib{k}/{h} axis" for k in range(1, 9)
                                 for h in ("crown", "elbow")}


@pytest.mark.parametrize(("helper", "joint"), [
    ("root axis", "root"), ("stay_root axis", "stay_root"), ("ear axis", "ear"),
    ("spring axis", "rod_top"), ("spring side", "rod_top"), ("spring end", "rod_top"),
    ("spring side start", "rod_top"), ("spring side end", "rod_top")])
def test_where_a_helper_stands(helper: str, joint: str) -> None:
    rig = rp.load_rig(ROOT / "rigs" / "gull_leg.toml")
    assert stands_at(rig, helper) == joint


def test_where_the_helpers_of_a_cross_stand() -> None:
    rig = rp.make_rig({"middle": [0, 0, 5], "wick": [0, 0, 3]}, {"lamp": ["middle", "wick"]},
                      dim=3, universals={"ring": {"parts": ["ground", "lamp"], "at": "middle",
                                                  "axes": [[1, 0, 0], [0, 1, 0]]}})
    assert {stands_at(rig, h) for h in rig.helper_joints} == {"middle"}


# names

def test_an_own_joint_is_told_before_a_helper() -> None:
    """Even where only the helper's place differs, which else would be told first."""
    rig = parallel_four_bar()
    number = {rig.joint_names[b.joint]: k for k, b in enumerate(bends_of(rig))}
    assert {"tip", "b axis"} <= number.keys()
    signs = np.ones((2, len(number)), dtype=np.int8)
    signs[1, [number["tip"], number["b axis"]]] = -1
    moved = np.array([j.name == "b axis" for j in rig.joints])
    none = np.zeros(2, dtype=bool)
    names = name_rows(rig, signs, none, moved, np.ones(len(rig.joints), dtype=bool))
    assert list(names) == ["tip:left", "tip:right"]
    assert "b axis" not in names.bends(0)
    # Where the own joint's bend is the same the helper's is all that there is.
    signs[:, number["tip"]] = 1
    names = name_rows(rig, signs, none, moved, np.ones(len(rig.joints), dtype=bool))
    assert list(names) == ["b axis:left", "b axis:right"]
    assert names.bends(1)["b axis"] == "right"


def test_where_branches_meet_a_helper_is_told_only_if_no_own_joint_is_straight() -> None:
    rig = parallel_four_bar()
    number = {rig.joint_names[b.joint]: k for k, b in enumerate(bends_of(rig))}
    every = np.ones(len(rig.joints), dtype=bool)
    signs = np.ones((1, len(number)), dtype=np.int8)
    signs[0, [number["tip"], number["b axis"]]] = 0
    assert list(name_rows(rig, signs, np.array([True]), every, every)) == ["tip:left = tip:right"]
    signs[0, number["tip"]] = 1
    assert list(name_rows(rig, signs, np.array([True]), every, every)) == [
        "b axis:left = b axis:right"]


def test_names_of_machines_with_hinges_tell_own_joints() -> None:
    assert list(rp.find_branches(parallel_four_bar(), {"input": 40.0}).names) == [
        "knee:right", "knee:left"]
    found = rp.find_branches(slider_crank(), {"turn": 60.0})
    assert sorted(found.names) == ["pin:after", "pin:before"]


def test_helpers_may_still_be_named(tmp_path: Path) -> None:
    found = rp.find_branches(rib(tmp_path), {"mast": 2.4})
    assert len(found) == 4
    assert len(found.pick(**{"elbow axis": "left"})) == 2
    assert sorted(found.names) == sorted(
        f"pushed:{a} horn:{b}" for a in ("left", "right") for b in ("left", "right"))
    (tmp_path / "rib.toml").write_text(
        f'{RIB}[branches]\nup = {{ "elbow axis" = "left" }}\n', encoding="utf-8")
    named = rp.find_branches(rp.load_rig(tmp_path / "rib.toml"), {"mast": 2.4})
    assert list(named.pick("up").names) == list(found.pick(**{"elbow axis": "left"}).names)


def test_a_wrong_name_is_answered_with_own_joints() -> None:
    found = rp.find_branches(parallel_four_bar(), {"input": 40.0})
    with pytest.raises(BadInput, match=r"joints with bends are tip, knee$"):
        found.pick(nee="left")


def test_a_part_that_turns_freely_is_told() -> None:
    """A leaf of the lift that lies folded back on itself turns about its own sill."""
    found = rp.find_branches(rp.load_rig(ROOT / "rigs" / "beacon_lift.toml"), {"lift": 40.0})
    (note,) = found.notes
    assert re.fullmatch(r'in some poses "knee_y" turns freely \(.*upper_y.*\): such poses are not '
                        r"listed", note)


# files and JSON

@pytest.mark.parametrize("layout", ["tall", "wide"])
def test_a_bake_writes_own_joints_only(quay: Path, capsys: Capture, layout: str) -> None:
    said(capsys, "bake", "gull_leg.shot.toml", "--out", "leg.csv", "--layout", layout)
    with (quay / "leg.csv").open(newline="", encoding="utf-8") as file:
        rows = list(csv.DictReader(file))
    joints = written("gull_leg")
    shot = rp.load_shot("gull_leg.shot.toml")
    motion = rp.bake(shot)
    if layout == "tall":
        assert [row["joint"] for row in rows] == joints * len(motion)
        places = np.array([[float(row[a]) for a in "xyz"] for row in rows])
        places = places.reshape(len(motion), len(joints), 3)
    else:
        assert list(rows[0]) == ["frame", *(f"{j}.{a}" for j in joints for a in "xyz")]
        places = np.array([[[float(row[f"{j}.{a}"]) for a in "xyz"] for j in joints]
                           for row in rows])
    for k, joint in enumerate(joints):
        np.testing.assert_array_equal(places[:, k], motion[joint])
    # The arrays keep all joints.
    assert motion.joints == shot.rig.joint_names
    assert set(motion.joints) > set(joints)


def test_all_branches_and_poses_write_own_joints_only(quay: Path, capsys: Capture) -> None:
    said(capsys, "bake", "lamplighter.shot.toml", "--all-branches", "--out", "all.csv", code=0)
    said(capsys, "pose", "gull_leg.toml", "--drive", "fold=20", "--drive", "spring=0",
         "--out", "poses.csv")
    for file, name in (("all.csv", "lamplighter"), ("poses.csv", "gull_leg")):
        with (quay / file).open(newline="", encoding="utf-8") as text:
            joints = dict.fromkeys(row["joint"] for row in csv.DictReader(text))
        assert list(joints) == written(name)


@pytest.mark.usefixtures("quay")
def test_json_tells_own_joints_only(capsys: Capture) -> None:
    words = ("pose", "gull_leg.toml", "--drive", "fold=20", "--drive", "spring=0")
    found = data(capsys, *words)
    rig = rp.load_rig("gull_leg.toml")
    library = rp.find_branches(rig, {"fold": 20.0, "spring": 0.0})
    assert found["joints"] == written("gull_leg")
    assert any(j in rig.helper_joints for group in library.groups for j in group)
    assert not rig.helper_joints & {j for group in found["groups"] for j in group}
    for k, branch in enumerate(found["branches"]):
        for joint, place in zip(found["joints"], branch["positions"], strict=True):
            assert place == library.positions[k, 0, rig.index[joint]].tolist()
        assert branch["bends"].keys() <= set(written("gull_leg"))
    frames = data(capsys, *words[:2], "--drive", "fold=20:21:3", "--drive", "spring=0")
    assert np.shape(frames["branches"][0]["positions"]) == (3, len(written("gull_leg")), 3)


@pytest.mark.usefixtures("quay")
def test_the_table_of_poses_tells_no_helper(capsys: Capture) -> None:
    lines = said(capsys, "pose", "gull_leg.toml", "--drive", "fold=20", "--drive", "spring=0")
    assert lines[1].split() == ["branch", "margin", "stay"]
    assert not any("axis" in line or "spring" in line for line in lines)


def test_events_tell_the_joint_at_which_a_helper_stands() -> None:
    rig = parallel_four_bar()
    event = Event(12.0, "passed", ("knee", "c axis", "b axis"), ("coupler", "follower"))
    assert str(known_event(rig, event)) == (
        "frame 12: knee, tip passes a dead centre (coupler, follower)")
    assert event_dict(rig, event)["joints"] == ("knee", "tip")


# how well lengths hold

@pytest.mark.usefixtures("quay")
@pytest.mark.parametrize("name", ["folding_gangway", "weather_loop"])
def test_where_all_lengths_are_surplus_their_agreement_is_told(capsys: Capture, name: str) -> None:
    lines = said(capsys, "bake", f"{name}.shot.toml")
    rig = rp.load_rig(f"{name}.toml")
    motion = rp.bake(rp.load_shot(f"{name}.shot.toml"))
    assert {p.name for p in (*rig.bones, *rig.plates)} <= motion.redundant
    assert not any("0.0e+00" in line or line.startswith("lengths hold") for line in lines)
    (line,) = [line for line in lines if line.startswith("surplus lengths (")]
    assert f"agree to {motion.worst_redundant:.1e} of the rig's size" in line
    assert 0 < motion.worst_redundant < 1e-14
    found = data(capsys, "bake", f"{name}.shot.toml")
    assert (found["worst"], found["worst_redundant"]) == (None, motion.worst_redundant)


@pytest.mark.usefixtures("quay")
def test_where_some_lengths_are_surplus_both_are_told(capsys: Capture) -> None:
    lines = said(capsys, "bake", "gull_leg.shot.toml")
    assert any(line.startswith("lengths hold to ") for line in lines)
    assert any("are off by at most" in line for line in lines)
    assert json.dumps(data(capsys, "bake", "gull_leg.shot.toml")["worst"]) != "null"
