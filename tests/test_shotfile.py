"""Shot files: what they may say, and the text of everything that they are refused for."""

from __future__ import annotations

from fractions import Fraction
from pathlib import Path

import pytest

from rigpose.files.shotfile import load_shot
from rigpose.ground.errors import BadInput
from rigpose.motion.shot import Key

RIG = """
rigpose = 1
name = "lock gate"
[joints]
heel = { at = [0, 0], pin = true }
mitre = [3, 1]
shore = { at = [0, 4], pin = true }
block = [2, 4]
[bones]
leaf = ["heel", "mitre"]
[rams]
push = { ends = ["shore", "mitre"], range = [2, 6] }
[rails]
quay = { joint = "block", through = [0, 4], direction = [1, 0], range = [-1, 5] }
[cranks]
swing = { turns = "leaf", about = "heel", range = [-90, 90] }
[branches]
"gate open" = { mitre = "left" }
"""
HEAD = 'rigpose = 1\nrig = "gate.toml"\nfps = 24\nframes = [1, 48]\n'


@pytest.fixture
def folder(tmp_path: Path) -> Path:
    (tmp_path / "gate.toml").write_text(RIG, encoding="utf-8")
    return tmp_path


def write(folder: Path, text: str) -> Path:
    path = folder / "q010.shot.toml"
    path.write_text(text, encoding="utf-8")
    return path


def refusal(folder: Path, text: str) -> str:
    with pytest.raises(BadInput) as told:
        load_shot(write(folder, text))
    return str(told.value)


def test_a_whole_shot(folder: Path) -> None:
    shot = load_shot(write(folder, """
rigpose = 1
rig = "gate.toml"
fps = "24000/1001"
frames = [1, 48]
step = 0.5
branch = { mitre = "left" }
near = { mitre = [3.0, "1 + inch"] }
note = "the tide is out"
[sizes]
inch = 0.0254
[[keys]]
frame = 1
drive = { swing = 0.0, push = "2 * 2" }
target = { block = [2.0, 4.0] }
ease = "linear"
[[keys]]
frame = 24.5
target = { block = { y = "4 + inch" }, mitre = { x = 3 } }
"""))
    assert (shot.name, shot.rig.name, shot.fps) == ("q010", "lock gate", Fraction(24000, 1001))
    assert (shot.frames, shot.step, len(shot.numbers)) == ((1.0, 48.0), 0.5, 95)
    assert shot.branch == {"mitre": "left"}
    assert shot.near == {"mitre": (3.0, 1.0254)}
    assert shot.keys == (
        Key(1.0, {"swing": 0.0, "push": 4.0}, {"block": (2.0, 4.0)}, "linear"),
        Key(24.5, {}, {"block": (None, 4.0254), "mitre": (3.0, None)}, "smooth"),
    )
    assert shot.source == str(folder / "q010.shot.toml")


def test_what_may_be_left_out(folder: Path) -> None:
    shot = load_shot(write(folder, HEAD))
    assert (shot.step, shot.branch, shot.near, shot.keys) == (1.0, None, {}, ())


def test_a_shot_has_a_name_and_a_named_branch(folder: Path) -> None:
    shot = load_shot(write(folder, HEAD + 'name = "Q 010"\nbranch = "gate open"\n'))
    assert (shot.name, shot.branch) == ("Q 010", "gate open")


@pytest.mark.parametrize(("written", "fps"), [
    ("25", Fraction(25)), ("23.976", Fraction(2997, 125)), ('"30000/1001"', Fraction(30000, 1001)),
    ('"12.5"', Fraction(25, 2)),
])
def test_rates_are_exact(folder: Path, written: str, fps: Fraction) -> None:
    assert load_shot(write(folder, HEAD.replace("24", written, 1))).fps == fps


@pytest.mark.parametrize("written", ["0", "-24", '"24/0"', '"24 frames"', '"1e3"', "1e300", "nan"])
def test_rates_that_are_none(folder: Path, written: str) -> None:
    got = written if written != "1e300" else "1e+300"
    assert refusal(folder, HEAD.replace("24", written, 1)) == (
        "q010.shot.toml:3: fps: must be a number above 0, or a fraction of two whole numbers; got "
        f'{got}; write 24 or "24000/1001"')


def key(text: str) -> str:
    """A shot with one key; its text starts on line 6."""
    return f"{HEAD}[[keys]]\n{text}\n"


@pytest.mark.parametrize(("text", "message"), [
    (key("frame = 1\ndrive = { swnig = 3 }"),
     "q010.shot.toml:7: keys[0].drive.swnig: there is no crank, ram or rail of this name; got "
     '"swnig"; did you mean "swing"?'),
    (key("frame = 1\ndrive = { push = 7 }"),
     'q010.shot.toml:7: keys[0].drive.push: "push" stays within its range, 2 to 6; got 7; change '
     "the key, or the range in the rig"),
    (key("frame = 1\ndrive = { swing = -90.5 }"),
     'q010.shot.toml:7: keys[0].drive.swing: "swing" stays within its range, -90 to 90; got -90.5; '
     "change the key, or the range in the rig"),
    (key("frame = 1\ndrive = { quay = 5.5 }"),
     'q010.shot.toml:7: keys[0].drive.quay: "quay" stays within its range, -1 to 5; got 5.5; '
     "change the key, or the range in the rig"),
    (key("frame = 1\ndrive = { push = inf }"),
     "q010.shot.toml:7: keys[0].drive.push: must be a finite number; got inf; write an ordinary "
     "number"),
    (key("frame = 1\ntarget = { mitr = [1, 2] }"),
     'q010.shot.toml:7: keys[0].target.mitr: there is no joint of this name; got "mitr"; did you '
     'mean "mitre"?'),
    (key("frame = 1\ntarget = { mitre = [1, 2, 3] }"),
     "q010.shot.toml:7: keys[0].target.mitre: must be a list of 2 numbers; got [1, 2, 3]"),
    (key("frame = 1\ntarget = { mitre = { z = 3 } }"),
     "q010.shot.toml:7: keys[0].target.mitre.z: there is no coordinate of this name; got "
     '"z"; there are "x", "y"'),
    (key("frame = 1\ntarget = { mitre = {} }"),
     "q010.shot.toml:7: keys[0].target.mitre: a target has one coordinate or more; got none; name "
     "one of x, y"),
    (key("frame = 1\ntarget = { heel = [0, 0] }"),
     'q010.shot.toml:7: keys[0].target.heel: a pinned joint can\'t be a target; got "heel"; take '
     "the target out, or the pin in the rig"),
    (key("frame = 1"),
     "q010.shot.toml:5: keys[0]: a key has a drive or a target; got neither; write drive = { … } "
     "or target = { … }, or take the key out"),
    (key('frame = 1\ndrive = { swing = 1 }\nease = "bouncy"'),
     'q010.shot.toml:8: keys[0].ease: must be linear, smooth or hold; got "bouncy"'),
    (key("frame = 9\ndrive = { swing = 1 }\n[[keys]]\nframe = 5\ndrive = { swing = 1 }"),
     "q010.shot.toml:9: keys[1].frame: keys stand in the order of their frames; got frame 5 after "
     "frame 9; move it up"),
    (key("frame = 9\ndrive = { swing = 1 }\n[[keys]]\nframe = 9\ndrive = { push = 3 }"),
     "q010.shot.toml:9: keys[1].frame: a frame has one key; got a second one at frame 9; make one "
     "key of both"),
    (HEAD.replace("[1, 48]", "[48, 1]"),
     "q010.shot.toml:4: frames: the first frame isn't after the last; got 48 … 1; write [1, 48]"),
    (HEAD.replace("[1, 48]", "[1]"),
     "q010.shot.toml:4: frames: must be a list of 2 numbers; got [1]"),
    (HEAD.replace("48", "1e12"),
     "q010.shot.toml:4: frames: a shot has at most 100,000,000 frames; got 1e+12; cut it or take "
     "a larger step"),
    (HEAD + "step = 2",
     "q010.shot.toml:5: step: must go evenly from the first frame to the last; got 2 for 1 … 48; "
     "end at 49 or change the step"),
    (HEAD + "step = 0",
     "q010.shot.toml:5: step: must be more than 0; got 0; frames only go on"),
    (HEAD + 'branch = "gate opne"',
     "q010.shot.toml:5: branch: there is no branch in the rig's [branches] of this name; got "
     '"gate opne"; did you mean "gate open"?'),
    (HEAD + 'branch = { mitre = "up", mitr = "left" }',
     'q010.shot.toml:5: branch.mitre: must be one of left, right, straight, before, after; got "up"'
     '\nq010.shot.toml:5: branch.mitr: there is no joint of this name; got "mitr"; did you mean '
     '"mitre"?'),
    (HEAD + "near = { mitre = 3 }",
     "q010.shot.toml:5: near.mitre: must be a list of 2 numbers; got 3"),
    (HEAD + 'near = { mitre = [3, "2 * reach"] }',
     'q010.shot.toml:5: near.mitre[1]: there is no size "reach" in [sizes]; got "2 * reach"; there '
     "are none here"),
    (HEAD.replace("rigpose = 1\n", ""),
     "q010.shot.toml: a shot file says which version it is written in; got no key `rigpose`; put "
     "`rigpose = 1` at its top"),
    (HEAD.replace("= 1\n", "= 7\n"),
     "q010.shot.toml:1: rigpose: this program reads shot files up to version 1; got 7; update "
     "rigpose, or save the shot as version 1"),
    (HEAD.replace("= 1\n", "= true\n"),
     "q010.shot.toml:1: rigpose: the version of a shot file is 1; got true; write `rigpose = 1`"),
    (HEAD.replace("gate.toml", " "),
     'q010.shot.toml:2: rig: must be the path of a rig file; got " "; name one'),
])
def test_one_thing_wrong(folder: Path, text: str, message: str) -> None:
    assert refusal(folder, text) == message


def test_everything_wrong_is_told_at_once(folder: Path) -> None:
    """The head's types, unknown keys, the rig's own problems and the keys', in one go."""
    (folder / "gate.toml").write_text(RIG.replace("[3, 1]", "[3]"), encoding="utf-8")
    text = HEAD.replace("24", "[24]") + (
        "frmaes = [1, 2]\nstep = -1\n[[keys]]\nframe = 'x +'\n[[keys]]\nframe = 1\ndrvie = 3\n"
        "[[keys]]\nframe = 2\ndrive = { swing = true }\n")
    lines = refusal(folder, text).splitlines()
    assert [line.partition(": ")[0] for line in lines] == [
        "q010.shot.toml:3", "q010.shot.toml:5", "gate.toml:6", "q010.shot.toml:6",
        "q010.shot.toml:7", "q010.shot.toml:8", "q010.shot.toml:11", "q010.shot.toml:14"]
    assert 'frmaes: there is no key of this name; got "frmaes"; did you mean "frames"?' in lines[1]


def test_a_wrong_key_of_an_entry_hides_nothing_else(folder: Path) -> None:
    """Nor does a missing frame, or one that is no number; and nothing is told twice."""
    text = HEAD + (
        "[[keys]]\nframe = 1\nease = 'bouncy'\ndrive = { swnig = 3, push = 7 }\n"
        "target = { heel = [0, 0] }\n"
        "[[keys]]\ndrive = { push = 9 }\n"
        "[[keys]]\nframe = '1 +'\ntarget = { mitre = [1] }\n"
        "[[keys]]\nframe = 3\ndrive = 4\n"
        "[[keys]]\nframe = [4]\neaes = 'hold'\ndrive = { push = 1 }\n")
    told = [line.removeprefix("q010.shot.toml:").partition(";")[0]
            for line in refusal(folder, text).splitlines()]
    assert told == [
        "7: keys[0].ease: must be linear, smooth or hold",
        "8: keys[0].drive.swnig: there is no crank, ram or rail of this name",
        '8: keys[0].drive.push: "push" stays within its range, 2 to 6',
        "9: keys[0].target.heel: a pinned joint can't be a target",
        "10: keys[1]: needs the key `frame`",
        '11: keys[1].drive.push: "push" stays within its range, 2 to 6',
        "13: keys[2].frame: the arithmetic ends too early",
        "14: keys[2].target.mitre: must be a list of 2 numbers",
        "17: keys[3].drive: must be a table, drive = value",
        "19: keys[4].frame: must be a number or arithmetic",
        "20: keys[4].eaes: there is no key of this name",
        '21: keys[4].drive.push: "push" stays within its range, 2 to 6']


def test_a_missing_key_of_the_head_hides_nothing_else(folder: Path) -> None:
    told = refusal(folder, "rigpose = 1\nframes = [1, 2]\nstep = 0\n")
    assert told == (
        "q010.shot.toml: needs the key `rig`; `rig` is the path of a rig file, seen from the "
        "shot's folder\n"
        "q010.shot.toml: needs the key `fps`; `fps` is a number above 0 or a fraction as "
        '"24000/1001"\n'
        "q010.shot.toml:3: step: must be more than 0; got 0; frames only go on")


def test_a_rig_that_is_not_there(folder: Path) -> None:
    told = refusal(folder, HEAD.replace("gate.toml", "gtae.toml"))
    assert "gtae.toml: the file can't be read; got No such file or directory" in told


def test_a_file_that_is_not_toml(folder: Path) -> None:
    assert refusal(folder, "rigpose = 1\nrig = \n").startswith(
        "q010.shot.toml:2: the file is not proper TOML; got invalid value")
