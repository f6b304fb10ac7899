"""Rig files: what a good one gives, and the text of every complaint about a bad one."""

from __future__ import annotations

import json
import math
import re
import tomllib
from pathlib import Path

import pytest
from loading import FRAME, load, told

from rigpose.files.rigfile import load_rig
from rigpose.files.schema import rig_schema
from rigpose.ground.errors import BadInput
from rigpose.model.extent import extent
from rigpose.model.make import make_rig
from rigpose.model.spec import SECTIONS, HeadSpec

RIGS = Path(__file__).parent.parent / "rigs"


def test_the_first_example_loads() -> None:
    rig = load_rig(RIGS / "quay_crane.toml")
    assert (rig.name, rig.dim, rig.unit) == ("quay crane", 2, "m")
    assert [j.name for j in rig.joints if j.pin] == ["foot", "mast"]
    stay = rig.bones[0]
    assert stay.length == math.dist((-2.2, 5.0), (3.2, 10.7))
    # Freedoms counted by hand: two plates and a bone have 9, three pins and the two meetings at
    # elbow and back take 2 each but for the stay's far end; with the ram's length nothing is left.
    moving = 2 * (len(rig.joints) - 2)
    lengths = len(rig.bones) + len(rig.rams) + sum(2 * len(p.joints) - 3 for p in rig.plates)
    assert moving - lengths == 0


def test_short_and_long_forms_are_the_same(tmp_path: Path) -> None:
    short = load(tmp_path, FRAME + 'hoop = ["foot", "hook"]\n[plates]\n'
                 'jib = ["elbow", "hook", "mast"]\n[frozen]\nf = ["boom", "fall"]\n')
    long = load(tmp_path, """
[joints]
foot = { at = [0, 0], pin = true }
mast = { at = [0, 4], pin = true }
elbow = { at = [3, 4] }
hook = { at = [6, 2] }
loose = { pin = false }
[bones]
boom = { ends = ["foot", "elbow"] }
fall = { ends = ["elbow", "hook"], length = 3.605551275463989 }
hoop = { ends = ["foot", "hook"] }
[plates]
jib = { joints = ["elbow", "hook", "mast"], hand = "right" }
[frozen]
f = { bones = ["boom", "fall"] }
""")
    assert short == long
    assert short.fingerprint == long.fingerprint
    assert short.bones[0].length == 5.0
    assert short.joints[4].at is None


def test_json_holds_the_same_structure(tmp_path: Path) -> None:
    toml = load(tmp_path, FRAME)
    data = {"rigpose": 1, **tomllib.loads(FRAME)}
    (tmp_path / "crane.json").write_text(json.dumps(data))
    found = load_rig(tmp_path / "crane.json")
    assert found.fingerprint == toml.fingerprint
    sections = {k: v for k, v in data.items() if k != "rigpose"}
    assert make_rig(**sections).fingerprint == toml.fingerprint


def test_make_rig_takes_arrays_and_tuples() -> None:
    import numpy as np

    rig = make_rig({"a": np.zeros(2), "b": (np.float32(3), np.int64(4))}, {"ab": ("a", "b")})
    assert rig.joints[1].at == (3.0, 4.0)
    with pytest.raises(BadInput) as caught:
        make_rig({"a": [0, 0]}, {"ab": ["a", "b"]}, copies={"c": {"of": "x.toml"}}, rest="x.csv")
    assert str(caught.value) == (
        'rest: only a rig file can name another file; got "x.csv"; give the joints\' `at`, or '
        "write a rig file\n"
        'copies: only a rig file can bring in copies; got ["c"]; write a rig file\n'
        'bones.ab.ends[1]: there is no joint of this name; got "b"; there are "a"')
    with pytest.raises(BadInput, match="names and keys are text; got 1; write it in quotes"):
        make_rig({1: [0, 0]})  # type: ignore[dict-item]  # the wrong type is the point


def test_all_problems_at_once_each_with_its_line(tmp_path: Path) -> None:
    text = """
[bones]
stay = { ends = ["mast", "elbw"], lenght = 1.8 }
fall = { ends = ["elbow", "hook"], length = 0 }
[joints]
mast = { at = [0, 4, 1], pin = true }
elbow = [2, 3]
hook = { at = "there" }
"""
    assert told(tmp_path, text, frame="") == "\n".join([
        "crane.toml:7: joints.mast.at: must have 2 coordinates, as `dim` is 2; got 3: [0, 4, 1]; "
        "or change `dim`",
        "crane.toml:9: joints.hook.at: must be a list of coordinates, one for each dimension; got "
        '"there"',
        'crane.toml:4: bones.stay.lenght: there is no key of this name; got "lenght"; did you '
        'mean "length"?',
        "crane.toml:5: bones.fall.length: a length must be more than 0; got 0; give it a size",
    ])


def test_at_most_twenty_are_told(tmp_path: Path) -> None:
    bad = "".join(f'b{k} = ["foot", "nowhere"]\n' for k in range(33))
    lines = told(tmp_path, "", frame=FRAME + bad).splitlines()
    assert len(lines) == 21
    assert lines[-1] == "and 13 more"


HEAD_FAULTS = [
    ("dim = 4", 'crane.toml:2: dim: must be 2 or 3; got 4'),
    ('unit = "yard"', 'crane.toml:2: unit: must be m, cm, mm, in or ft; got "yard"'),
    ("slack = 0.5", "crane.toml:2: slack: must be a fraction of the rig's size, more than 0 and at "
                    "most 0.1; got 0.5; 0.000001 is usual"),
    ("close = 0", "crane.toml:2: close: must be a fraction of the rig's size, more than 0 and at "
                  "most 0.1; got 0; 0.000001 is usual"),
    ('up = "x"', 'crane.toml:2: up: must be "y" or "z"; got "x"'),
    ("name = 3", "crane.toml:2: name: must be text; got 3"),
    ("bone = 3", 'crane.toml:2: bone: there is no key of this name; got "bone"; did you mean '
                 '"bones"?'),
    ("rams = []", "crane.toml:2: rams: a section is a table of parts by their names; got []; write "
                  "[rams] and one part a line below it"),
    ("plane = { x = [1, 0, 0], y = [1, 1, 0] }",
     "crane.toml:2: plane: `x` and `y` of a plane are at a right angle; got 45 degrees; turn one "
     "of them"),
    ("plane = { x = [0, 0, 0] }",
     "crane.toml:2: plane.x: a direction needs a length; got [0.0, 0.0, 0.0]; give it a number "
     "other than 0"),
    ("plane = { origin = [1, 2] }",
     "crane.toml:2: plane.origin: must have 3 coordinates; got 2: [1, 2]; give one number for "
     "each"),
    ("plane = { z = [1, 2, 3] }",
     'crane.toml:2: plane.z: there is no key of this name; got "z"; there are "origin", "x", "y"'),
    ("plane = 3", "crane.toml:2: plane: must be a table with `origin`, `x` and `y`; got 3"),
    ("rest = 3", "crane.toml:2: rest: must be the name of a CSV file, or a table with `file`; got "
                 "3"),
    ('rest = { unit = "yd" }',
     "crane.toml:2: rest.unit: must be m, cm, mm, in or ft; got \"yd\"\n"
     "crane.toml:2: rest: needs the key `file`; `file` is the name of a CSV file in this file's "
     "folder"),
]


@pytest.mark.parametrize(("text", "message"), HEAD_FAULTS)
def test_faults_of_the_head(tmp_path: Path, text: str, message: str) -> None:
    assert told(tmp_path, text) == message


PART_FAULTS = [
    # names
    ('[frozen]\n" f" = ["boom"]', 'crane.toml:3: frozen." f": a name has no blanks at its ends; '
     'got " f"; write "f"'),
    ('[frozen]\n"a/b" = ["boom"]', 'crane.toml:3: frozen.a/b: a name has no `/` in it; got "a/b"; '
     'write "a_b"'),
    ('[frozen]\n"a:b" = ["boom"]', 'crane.toml:3: frozen.a:b: a name has no `:` in it; got "a:b"; '
     'write "a_b"'),
    ('[frozen]\n"" = ["boom"]', 'crane.toml:3: frozen."": a name has at least one character; got '
     '""; give it a name'),
    ('[frozen]\n"a\\u0007" = ["boom"]', 'crane.toml:3: frozen.a\x07: a name has no control '
     'characters; got "a\\u0007"; take out U+0007'),
    ('[frozen]\n"e\u0301" = ["boom"]', "crane.toml:3: frozen.e\u0301: a name is in Unicode's "
     'composed form (NFC); got "e\u0301"; write "é"'),
    (f'[frozen]\n{"n" * 101} = ["boom"]', f'crane.toml:3: frozen.{"n" * 101}: a name has at most '
     f'100 characters; got "{"n" * 58}…; shorten it'),
    ('[rams]\nboom = { ends = ["foot", "hook"] }',
     'crane.toml:11: bones.boom: bones, plates and rams share their names, and [rams] has this one '
     'already; got "boom"; rename one of them'),
    ('[rails]\nr = { joint = "hook", through = [0, 2], direction = [1, 0] }\n'
     '[cranks]\nr = { turns = "boom" }',
     'crane.toml:5: cranks.r: cranks, rams and rails share their names, and [rails] has this one '
     'already; got "r"; rename one of them'),
    ('[sizes]\nf = 1\n[frozen]\nf = ["boom"]',
     "crane.toml:5: frozen.f: sizes, limits, ties, frozen groups, copies and branches share their "
     'names, and [sizes] has this one already; got "f"; rename one of them'),
    ('[plates]\nground = ["foot", "elbow", "hook"]',
     'crane.toml:3: plates.ground: "ground" stands for what never moves; got "ground"; rename it'),
    # plates
    ('[plates]\np = ["foot", "elbow"]', "crane.toml:3: plates.p.joints: a plate carries three "
     'joints or more; got 2: ["foot", "elbow"]; make it a bone in [bones]'),
    ('[plates]\np = ["foot"]', 'crane.toml:3: plates.p.joints: must list 3 or more joints; got 1: '
     '["foot"]; list as many joints'),
    ('[plates]\np = ["foot", "elbow", "foot"]', "crane.toml:3: plates.p.joints: must list "
     'different joints; got "foot" twice; put another joint in its place or take it out'),
    ('[plates]\np = ["foot", "elbow", "loose"]', "crane.toml:3: plates.p: a plate without "
     '`lengths` has its shape from the places of its joints; got no `at` for "loose"; give '
     '`lengths` and `hand`, or `at` for "loose"'),
    ('[plates]\np = { joints = ["foot", "elbow", "hook"], hand = "left" }',
     "crane.toml:3: plates.p.hand: `hand` is the side to which the first three joints turn; got "
     '"left", but foot, elbow, hook turn to the right; change `hand` or the places'),
    ('[plates]\np = { joints = ["foot", "elbow", "hook"], lengths = [["foot", "elbow", 5]] }',
     'crane.toml:3: plates.p: a plate with `lengths` needs `hand`; got none; write hand = "left" '
     'or hand = "right" for its first three joints'),
    ('[plates]\np = { joints = ["foot", "elbow", "hook"], lengths = [["foot", "elbow", 5]], '
     'hand = "left" }',
     "crane.toml:3: plates.p.lengths: the first three joints of a plate need all three lengths; "
     'got none for ["elbow", "hook"]; add it as [joint, joint, length]'),
    ('[plates]\np = { joints = ["foot", "elbow", "hook"], lengths = [["foot", "elbow", 5], '
     '["elbow", "hook", 3], ["foot", "hook", 9]], hand = "left" }',
     "crane.toml:3: plates.p.lengths: the longest side of a triangle is at most the two others "
     "together; got 5, 3 and 9, too long by 1; mend the lengths of foot, elbow and hook"),
    ('[plates]\np = { joints = ["foot", "elbow", "hook"], lengths = [["foot", "mast", 5]], '
     'hand = "left" }',
     "crane.toml:3: plates.p.lengths[0]: lengths of a plate are between its own joints; got "
     '["foot", "mast"]; its joints are foot, elbow, hook'),
    ('[plates]\np = { joints = ["foot", "elbow", "hook"], lengths = [["foot", "elbow", 5], '
     '["elbow", "foot", 5]], hand = "left" }',
     'crane.toml:3: plates.p.lengths[1]: a pair has one length; got ["elbow", "foot"] again; take '
     "one of them out"),
    ('[plates]\np = { joints = ["foot", "elbow", "hook"], shape = [[0, 0], [1, 0]] }',
     "crane.toml:3: plates.p.shape: must have one list of coordinates for each joint; got 2 for 3 "
     "joints; give as many as there are joints"),
    ('[plates]\np = { joints = ["foot", "elbow", "hook"], shape = [[0, 0], [1, 0], [1, 0]] }',
     "crane.toml:3: plates.p: two joints of a plate stand at different places; got \"elbow\" and "
     '"hook" at the same; move one of them'),
    ('[plates]\np = { joints = ["foot", "elbow", "hook"], shape = [], lengths = [] }',
     "crane.toml:3: plates.p: a plate has `shape` or `lengths`, not both; got both; take one of "
     "them out"),
    ('[plates]\np = { joints = ["foot", "elbow", "mast"], shape = [[0, 0], [3, 4.5], [0, 4]] }',
     'crane.toml:11: bones.boom.length: the plate "p" holds foot and elbow 5.40832691 apart, so a '
     "bone between them has that length within `slack` (6.32e-06); got 5; write "
     "5.408326913195984, or leave the bone out"),
    ('[plates]\np = ["foot", "elbow", "mast"]\n'
     'q = { joints = ["foot", "hook", "mast"], shape = [[0, 0], [3, 4], [0, 5]] }',
     "crane.toml:4: plates.q: plates that share joints agree on how far they are apart, as p's "
     "do; got 5 from foot to mast, not 4; mend one of the shapes"),
    # rails
    ('[rails]\nr = { joint = "hook", through = [0, 2] }',
     "crane.toml:3: rails.r: a rail needs `through` and `direction`, or `along`; got `through` "
     "alone; write through = [x, y], direction = [x, y], or along = [joint, joint]"),
    ('[rails]\nr = { joint = "hook" }',
     "crane.toml:3: rails.r: a rail needs `through` and `direction`, or `along`; got none of them; "
     "write through = [x, y], direction = [x, y], or along = [joint, joint]"),
    ('[rails]\nr = { joint = "hook", through = [0, 2], along = ["foot", "mast"] }',
     "crane.toml:3: rails.r: a rail has `along`, or `through` and `direction`, not both; got both; "
     "take one of them out"),
    ('[rails]\nr = { joint = "hook", along = ["foot", "hook"] }',
     "crane.toml:3: rails.r.joint: the joint that slides is none of the two of `along`; got "
     '"hook"; name the joint that slides'),
    ('[rails]\nr = { joint = "loose", along = ["foot", "hook"] }',
     "crane.toml:3: rails.r.along: both joints of a slot are pinned, or carried by one plate or "
     'bone; got ["foot", "hook"]; pin both, or name two joints of one plate or bone'),
    ('[rams]\ns = { ends = ["foot", "hook"] }\n'
     '[rails]\nr = { joint = "loose", along = ["foot", "hook"] }',
     "crane.toml:5: rails.r.along: both joints of a slot are pinned, or carried by one plate or "
     'bone; got ["foot", "hook"], the ends of the ram "s", which changes its length; pin both, or '
     "name two joints of one plate or bone"),
    ('[rails]\nr = { joint = "hook", through = [0, 2], direction = [0, 0] }',
     "crane.toml:3: rails.r.direction: a direction needs a length; got [0.0, 0.0]; give it a "
     "number other than 0"),
    # ranges
    ('[rams]\nr = { ends = ["foot", "hook"], range = [5, 1.2] }',
     "crane.toml:3: rams.r.range: a range runs from its lowest to its highest number; got "
     "[5, 1.2]; write [1.2, 5.0]"),
    ('[rams]\nr = { ends = ["foot", "hook"], range = [1, 2, 3] }',
     "crane.toml:3: rams.r.range: must be a list of two numbers, lowest and highest; got "
     "[1, 2, 3]; write [lowest, highest]"),
    ('[rams]\nr = { ends = ["foot", "hook"], range = [-1, 2] }',
     "crane.toml:3: rams.r.range: a ram's range holds lengths: from 0 or more to more than 0; got "
     "[-1.0, 2.0]; give its shortest and its longest length"),
    ('[rams]\nr = { ends = ["foot", "foot"] }',
     'crane.toml:3: rams.r.ends: must list different joints; got "foot" twice; put another joint '
     "in its place or take it out"),
    ("[rams]\nr = {}", "crane.toml:3: rams.r: needs the key `ends`; `ends` is a list of two joint "
     "names"),
    ("[rams]\nr = 3", "crane.toml:3: rams.r: must be a table with `ends`; got 3"),
    # cranks
    ('[cranks]\nk = { turns = "bom" }', "crane.toml:3: cranks.k.turns: there is no bone, plate or "
     'ram of this name; got "bom"; did you mean "boom"?'),
    ('[cranks]\nk = { turns = "boom", from = "boom" }',
     "crane.toml:3: cranks.k.from: a crank's angle is between two different parts; got \"boom\" "
     'twice; write from = "ground" or another part'),
    ('[cranks]\nk = { turns = "boom", from_line = ["foot", "mast"] }',
     "crane.toml:3: cranks.k.from_line: the ground has no line: its x axis counts; got "
     '["foot", "mast"]; take it out, or say `from`'),
    ('[cranks]\nk = { turns = "boom", line = ["foot", "mast"] }',
     'crane.toml:3: cranks.k.line: the line must run between joints of "boom"; got '
     '["foot", "mast"]; its joints are foot, elbow'),
    ('[plates]\np = ["foot", "elbow", "hook"]\n[cranks]\nk = { turns = "p" }',
     'crane.toml:5: cranks.k: `turns` is the plate "p", so `line` is needed; got none; write '
     "line = [joint, joint], two joints of the plate"),
    ('[plates]\np = ["foot", "elbow", "hook"]\n[cranks]\nk = { turns = "boom", from = "p" }',
     'crane.toml:5: cranks.k: `from` is the plate "p", so `from_line` is needed; got none; write '
     "from_line = [joint, joint], two joints of the plate"),
    ('[cranks]\nk = { turns = "boom", about = "nowhere" }',
     'crane.toml:3: cranks.k.about: there is no joint of this name; got "nowhere"; there are '
     '"foot", "mast", "elbow", "hook", "loose"'),
    # limits
    ('[limits]\nl = { from = "boom", to = "fall", at = "hook", range = [0, 9] }',
     'crane.toml:3: limits.l.at: must be a joint of "boom"; got "hook"; its joints are foot, '
     "elbow"),
    ('[limits]\nl = { from = "boom", to = "boom", at = "foot", range = [0, 9] }',
     'crane.toml:3: limits.l.to: a limit is between two different lines; got "boom" twice; name '
     "another part"),
    ('[limits]\nl = { from = "boom", to = "fall", at = "elbow", range = [-200, 200] }',
     "crane.toml:3: limits.l.range: a range of more than a whole turn limits nothing; got 400 "
     "degrees; write at most 360 degrees"),
    ('[limits]\nl = { from = "boom", to = "fall", at = "elbow", range = [-5, 20], either = true }',
     "crane.toml:3: limits.l.range: with either = true a range lies between 0 and 180 degrees; got "
     "[-5.0, 20.0]; mend the range, or take `either` out"),
    ('[limits]\nl = { from = "boom", to = "fall", at = "elbow", range = [0, 9], '
     'from_line = ["foot", "elbow"] }',
     'crane.toml:3: limits.l.from_line: must start at "elbow", the limit\'s `at`; got '
     '["foot", "elbow"]; write ["elbow", "foot"]'),
    ('[limits]\nl = { from = "boom", to = "fall", at = "elbow" }',
     "crane.toml:3: limits.l: needs the key `range`; `range` is a list of two numbers, lowest and "
     "highest"),
    # ties
    ("[ties]\nt = { sum = { wheel = 1 } }", 'crane.toml:3: ties.t.sum.wheel: there is no crank, '
     'ram or rail of this name; got "wheel"; there are none here'),
    ("[ties]\nt = { sum = {} }", "crane.toml:3: ties.t.sum: a tie adds up one drive or more; got "
     "none; write sum = { drive = factor, … }"),
    ('[cranks]\nk = { turns = "boom" }\n[ties]\nt = { sum = { k = 0 } }',
     "crane.toml:5: ties.t.sum.k: a factor of a tie is not 0; got 0; take the drive out of the "
     "sum"),
    # frozen groups, branches, names
    ('[frozen]\nf = ["bom"]', "crane.toml:3: frozen.f.bones[0]: there is no bone of this name; got "
     '"bom"; did you mean "boom"?'),
    ("[frozen]\nf = []", "crane.toml:3: frozen.f.bones: must list one bone or more; got none; list "
     "the bones"),
    ('[frozen]\nf = ["boom", "boom"]', "crane.toml:3: frozen.f.bones: must list different bones; "
     'got "boom" twice; list it once'),
    ('[branches]\nb = { elbow = "lefd" }', "crane.toml:3: branches.b.elbow: there is no bend of "
     'this name; got "lefd"; did you mean "left"?'),
    ("[branches]\nb = { elbow = 1 }", "crane.toml:3: branches.b.elbow: must be left, right, "
     'straight, before or after; got 1; write for instance "left"'),
    ("[branches]\nb = {}", "crane.toml:3: branches.b: must be a table, joint = the side to which "
     'it bends; got {}; write { joint = "left" }'),
    ('[names]\nelbow = "c:e"\nhook = "c:e"', "crane.toml:4: names.hook: the studio's names belong "
     'to one joint each; got "c:e", which "elbow" has already; give one of them another'),
    ("[names]\nelbow = 3", "crane.toml:3: names.elbow: must be the studio's name of the joint, a "
     'text without blanks at its ends; got 3; write for instance "crane01:elbow"'),
]


@pytest.mark.parametrize(("text", "message"), PART_FAULTS)
def test_faults_of_parts(tmp_path: Path, text: str, message: str) -> None:
    assert told(tmp_path, text) == message


BODY_FAULTS = [
    ('x = ["foot", "foot"]', 'crane.toml:12: bones.x.ends: must list different joints; got "foot" '
     "twice; put another joint in its place or take it out"),
    ('x = ["foot", "elbow", "hook"]', "crane.toml:12: bones.x.ends: must list 2 joints; got 3: "
     '["foot", "elbow", "hook"]; list as many joints'),
    ('x = ["foot", "loose"]', "crane.toml:12: bones.x: a bone without `length` is measured from "
     'the places of its ends; got no `at` for "loose"; give `length`, or `at` for "loose"'),
    ('x = { ends = ["foot", "loose"], length = -1 }', "crane.toml:12: bones.x.length: a length "
     "must be more than 0; got -1; give it a size"),
    ('x = { ends = ["foot", "loose"], length = nan }', "crane.toml:12: bones.x.length: must be a "
     "finite number; got nan; write an ordinary number"),
    ('x = { ends = ["foot", "loose"], length = inf }', "crane.toml:12: bones.x.length: must be a "
     "finite number; got inf; write an ordinary number"),
    ('x = { ends = ["foot", "loose"], length = true }', "crane.toml:12: bones.x.length: must be a "
     "number or arithmetic; got true"),
    ('x = { ends = ["foot", "loose"], length = 1, play = -1 }', "crane.toml:12: bones.x.play: "
     "`play` is not below 0; got -1; leave it out"),
    ("x = 3", "crane.toml:12: bones.x: must be a list of two joint names, or a table; got 3"),
    ('x = ["foot", 3]', "crane.toml:12: bones.x.ends: must be a list of two joint names; got "
     '["foot", 3]'),
]


@pytest.mark.parametrize(("text", "message"), BODY_FAULTS)
def test_faults_of_bones(tmp_path: Path, text: str, message: str) -> None:
    assert told(tmp_path, "", frame=FRAME + text) == message


JOINT_FAULTS = [
    ("x = { pin = true }", "crane.toml:4: joints.x: a pinned joint needs its place; got no `at`; "
     "give `at`, or take `pin` out"),
    ("x = [1, nan]", "crane.toml:4: joints.x.at[1]: must be a finite number; got nan; write an "
     "ordinary number"),
    ("x = [1]", "crane.toml:4: joints.x.at: must have 2 coordinates, as `dim` is 2; got 1: [1]; or "
     "change `dim`"),
    ('x = { at = [1, 2], pin = "yes" }', "crane.toml:4: joints.x.pin: must be true or false; got "
     '"yes"'),
    ("x = [1, 2]\ny = [1, 2]\n[bones]\nb = ['x', 'y']",
     "crane.toml:7: bones.b: a bone without `length` is measured from the places of its ends, and "
     "must be more than 0 and finite; got 0.0 from [1.0, 2.0] to [1.0, 2.0]; move one of them, or "
     "give `length`"),
    ("", "crane.toml:3: joints: a rig has joints; got none; name them in [joints]"),
]


@pytest.mark.parametrize(("text", "message"), JOINT_FAULTS)
def test_faults_of_joints(tmp_path: Path, text: str, message: str) -> None:
    assert told(tmp_path, "\n[joints]\n" + text, frame="") == message


@pytest.mark.parametrize(("text", "message"), [
    ("rigpose = 2\nmotors = 3", "crane.toml:1: rigpose: this program reads rig files up to version "
     "1; got 2; update rigpose, or save the rig as version 1"),
    ("rigpose = 0", "crane.toml:1: rigpose: the version of a rig file is 1; got 0; write "
     "`rigpose = 1`"),
    ("rigpose = true", "crane.toml:1: rigpose: the version of a rig file is 1; got true; write "
     "`rigpose = 1`"),
    ("", "crane.toml: a rig file says which version it is written in; got no key `rigpose`; put "
     "`rigpose = 1` at its top"),
    ("rigpose = 1\n[joints]\na = [1, 2]\n[bones]\nb = 1\n[joints]\nc = 2",
     "crane.toml:6: joints: a key or part may stand once only; got it stands on line 2 already; "
     "rename or remove one of them"),
    ("rigpose = 1\n[joints]\na = [1,\n 2]\na = [3,\n 4]",
     "crane.toml:5: joints.a: a key or part may stand once only; got it stands on line 3 already; "
     "rename or remove one of them"),
    ("rigpose = 1\n[joints]\na = [1, 2", "crane.toml:3: the file is not proper TOML; got unclosed "
     "array; mend that line or the one above it"),
    ("rigpose = 1\njoints", "crane.toml:2: the file is not proper TOML; got expected '=' after a "
     "key in a key/value pair; mend that line or the one above it"),
])
def test_files_that_are_no_rig(tmp_path: Path, text: str, message: str) -> None:
    (tmp_path / "crane.toml").write_text(text)
    with pytest.raises(BadInput) as caught:
        load_rig(tmp_path / "crane.toml")
    assert str(caught.value) == message


@pytest.mark.parametrize(("text", "message"), [
    ('{"rigpose": 1,\n "joints": {"a": [0, 0],\n "b": [1, 1],\n "a": [2, 2]}}',
     "crane.json:4: joints.a: a key or part may stand once only; got it stands on line 2 already; "
     "rename or remove one of them"),
    ('{"rigpose": 1, "joints": {"a": {"at": [0, 0], "at": [0, 0]}}}',
     "crane.json:1: joints.a.at: a key or part may stand once only; got it stands on line 1 "
     "already; rename or remove one of them"),
    ('{"rigpose": 1,\n"joints" 3}', "crane.json:2: the file is not proper JSON; got expecting ':' "
     "delimiter; mend that line or the one above it"),
    ("[1]", "crane.json: a rig file is one JSON object; got [1]; put all in { }"),
    ('{"rigpose": 1, "joints": {"a": [0,\n NaN]}}',
     "crane.json:2: joints.a.at[1]: must be a finite number; got nan; write an ordinary number"),
    ('{"rigpose": 1, "note": "\\ud83d", "joints": {"a": [0, 0]}}',
     "crane.json: text is Unicode, without half characters; got \\ud83d; write the whole "
     "character"),
    ('{"rigpose": 1, "joints": {"a": [0, 0]}, "studio": {"show": [null]}}',
     "crane.json:1: studio.show[0]: [studio] holds no null, which TOML could not write; got null; "
     "leave the key out"),
    ('{"rigpose": 1, "joints": ' + "[" * 100_000 + "]" * 100_000 + "}",
     "crane.json: lists and tables inside one another go too deep; is it the right file?"),
])
def test_json_that_is_no_rig(tmp_path: Path, text: str, message: str) -> None:
    (tmp_path / "crane.json").write_text(text)
    with pytest.raises(BadInput) as caught:
        load_rig(tmp_path / "crane.json")
    assert str(caught.value) == message


def test_files_that_cannot_be_read(tmp_path: Path) -> None:
    with pytest.raises(BadInput, match="the file can't be read; got No such file or directory"):
        load_rig(tmp_path / "none.toml")
    (tmp_path / "latin.toml").write_bytes(b"rigpose = 1\nname = \"h\xf6he\"\n")
    with pytest.raises(BadInput, match=re.escape(
            "latin.toml:2: a text file is UTF-8; got the byte 0xf6; save it again as UTF-8")):
        load_rig(tmp_path / "latin.toml")
    with pytest.raises(BadInput, match=re.escape(
            'crane.yaml: a rig file is TOML or JSON, told by its suffix; got ".yaml"; name it '
            "NAME.toml or NAME.json")):
        load_rig(tmp_path / "crane.yaml")
    with (tmp_path / "huge.toml").open("wb") as file:
        file.truncate((64 << 20) + 1)
    with pytest.raises(BadInput, match="a file is at most 64 MiB; got 67108865 bytes"):
        load_rig(tmp_path / "huge.toml")


def test_a_byte_order_mark_and_windows_line_ends_are_no_harm(tmp_path: Path) -> None:
    text = ("\ufeffrigpose = 1" + FRAME).replace("\n", "\r\n")
    (tmp_path / "crane.toml").write_bytes(text.encode())
    assert load_rig(tmp_path / "crane.toml").bones[0].length == 5.0


def test_rigs_in_space(tmp_path: Path) -> None:
    rig = make_rig({"a": {"at": [0, 0, 0], "pin": True}, "b": [1, 2, 2]}, {"ab": ["a", "b"]}, dim=3,
                   rails={"r": {"joint": "b", "through": [1, 2, 0], "direction": [0, 0, 5]}})
    assert rig.bones[0].length == 3.0
    assert rig.rails[0].direction == (0.0, 0.0, 1.0)
    with pytest.raises(BadInput) as caught:
        make_rig({"a": [0, 0, 0], "b": [1, 2, 2], "c": [0, 2, 2]},
                 {"ab": ["a", "b"], "bc": ["b", "c"]}, dim=3, plane={},
                 cranks={"k": {"turns": "ab"}},
                 limits={"l": {"from": "ab", "to": "bc", "at": "b", "range": [0, 90]}},
                 plates={"p": {"joints": ["a", "b", "c"], "lengths": [], "hand": "left"}})
    assert str(caught.value).splitlines() == [
        "plane: only a plane rig (`dim = 2`) stands on a plane; got dim = 3; take `plane` out",
        "plates.p.lengths: only a plate in the plane has its shape from lengths; got dim = 3; give "
        "the joints' places with `at`, or `shape`",
        "cranks.k: in space a crank says what it turns about; got neither `about` nor `axis`; "
        'write about = "HINGE", or axis = [joint, joint]',
        'limits.l: in space a limit has a sign about a hinge or an `axis` only; got at = "b"; name '
        "a hinge, or write either = true and a range between 0 and 180",
    ]


def test_one_fault_is_told_once(tmp_path: Path) -> None:
    """What hangs on a refused part raises no complaint of its own."""
    text = """
[joints]
a = [0]
b = [1, 0]
c = [2, 0]
[bones]
ab = ["a", "b"]
bc = ["b", "nowhere"]
[plates]
p = ["a", "b", "c"]
[cranks]
k = { turns = "bc" }
[rails]
r = { joint = "c", along = ["b", "a"] }
[ties]
t = { sum = { k = 1 } }
[frozen]
f = ["bc", "ab"]
"""
    assert [line.split(": ")[1] for line in told(tmp_path, text, frame="").splitlines()] == [
        "joints.a.at", "bones.bc.ends[1]"]


def test_what_people_note_does_not_change_the_fingerprint() -> None:
    plain = make_rig({"a": [0, 0], "b": [1, 0]}, {"ab": ["a", "b"]})
    noted = make_rig({"a": {"at": [0, 0], "note": "n", "layer": 2, "skin": "s"}, "b": [1, 0]},
                     {"ab": {"ends": ["a", "b"], "note": "m"}}, note="rig", studio={"shot": 3})
    moved = make_rig({"a": [0, 0], "b": [1.5, 0]}, {"ab": ["a", "b"]})
    assert plain.fingerprint == noted.fingerprint
    assert plain.fingerprint != moved.fingerprint
    assert (noted.joints[0].note, noted.joints[0].layer, noted.joints[0].skin) == ("n", 2.0, "s")
    assert noted.studio == {"shot": 3}


def test_the_schema_describes_every_key() -> None:
    schema = rig_schema()
    keys = schema["$defs"]["RigSpec"]["properties"]
    assert set(keys) == {*HeadSpec.__struct_encode_fields__, *SECTIONS}
    for name, part in schema["$defs"].items():
        assert part["additionalProperties"] is False
        for key, value in part["properties"].items():
            described = "description" in value or name == "RigSpec"
            assert described, f"{name}.{key}"
    assert schema["$defs"]["CrankSpec"]["required"] == ["turns"]


def test_the_size_of_many_places_is_as_of_all_pairs() -> None:
    import numpy as np

    points = np.random.default_rng(7).normal(size=(1500, 2)) * (3, 1)
    every = np.sqrt(((points[:, None] - points[None]) ** 2).sum(-1)).max()
    assert extent([tuple(map(float, p)) for p in points], ()) == pytest.approx(every, rel=2e-3)
