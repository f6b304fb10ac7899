"""The command, in process: every verb, what it prints, its JSON, its exit codes, its refusals.

Values are checked against the library, which other tests hold to outside facts; here they only
have to come out whole. Expected texts are what a newcomer can act on.
"""

from __future__ import annotations

import json
import os
import re
import shutil
import subprocess
import sys
from pathlib import Path

import numpy as np
import pytest
from calling import Capture, data, leftovers, refused, said, table, write

from rigpose.cli.main import run
from rigpose.files.csvfile import CsvWriter
from rigpose.files.csvread import read_positions
from rigpose.files.rigfile import load_rig
from rigpose.files.shotfile import load_shot
from rigpose.model.equations import Array
from rigpose.motion.bake import bake
from rigpose.motion.branches import find_branches

ROOT = Path(__file__).resolve().parent.parent


@pytest.fixture(autouse=True)
def quay(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> Path:
    """A folder with the rigs of Lantern Quay and their shots, to work in."""
    shutil.copytree(ROOT / "rigs", tmp_path, dirs_exist_ok=True)
    monkeypatch.chdir(tmp_path)
    return tmp_path


# check

def test_check_tells_what_a_rig_can_do(capsys: Capture) -> None:
    lines = said(capsys, "check", "quay_crane.toml")
    assert lines[0].startswith("quay crane: 6 joints")
    assert any("Freedoms: 1" in line for line in lines)


def test_check_as_json_has_its_stable_keys(capsys: Capture) -> None:
    found = data(capsys, "check", "quay_engine.toml")
    assert {"name", "dim", "joints", "bones", "freedoms", "freedoms_first_order",
            "freedoms_counted", "redundant", "problems"} <= found.keys()
    # Three coupled wheels turn together; a count of bars sees one length too many.
    assert (found["name"], found["dim"], found["joints"], found["bones"]) == (
        "quay engine", 2, 6, 3)
    assert (found["freedoms"], found["freedoms_counted"]) == (1, 0)
    assert len(found["redundant"]) == 1
    assert found["problems"] == []


def test_check_of_lengths_that_cannot_close_exits_1(capsys: Capture) -> None:
    rig = write("gap.toml", """rigpose = 1
[joints]
near = { at = [0, 0], pin = true }
far = { at = [3, 0], pin = true }
hook = [1, 1]
[bones]
left = { ends = ["near", "hook"], length = 1 }
right = { ends = ["far", "hook"], length = 1 }
""")
    assert data(capsys, "check", rig, code=1)["problems"]
    said(capsys, "check", rig, code=1)


def test_check_settles_a_rig_and_keeps_its_comments(capsys: Capture) -> None:
    lines = said(capsys, "check", "bell_rocker.toml", "--settle", "settled.toml")
    assert lines[-1] == "wrote settled.toml"
    text = Path("settled.toml").read_text(encoding="utf-8")
    assert text.startswith("# The fog bell of Lantern Quay")
    # As drawn, with four decimals, the arm from the post to the knee was 0.7 but for rounding.
    rig = load_rig("settled.toml")
    post, knee = (np.array(rig.joints[rig.index[joint]].at) for joint in ("post", "knee"))
    assert np.linalg.norm(knee - post) == pytest.approx(0.7, abs=1e-15)


# pose

def test_pose_lists_branches_with_their_gauges(capsys: Capture) -> None:
    lines = said(capsys, "pose", "dredger.toml", "--target", "tip=6.7,-1.6",
                 "--target", "wrist.y=-0.5")
    assert lines[0] == "dredger: 2 branches, complete"
    assert lines[1].split() == ["branch", "margin", "boom_angle", "bucket_angle", "lift", "crowd",
                                "curl"]
    assert [line.split()[:2] for line in lines[2:]] == [["1", "elbow:right"], ["2", "elbow:left"]]


def test_pose_as_json_has_its_stable_keys_and_the_librarys_numbers(capsys: Capture) -> None:
    found = data(capsys, "pose", "bell_rocker.toml", "--drive", "wheel=90")
    assert {"found", "joints", "branches"} <= found.keys()
    assert found["found"] == "complete"
    rig = load_rig("bell_rocker.toml")
    assert found["joints"] == list(rig.joint_names)
    want = find_branches(rig, {"wheel": 90})
    assert len(found["branches"]) == 2
    for k, branch in enumerate(found["branches"]):
        assert {"name", "bends", "margin", "miss", "positions"} <= branch.keys()
        assert branch["name"] == want.names[k]
        assert branch["bends"]["knee"] == ("left", "right")[k]
        assert branch["miss"] == 0
        assert branch["margin"] == float(want.margin[k, 0])
        assert (np.array(branch["positions"]) == want.positions[k, 0]).all()
        assert branch["values"]["wheel"] == 90


def test_pose_over_frames_gives_a_list_for_each_branch(capsys: Capture) -> None:
    words = ("pose", "bell_rocker.toml", "--drive", "wheel=0:360:5")
    found = data(capsys, *words)
    assert [np.shape(branch["positions"]) for branch in found["branches"]] == [(5, 5, 2)] * 2
    assert found["branches"][0]["values"]["wheel"] == [0, 90, 180, 270, 360]
    assert len(found["branches"][0]["miss"]) == 5
    lines = said(capsys, *words)
    assert lines[0] == "bell rocker: 2 branches over 5 frames, complete"
    assert lines[1].split() == ["branch", "margin", "frames"]


def test_a_narrow_terminal_folds_names_and_cuts_no_number(capsys: Capture) -> None:
    from rigpose.cli import show

    rows = [["1", "knee:left " * 12, "0.123", "-122.471"]]
    with pytest.MonkeyPatch.context() as patch:
        patch.setattr(sys.stdout, "isatty", lambda: True, raising=False)
        patch.setenv("COLUMNS", "60")
        show.print_table(["", "branch", "margin", "slope"], rows)
    lines = re.sub(r"\x1b\[[0-9;]*m", "", capsys.readouterr().out).splitlines()
    assert len(lines) > 3
    assert all(len(line) <= 60 for line in lines)
    assert "0.123" in lines[1]
    assert "-122.471" in lines[1]
    assert "".join(lines[1:]).count("knee:left") == 12


def test_pose_keeps_to_the_bends_asked_for(capsys: Capture) -> None:
    words = ("pose", "bell_rocker.toml", "--drive", "wheel=90")
    lines = said(capsys, *words, "--bend", "knee=right")
    assert lines[0] == "bell rocker: 1 branch, complete"
    assert [line.split()[1] for line in lines[2:]] == ["knee:right"]
    lines = said(capsys, *words, "--bend", "knee=straight", code=1)
    assert lines == ["bell rocker: no branch is knee:straight; there are knee:left, knee:right"]


def test_pose_finds_the_nearest_alone_and_leaves_out_mirrors(capsys: Capture) -> None:
    words = ("pose", "lantern_lift.toml", "--drive", "sill=1.6")
    assert len(data(capsys, *words)["branches"]) == 16
    assert len(data(capsys, *words, "--nearest")["branches"]) == 1
    assert len(data(capsys, *words, "--no-mirrors")["branches"]) <= 16
    lines = said(capsys, *words, "--most", "3", code=1)
    assert lines[0] == "lantern lift: 3 branches, stopped at a budget"


def test_pose_tells_independent_groups(capsys: Capture) -> None:
    lines = said(capsys, "pose", "quay_strider.toml", "--drive", "turn=10")
    at = lines.index("independent groups, each with branches of its own:")
    assert len(lines[at + 1:]) == 6
    assert all(line.endswith(" branches") for line in lines[at + 1:])
    assert "more; --out or --json gives all of them" in lines[at - 1]


@pytest.mark.parametrize(("words", "why"), [
    (("quay_crane.toml", "--target", "hook=100,100"),
     '"boom" and "jib" can\'t meet at "elbow", by up to 126.4 m'),
    (("quay_crane.toml", "--drive", "luff=4.5", "--drive", "slope=20"), 'the surplus "luff"'),
])
def test_pose_says_why_nothing_assembles(capsys: Capture, words: tuple[str, ...],
                                         why: str) -> None:
    lines = said(capsys, "pose", *words, "--out", "none.csv", code=1)
    assert lines[0] == "quay crane: nothing meets these drives and targets"
    assert lines[1].strip().startswith(why)
    assert lines[-1] == "none.csv is not written"
    assert not Path("none.csv").exists()
    found = data(capsys, "pose", *words, code=1)
    assert found["branches"] == []
    assert found["why"][0].startswith(why)


def test_pose_writes_every_branch(capsys: Capture) -> None:
    lines = said(capsys, "pose", "bell_rocker.toml", "--drive", "wheel=90", "--out", "bell.csv",
                 "--unit", "cm", "--up", "z")
    assert lines[-1] == "wrote bell.csv"
    cells = table("bell.csv")
    assert cells[0] == ["frame", "branch", "joint", "x", "y", "z"]
    assert len(cells) == 1 + 2 * 5
    # y up in metres becomes z up in centimetres: (x, -z, y).
    assert cells[2] == ["0", "knee:left", "post", "100.0", "0.0", "0.0"]
    assert [float(cell) for cell in cells[4][3:]] == pytest.approx(
        [81.77582689611357, 0, 67.58608965371189])


# bake

def test_bake_writes_every_frame_and_says_so(capsys: Capture) -> None:
    lines = said(capsys, "bake", "quay_crane.shot.toml", "--out", "crane.csv")
    assert lines[0] == "quay crane: branch heel:right, every frame has a pose"
    assert lines[-2:] == ["wrote crane.csv", "72 frames, 24 a second, m, y up"]
    found = read_positions("crane.csv")
    want = bake(load_shot("quay_crane.shot.toml"))
    assert found.joints == want.joints
    assert (found.frames == np.arange(1, 73)).all()
    assert (found.positions[0, ..., :2] == want.positions).all()
    assert (found.positions[0, ..., 2] == 0).all()


def test_the_last_line_of_a_bake_says_what_its_numbers_are_in(capsys: Capture) -> None:
    text = Path("quay_crane.shot.toml").read_text(encoding="utf-8")
    shot = write("long.shot.toml", text.replace("[1, 72]", "[1, 120]"))
    assert said(capsys, "bake", shot, "--unit", "cm")[-1] == "120 frames, 24 a second, cm, y up"
    lines = said(capsys, "bake", shot, "--fps", "24000/1001", "--up", "z", "--offset", "1000")
    assert lines[-1] == "120 frames, 24000/1001 a second, m, z up, frames +1000"


def test_bake_as_json_has_its_stable_keys(capsys: Capture) -> None:
    found = data(capsys, "bake", "bell_rocker_stuck.shot.toml", "--out", "bell.csv", code=1)
    assert {"frames", "branch", "spans", "problems", "out"} <= found.keys()
    assert (found["frames"], found["branch"], found["out"]) == (48, "pin:left", "bell.csv")
    (span,) = found["spans"]
    assert (span["first"], span["last"], span["parts"]) == (11, 48, ["crank", "rod"])
    assert span["why"].startswith('"crank" and "rod" can\'t meet at "pin"')
    assert found["problems"] == []


def test_frames_that_cannot_be_reached_stay_empty(capsys: Capture) -> None:
    lines = said(capsys, "bake", "bell_rocker_stuck.shot.toml", "--out", "bell.csv", code=1)
    assert lines[0] == "bell rocker: branch pin:left, 38 of 48 frames without a pose"
    assert lines[1].startswith('  frames 11 … 48: "crank" and "rod" can\'t meet at "pin"')
    cells = table("bell.csv")
    assert len(cells) == 1 + 48 * 5
    assert all(all(row[2:]) == (int(row[0]) <= 10) for row in cells[1:])


def test_dead_centres_that_recur_are_told_once(capsys: Capture) -> None:
    lines = said(capsys, "bake", "quay_engine.shot.toml")
    told = [line for line in lines if "passes a dead centre" in line]
    assert len(told) == 1
    assert told[0].startswith("  frames 13, 25, 37 … 229 (19 times): ")


def test_the_wide_layout_has_a_row_for_each_frame(capsys: Capture) -> None:
    said(capsys, "bake", "quay_crane.shot.toml", "--out", "wide.csv", "--layout", "wide")
    said(capsys, "bake", "quay_crane.shot.toml", "--out", "tall.csv")
    cells = table("wide.csv")
    assert cells[0][:4] == ["frame", "foot.x", "foot.y", "foot.z"]
    assert len(cells) == 1 + 72
    assert (read_positions("wide.csv").positions == read_positions("tall.csv").positions).all()


def converted(capsys: Capture, *words: str) -> tuple[Array, Array]:
    """Frames and positions of the crane's shot as the options ask for them."""
    said(capsys, "bake", "quay_crane.shot.toml", "--out", "some.csv", *words)
    found = read_positions("some.csv")
    return found.frames, found.positions[0]


def test_unit_up_rate_and_offset_change_the_file_and_nothing_else(capsys: Capture) -> None:
    frames, places = converted(capsys)
    _, inches = converted(capsys, "--unit", "in")
    assert inches == pytest.approx(places / 0.0254, rel=1e-15)
    _, turned = converted(capsys, "--up", "z")
    assert (turned[..., 2] == places[..., 1]).all()
    assert (turned[..., 1] == 0).all()
    later, _ = converted(capsys, "--offset", "-0.5")
    assert (later == frames - 0.5).all()
    # Frame 24 at 24 a second is the instant of frame 30 at 30 a second.
    quicker, same = converted(capsys, "--fps", "30")
    assert quicker == pytest.approx(frames * 30 / 24, rel=1e-15)
    assert (same == places).all()


def test_values_are_written_beside(capsys: Capture) -> None:
    lines = said(capsys, "bake", "quay_crane.shot.toml", "--values", "values.csv", "--unit", "cm")
    assert "wrote values.csv" in lines
    cells = table("values.csv")
    assert cells[0] == ["frame", "name", "value"]
    assert [row[1] for row in cells[1:4]] == ["slope", "luff", "fold"]
    # Rams in the file's unit, angles in degrees whatever the unit is.
    assert cells[2] == ["1", "luff", "450.0"]
    motion = bake(load_shot("quay_crane.shot.toml"))
    assert float(cells[1][2]) == motion.value("slope")[0]


def test_all_branches_stand_in_one_file(capsys: Capture) -> None:
    lines = said(capsys, "bake", "quay_crane.shot.toml", "--all-branches", "--out", "all.csv",
                 "--values", "values.csv")
    assert lines[:3] == ["quay crane: 2 branches, complete", "  heel:right: every frame",
                         "  heel:left: every frame"]
    assert lines[-1] == "72 frames, 24 a second, m, y up"
    found = read_positions("all.csv")
    assert found.branches == ("heel:right", "heel:left")
    assert (found.positions[0, ..., :2] == bake(load_shot("quay_crane.shot.toml")).positions).all()
    assert table("values.csv")[0] == ["frame", "branch", "name", "value"]
    assert len(table("values.csv")) == 1 + 2 * 72 * 3


def test_all_branches_fall_short_where_a_frame_has_no_pose_at_all(capsys: Capture) -> None:
    lines = said(capsys, "bake", "bell_rocker_stuck.shot.toml", "--all-branches", code=1)
    assert "  38 of 48 frames have no pose at all" in lines
    found = data(capsys, "bake", "bell_rocker_stuck.shot.toml", "--all-branches", code=1)
    assert {"frames", "branch", "spans", "problems", "out"} <= found.keys()
    assert [branch["living"] for branch in found["branches"]] == [10, 10]


def test_place_and_bends_that_disagree_stop_a_bake(capsys: Capture) -> None:
    text = Path("quay_crane.shot.toml").read_text(encoding="utf-8")
    shot = write("moved.shot.toml", text.replace(
        "fps = 24", 'fps = 24\nbranch = { heel = "left" }\nnear = { hook = [9, 8] }'))
    lines = said(capsys, "bake", shot, "--out", "moved.csv", code=1)
    assert "moved.shot.toml: near: the branch with these bends is the one nearest to the place" in (
        " ".join(lines))
    assert "moved.csv is not written" in lines
    assert not Path("moved.csv").exists()


# flat, start, schema

def test_flat_prints_a_rig_that_is_the_same_rig(capsys: Capture) -> None:
    assert said(capsys, "flat", "quay_strider.toml", "--out", "strider_flat.toml") == [
        "wrote strider_flat.toml"]
    rig, flat = load_rig("quay_strider.toml"), load_rig("strider_flat.toml")
    assert flat.fingerprint == rig.fingerprint
    printed = "\n".join(said(capsys, "flat", "quay_strider.toml")) + "\n"
    assert printed == Path("strider_flat.toml").read_text(encoding="utf-8")
    found = data(capsys, "flat", "quay_strider.toml")
    assert (found["joints"], found["fingerprint"], found["text"]) == (36, rig.fingerprint, printed)


def test_start_makes_a_rig_and_replaces_none(capsys: Capture) -> None:
    places = write("places.csv", "joint,x,y,z\nquay:hub,0,0,0\nquay:post,0,40,0\n")
    words = ("start", places, "--unit", "cm", "--up", "z", "--out", "new.toml")
    assert said(capsys, *words) == ["wrote new.toml"]
    rig = load_rig("new.toml")
    assert (rig.unit, rig.up, rig.joint_names) == ("cm", "z", ("hub", "post"))
    assert refused(capsys, *words) == [
        "--out: new.toml: a new rig file replaces nothing; got a file that exists; "
        "name another file, or remove this one"]
    assert data(capsys, "start", places)["text"].startswith("rigpose = 1")


def test_schema_prints_json(capsys: Capture) -> None:
    schema = json.loads("\n".join(said(capsys, "schema")))
    assert schema["title"] == "A rig file"
    said(capsys, "schema", "--out", "rig.schema.json")
    assert json.loads(Path("rig.schema.json").read_text(encoding="utf-8")) == schema
    shot = json.loads("\n".join(said(capsys, "schema", "--shot")))
    assert shot["title"] == "A shot file"


# refusals

def test_a_command_that_is_not_there_gets_a_suggestion(capsys: Capture) -> None:
    assert refused(capsys, "baek", "x") == [
        'rigpose: there is no command "baek"; did you mean "bake"?']
    (line,) = refused(capsys, "lift")
    assert line == ('rigpose: there is no command "lift"; there are "check", "pose", "bake", '
                    '"flat", "start", "schema"; see rigpose --help')


@pytest.mark.parametrize(("words", "told"), [
    (("bake",), "rigpose bake: Missing argument 'SHOT'; see rigpose bake --help"),
    (("check", "a.toml", "b.toml"), "rigpose check: Got unexpected extra argument (b.toml); "
                                    "see rigpose check --help"),
    (("pose", "quay_crane.toml", "--unit", "km"),
     "rigpose pose: Invalid value for '--unit': 'km' is not one of 'm', 'cm', 'mm', 'in', 'ft'; "
     "see rigpose pose --help"),
])
def test_a_mistake_in_the_call_is_one_line(capsys: Capture, words: tuple[str, ...],
                                           told: str) -> None:
    assert refused(capsys, *words) == [told]


def test_all_mistakes_of_a_call_are_told_at_once(capsys: Capture) -> None:
    lines = refused(
        capsys, "pose", "quay_crane.toml", "--drive", "luff=4.5", "--drive", "luff=5",
        "--drive", "slop=3", "--drive", "slope=steep", "--target", "hok=1,2",
        "--target", "hook=1,2", "--target", "hook.y=3", "--target", "back",
        "--target", "elbow.y=1,2", "--bend", "heel=up", "--bend", "heal=left")
    assert lines == [
        "--drive: luff: is given once; got 4.5 and 5; take one of them out",
        '--drive: slope=steep: a value is a finite number; got "steep"',
        '--target: is written JOINT=X,Y or JOINT.y=Y; got "back"',
        '--target: elbow.y=1,2: one axis has one number; got "1,2"',
        "--target: hook: a joint's place is given once; got it whole and by its axes; "
        "take one of them out",
        'quay_crane.toml: drive "slop": the rig has no drive of this name; got "slop"; '
        'is "slope" meant?',
        'quay_crane.toml: joint "hok": the rig has no joint of this name; got "hok"; '
        'is "hook" meant?',
        'quay_crane.toml: branch "heel": is one of left, right, straight; got "up"',
        'quay_crane.toml: branch "heal": names a joint that has a bend; got "heal"; '
        "joints with bends are heel, elbow, back",
    ]


def test_mistakes_of_options_and_of_files_are_told_together(capsys: Capture) -> None:
    text = Path("quay_crane.shot.toml").read_text(encoding="utf-8")
    shot = write("wrong.shot.toml", text.replace("luff = 4.5", "luf = 4.5")
                 .replace("fps = 24", "fps = 24\nbrunch = 1"))
    lines = refused(capsys, "bake", shot, "--fps", "quick", "--offset", "1e999999")
    assert lines == [
        '--fps: is a number or a fraction of two whole numbers; got "quick"; '
        "write 24 or 24000/1001",
        '--offset: is a number or a fraction of two whole numbers; got "1e999999"; '
        "write 24 or 24000/1001",
        'wrong.shot.toml:5: brunch: there is no key of this name; got "brunch"; '
        'did you mean "branch"?',
        'wrong.shot.toml:10: keys[0].drive.luf: there is no crank, ram or rail of this name; '
        'got "luf"; did you mean "luff"?',
    ]


def test_with_json_what_is_wrong_is_json_as_well(capsys: Capture) -> None:
    assert run(["pose", "quay_crane.toml", "--drive", "lufff=4", "--json"]) == 2
    out, err = capsys.readouterr()
    assert err.startswith('quay_crane.toml: drive "lufff"')
    (problem,) = json.loads(out)["problems"]
    assert problem["where"] == "quay_crane.toml"
    assert problem["mend"] == 'is "luff" meant?'


@pytest.mark.parametrize(("words", "told"), [
    (("bake", "nowhere.shot.toml"), "nowhere.shot.toml: the file can't be read; "
                                    "got No such file or directory"),
    (("check", "parts"), "parts: a rig file is TOML or JSON"),
    (("bake", "quay_crane.toml"), "quay_crane.toml: a shot file is asked for; got a rig file; "
                                  "name one of its shots, or use `rigpose pose`"),
    (("check", "quay_crane.shot.toml"), "quay_crane.shot.toml: a rig file is asked for; "
                                        "got a shot file"),
    (("pose", "quay_crane.toml"), "quay_crane.toml: drives and targets leave nothing that moves; "
                                  "got heel, elbow, back, hook still move; drive slope or luff"),
    (("pose", "quay_crane.toml", "--drive", "luff=9"),
     'quay_crane.toml: drive "luff": stays in its range 3.4 … 5.7; got 9'),
    (("pose", "quay_crane.toml", "--drive", "luff=4:5"),
     "--drive: luff=4:5: values over frames are FIRST:LAST:COUNT, the count from 1 to 10,000,000"),
    (("pose", "quay_crane.toml", "--drive", "luff=4:5:99999999999"),
     "--drive: luff=4:5:99999999999: values over frames are FIRST:LAST:COUNT"),
    (("pose", "quay_crane.toml", "--drive", "luff=nan"),
     '--drive: luff=nan: a value is a finite number; got "nan"'),
    (("pose", "quay_crane.toml", "--drive", "luff="), "--drive: is written NAME=VALUE"),
    (("pose", "quay_crane.toml", "--target", "hook.z=1"),
     'quay_crane.toml: target "hook.z": has no such axis; got "z"; axes are x, y'),
    (("pose", "quay_crane.toml", "--target", "hook=1,2,3"),
     'quay_crane.toml: target "hook": has 2 coordinates'),
    (("pose", "quay_crane.toml", "--drive", "luff=4.5", "--out", "nowhere/a.csv"), "/"),
    (("pose", "quay_crane.toml", "--drive", "luff=4.5", "--out", "parts"), "/"),
    (("pose", "quay_crane.toml", "--drive", "luff=4.5", "--out", "./quay_crane.toml"),
     "--out: ./quay_crane.toml: output goes to a file of its own; got the file of the rig"),
    (("bake", "quay_crane.shot.toml", "--out", "quay_crane.shot.toml"),
     "--out: quay_crane.shot.toml: output goes to a file of its own; got the file of the shot"),
    (("bake", "quay_crane.shot.toml", "--values", "quay_crane.toml"),
     "--values: quay_crane.toml: output goes to a file of its own; got the file of the rig"),
    (("bake", "quay_crane.shot.toml", "--out", "a.csv", "--values", "a.csv"),
     "--values: a.csv: output goes to a file of its own; got the file of --out"),
    (("bake", "quay_crane.shot.toml", "--fps", "0"), "--fps: a rate is more than 0"),
    (("bake", "quay_crane.shot.toml", "--fps", "24/0"), "--fps: is a number or a fraction"),
    (("flat", "quay_crane.toml", "--out", "quay_crane.toml"),
     "--out: quay_crane.toml: output goes to a file of its own"),
    (("start", "quay_crane.toml"), "quay_crane.toml:1: "),
])
def test_wrong_input_is_one_clear_message(capsys: Capture, quay: Path, words: tuple[str, ...],
                                          told: str) -> None:
    before = {path: path.read_bytes() for path in quay.rglob("*") if path.is_file()}
    lines = refused(capsys, *words)
    assert len(lines) == 1
    assert lines[0].startswith(told)
    assert {path: path.read_bytes() for path in quay.rglob("*") if path.is_file()} == before


@pytest.mark.parametrize("verb", ["check", "pose"])
def test_a_rig_in_space_is_read_by_every_verb(capsys: Capture, verb: str) -> None:
    rig = write("mast.toml", """rigpose = 1
dim = 3
[joints]
stern = { at = [0, 0, 0], pin = true }
port = { at = [3, 0, 0], pin = true }
bow = { at = [0, 3, 0], pin = true }
top = [1, 1, 5]
[bones]
one = ["stern", "top"]
two = ["port", "top"]
three = ["bow", "top"]
""")
    assert "top" in " ".join(said(capsys, verb, rig))
    assert said(capsys, "flat", rig)


@pytest.mark.parametrize("content", [
    b"", b"\x00\x01\x02", b"\xff\xfe", b"rigpose = 2", b"rigpose = 1", b"rigpose = true",
    b"[[", b"a = 1\na = 2", b"rigpose = 1\njoints = 3", b"rigpose = 1\n[joints]\n\"\" = [0, 0]",
    b"rigpose = 1\n[joints]\na = [1e999, 0]", b"rigpose = 1\n[joints]\na = [\"1/0\", 0]",
    b"rigpose = 1\nrig = 3\nfps = \"x\"\nframes = []\nkeys = 3", b"= " * 1000, b"[" * 5000])
@pytest.mark.parametrize("words", [("check",), ("pose",), ("bake",), ("flat",), ("start",)])
def test_no_file_makes_a_traceback(capsys: Capture, words: tuple[str, ...],
                                   content: bytes) -> None:
    Path("odd.toml").write_bytes(content)
    assert refused(capsys, *words, "odd.toml")


# interruptions and faults

def test_an_interrupted_bake_leaves_the_old_file_whole(
        capsys: Capture, quay: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    def stop(self: CsvWriter, *_: object) -> None:
        self._file.write(b"half a row")
        raise KeyboardInterrupt

    old = write("crane.csv", "what stood there before\n")
    monkeypatch.setattr(CsvWriter, "block", stop)
    assert run(["bake", "quay_crane.shot.toml", "--out", "crane.csv"]) == 130
    out, err = capsys.readouterr()
    assert out == ""
    assert err.strip() == "interrupted; nothing half written is left"
    assert Path(old).read_text(encoding="utf-8") == "what stood there before\n"
    assert leftovers(quay) == []


def command(*words: str, prelude: str = "") -> subprocess.CompletedProcess[str]:
    """The command in a process of its own."""
    code = f"{prelude}\nfrom rigpose.cli.main import main\nmain()"
    paths = os.pathsep.join([str(ROOT), os.environ.get("PYTHONPATH", "")])
    return subprocess.run([sys.executable, "-c", code, *words], capture_output=True, text=True,
                          check=False, env={**os.environ, "PYTHONPATH": paths})


def test_a_fault_of_the_program_is_a_traceback_and_exit_code_3(quay: Path) -> None:
    old = write("crane.csv", "what stood there before\n")
    sabotage = ("import rigpose.motion.bake as module\n"
                "def broken(*_, **__): raise ZeroDivisionError('sabotaged')\n"
                "module.pieces = broken")
    done = command("bake", "quay_crane.shot.toml", "--out", "crane.csv", prelude=sabotage)
    assert done.returncode == 3
    assert done.stdout == ""
    assert done.stderr.startswith("Traceback (most recent call last):")
    assert done.stderr.rstrip().endswith("ZeroDivisionError: sabotaged")
    assert Path(old).read_text(encoding="utf-8") == "what stood there before\n"
    assert leftovers(quay) == []


def test_exit_codes_reach_the_shell() -> None:
    assert command("bake", "bell_rocker_stuck.shot.toml").returncode == 1
    wrong = command("bake", "nowhere.shot.toml")
    assert (wrong.returncode, wrong.stdout) == (2, "")
    assert command("--version").stdout.startswith("rigpose ")


def test_a_terminal_of_few_signs_is_no_fault(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setenv("PYTHONIOENCODING", "latin-1")
    done = command("bake", "bell_rocker_stuck.shot.toml")
    assert (done.returncode, done.stderr) == (1, "")
    assert "frames 11 \\u2026 48: " in done.stdout


def test_a_reader_that_leaves_early_is_no_fault() -> None:
    code = "from rigpose.cli.main import main\nmain()"
    paths = os.pathsep.join([str(ROOT), os.environ.get("PYTHONPATH", "")])
    words = ("pose", "lantern_lift.toml", "--drive", "sill=1:1.5:400", "--json")
    with subprocess.Popen([sys.executable, "-c", code, *words], stdout=subprocess.PIPE,
                          stderr=subprocess.PIPE, env={**os.environ, "PYTHONPATH": paths}) as run_:
        assert run_.stdout is not None
        assert run_.stderr is not None
        assert run_.stdout.readline() == b"{\n"
        run_.stdout.close()
        assert run_.stderr.read() == b""
        assert run_.wait(60) == 0
