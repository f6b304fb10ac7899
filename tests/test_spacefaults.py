"""What is refused in the sections of space: one clear message each, and all of them at once."""

from __future__ import annotations

from pathlib import Path

import pytest

from rigpose.files.rigfile import load_rig
from rigpose.ground.errors import BadInput

LEG = """rigpose = 1
dim = 3
[joints]
heel = { at = [0, 0, 0], pin = true }
hip = [0, 0, 4]
knee = [3, 0, 4]
toe = [3, 0, 0]
far = [3, 8, 0]
lost = {}
two = [3, 0, 4]
up = [3, 3, 4]
"h axis" = [9, 9, 9]
[bones]
thigh = ["hip", "knee"]
shin = ["knee", "toe"]
spare = { ends = ["toe", "far"], play = 1e-3 }
loose = { ends = ["toe", "lost"], length = 3 }
post = ["heel", "hip"]
dot = { ends = ["knee", "two"], length = 1 }
[plates]
wing = ["knee", "up", "hip"]
[rams]
ram = { ends = ["heel", "knee"], range = [1, 9] }
[hinges]
fold = { parts = ["thigh", "shin"], at = "knee", axis = [0, 1, 0] }
"""
PLANE = """rigpose = 1
[joints]
hip = [0, 4]
knee = [3, 4]
toe = [3, 0]
[bones]
thigh = ["hip", "knee"]
shin = ["knee", "toe"]
"""
JOIN = 'at = "knee", axis = [0, 1, 0]'
ROW = LEG.count("\n") + 1
"""The line on which what a test adds begins."""


def refusal(folder: Path, text: str) -> str:
    (folder / "leg.toml").write_text(text, encoding="utf-8")
    with pytest.raises(BadInput) as told:
        load_rig(folder / "leg.toml")
    return str(told.value)


HINGES = [
    ('parts = ["thigh", "shin"], at = "knee", axis = [0, 0, 0]',
     ".axis: a direction needs a length; got [0.0, 0.0, 0.0]; give it a number other than 0"),
    ('parts = ["thigh", "shin"], at = "knee", axis = [0, 1]',
     ".axis: must have 3 coordinates, as `dim` is 3; got 2: [0, 1]; or change `dim`"),
    ('parts = ["thigh", "shin"], at = "nee", axis = [0, 1, 0]',
     '.at: there is no joint of this name; got "nee"; did you mean "knee"?'),
    ('parts = ["thigh", "shim"], ' + JOIN,
     '.parts[1]: there is no bone, plate or ram of this name; got "shim"; did you mean "shin"?'),
    ('parts = ["thigh", "thigh"], ' + JOIN,
     '.parts: a hinge joins two different parts; got "thigh" twice; name another part'),
    ('parts = ["thigh"], ' + JOIN,
     '.parts: a hinge joins two parts; got 1: ["thigh"]; name two bones or plates, or one and '
     '"ground"'),
    ('parts = ["ram", "thigh"], ' + JOIN,
     '.parts[0]: a hinge joins bones and plates: a ram changes its length; got "ram"; name what '
     "the ram's ends belong to"),
    ('parts = ["thigh", "spare"], ' + JOIN,
     ".parts[1]: a hinge makes a plate of a bone, and a plate has no `play`; got play = 0.001 of "
     '"spare"; take `play` out'),
    ('parts = ["loose", "ground"], ' + JOIN,
     ".parts[0]: a hinge is measured from the places of its parts' joints; got no `at` for "
     '"lost"; give `at` for "lost"'),
    ('parts = ["dot", "ground"], ' + JOIN,
     ".parts[0]: a hinge is measured from the places of its parts' joints; got both ends of "
     '"dot" at [3.0, 0.0, 4.0]; move one of them'),
    ('parts = ["thigh", "shin"], at = "lost", axis = [0, 1, 0]',
     '.at: a hinge stands at the place of its joint; got no `at` for "lost"; give `at` for "lost"'),
    ('parts = ["thigh", "shin"], at = "two", axis = [0, 1, 0]',
     '.at: two joints of a plate stand at different places; got "two" where "knee" of "thigh" '
     'stands; name "knee" here, or move one of them'),
    ('parts = ["thigh", "shin"], axis = [0, 1, 0]',
     ": needs the key `at`; `at` is a joint name"),
    ('parts = ["thigh", "shin"], axes = 3, ' + JOIN,
     '.axes: there is no key of this name; got "axes"; did you mean "axis"?'),
]


@pytest.mark.parametrize(("text", "message"), HINGES)
def test_faults_of_hinges(tmp_path: Path, text: str, message: str) -> None:
    assert refusal(tmp_path, LEG + f"more = {{ {text} }}\n") == (
        f"leg.toml:{ROW}: hinges.more{message}")


NAMES = [
    ('more = ["thigh", "shin"]',
     'hinges.more: must be a table with `parts`, `at` and `axis`; got ["thigh", "shin"]'),
    ('"h:i" = { parts = ["thigh", "shin"], ' + JOIN + " }",
     'hinges.h:i: a name has no `:` in it; got "h:i"; write "h_i"'),
    (f'{"n" * 96} = {{ parts = ["thigh", "shin"], {JOIN} }}',
     f'hinges.{"n" * 96}: a name has at most 100 characters; got "{"n" * 58}… for its helper '
     "joint; shorten it"),
    ('h = { parts = ["thigh", "shin"], ' + JOIN + " }",
     'hinges.h: its helper joint has a name that no other joint has; got "h axis"; rename that '
     "joint, or this"),
    ('[limits]\nfold = { from = "shin", to = "thigh", at = "fold", range = [0, 90] }',
     "limits.fold: planes, hinges, sizes, limits, ties, frozen groups, copies and branches share "
     'their names, and [hinges] has this one already; got "fold"; rename one of them'),
    ('[frozen]\nf = ["post", "thigh"]',
     "frozen.f.bones[1]: a hinge makes a plate of a bone, and a plate keeps its shape anyway; got "
     '"thigh"; take it out of the group'),
    ('[universals]\npost = { parts = ["thigh", "shin"], at = "knee", axes = [[0, 1, 0], '
     "[1, 0, 0]] }",
     "universals.post: universals, bones, plates and rams share their names, and [bones] has this "
     'one already; got "post"; rename one of them'),
    ('[sliders]\ns = { parts = ["ground", "shin"], at = "toe", axis = [0, 1, 0] }\n'
     '"s axis" = { parts = ["ground", "thigh"], at = "hip", axis = [0, 1, 0] }',
     'sliders."s axis": its rails have names that no other slider\'s has; got "s axis"; rename '
     "one of them"),
    ('[sliders]\ns = { parts = ["ground", "shin"], at = "toe", axis = [0, 1, 0] }\n[rails]\n'
     '"s side" = { joint = "far", through = [3, 8, 0], direction = [1, 0, 0] }',
     'rails."s side": sliders, cranks, rams and rails share their names, and [sliders] has this '
     'one already; got "s side"; rename one of them'),
    ('[sliders]\ns = { parts = ["ground", "shin"], at = "toe", axis = [0, 1, 0] }\n[ties]\n'
     '"s axis" = { sum = { s = 1 } }',
     'ties."s axis": planes, hinges, sizes, limits, ties, frozen groups, copies and branches '
     'share their names, and [sliders] has this one already; got "s axis"; rename one of them'),
    ('[planes]\nr = { joints = ["toe"], through = [0, 0, 0], normal = [0, 0, 1] }\n[rails]\n'
     'r = { joint = "far", through = [0, 0, 0], normal = [0, 0, 1] }',
     "rails.r: a rail in a plane shares the names of planes, and [planes] has this one already; "
     'got "r"; rename one of them'),
]


@pytest.mark.parametrize(("text", "message"), NAMES)
def test_faults_of_names(tmp_path: Path, text: str, message: str) -> None:
    last = ROW + text.count("\n")
    assert refusal(tmp_path, LEG + text + "\n") == f"leg.toml:{last}: {message}"


OTHERS = [
    ('[universals]\nu = { parts = ["thigh", "shin"], at = "knee", axes = [[0, 1, 0]] }',
     "universals.u.axes: a universal turns about two axes; got 1; write axes = [[x, y, z], "
     "[x, y, z]]"),
    ('[universals]\nu = { parts = ["thigh", "shin"], at = "knee", axes = [[0, 1, 0], '
     "[0, -2, 0]] }",
     "universals.u.axes: the two axes of a universal stand at an angle; got 0 degrees between "
     "[0, 1, 0] and [0, -2, 0]; turn one of them, or write a hinge"),
    ('[universals]\nu = { parts = ["thigh", "shin"], at = "knee", axes = [[0, 1, 0], '
     "[0, 0, 0]] }",
     "universals.u.axes[1]: a direction needs a length; got [0.0, 0.0, 0.0]; give it a number "
     "other than 0"),
    ('[sliders]\ns = { parts = ["thigh", "shin"], at = "knee", axis = [0, 1, 0] }',
     "sliders.s.at: a slider's joint moves with the part that slides; got \"knee\" of "
     '"thigh", along which it slides; name a joint of "shin" alone'),
    ('[sliders]\ns = { parts = ["thigh", "post"], at = "heel", axis = [0, 1, 0] }',
     "sliders.s.at: a slider's joint moves with the part that slides; got \"heel\", which is "
     'pinned; name a joint of "post" alone'),
    ('[sliders]\ns = { parts = ["ground", "shin"], at = "toe", axis = [0, 1, 0], range = [3, 1] }',
     "sliders.s.range: a range runs from its lowest to its highest number; got [3, 1]; write "
     "[1.0, 3.0]"),
    ('[planes]\np = { joints = [], through = [0, 0, 0], normal = [0, 0, 1] }',
     "planes.p.joints: must list 1 or more joints; got 0: []; list as many joints"),
    ('[planes]\np = { joints = ["toe"], through = [0, 0, 0] }',
     "planes.p: needs the key `normal`; `normal` is a list of three coordinates"),
    ('[rails]\nr = { joint = "toe", normal = [0, 0, 1] }',
     "rails.r: a rail in a plane needs `through`, a point of the plane; got `normal` alone; write "
     "through = [x, y, z]"),
    ('[rails]\nr = { joint = "toe", through = [0, 0, 0], direction = [1, 0, 0], '
     "normal = [0, 0, 1] }",
     "rails.r: a rail runs along a line or in a plane, not both; got `normal` and `direction`; "
     "take one of them out"),
    ('[rails]\nr = { joint = "toe", through = [0, 0, 0], normal = [0, 0, 1], range = [0, 1] }',
     "rails.r.range: a rail in a plane has no value, and so no range; got [0, 1]; take it out"),
    ('[rails]\nr = { joint = "far", through = [0, 0, 0] }',
     "rails.r: a rail needs `through` and `direction`, or `along`; got `through` alone; write "
     "through = [x, y, z], direction = [x, y, z], or along = [joint, joint]"),
]


@pytest.mark.parametrize(("text", "message"), OTHERS)
def test_faults_of_other_sections(tmp_path: Path, text: str, message: str) -> None:
    assert refusal(tmp_path, LEG + text + "\n") == f"leg.toml:{ROW + 1}: {message}"


CRANKS = [
    ('turns = "thigh", about = "fold", axis = ["knee", "fold axis"]',
     ': a crank turns about a hinge or an axis, not both; got about = "fold", axis = ["knee", '
     '"fold axis"]; take one of them out'),
    ('turns = "thigh"',
     ": in space a crank says what it turns about; got neither `about` nor `axis`; write about = "
     '"HINGE", or axis = [joint, joint]'),
    ('turns = "thigh", about = "knee"',
     '.about: in space a part turns about a hinge, not about a mere joint; got "knee"; name a '
     "hinge, or write axis = [joint, joint]"),
    ('turns = "thigh", about = "fald"',
     '.about: there is no hinge of this name; got "fald"; did you mean "fold"?'),
    ('turns = "thigh", about = "fold", from = "thigh"',
     '.from: a crank\'s angle is between two different parts; got "thigh" twice; write from = '
     '"ground" or another part'),
    ('turns = "thi", about = "fold", from = "shin"',
     '.turns: there is no bone, plate or ram of this name; got "thi"; did you mean "thigh"?'),
    ('turns = "thigh", axis = ["knee", "knee"]',
     '.axis: must list different joints; got "knee" twice; put another joint in its place or take '
     "it out"),
    ('turns = "thigh", axis = ["knee", "two"]',
     ".axis: the two joints of an axis stand apart; got both at [3.0, 0.0, 4.0]; name another "
     "joint, or move one of them"),
    ('turns = "post", axis = ["heel", "hip"]',
     '.turns: both parts have a joint off the axis, by which their turn is seen; got joints of '
     '"post": heel, hip; axis: heel, hip; make "post" a plate with a joint beside the axis'),
    ('turns = "thigh", axis = ["hip", "lost"]',
     ': a turn of "thigh" is seen from where its joints lie beside the axis; got no `at` for '
     '"lost"; give `at` for "lost", or `line`'),
    ('turns = "thigh", axis = ["hip", "lost"], line = ["hip", "knee"]',
     ': from the ground an angle counts from where the part points in the drawing; got no `at` '
     'for "lost"; give `at` for "lost", or write `toward`'),
    ('turns = "thigh", from = "shin", about = "fold", zero = [0, 0, 1]',
     '.zero: only the ground has a direction that stands still; got from = "shin"; write an angle '
     'as `zero`, or "rest"'),
    ('turns = "thigh", from = "shin", about = "fold", toward = [0, 0, 1]',
     '.toward: only the ground has a direction that stands still; got from = "shin"; write an '
     'angle as `zero`, or "rest"'),
    ('turns = "thigh", about = "fold", toward = [0, 0, 1], zero = [0, 0, 1]',
     ".zero: a direction that counts as 0 is written once; got `zero` and `toward`; take one of "
     "them out"),
    ('turns = "thigh", about = "fold", toward = [0, 1, 0]',
     ".toward: a direction from which an angle counts leads away from the axis; got [0, 1, 0], "
     "along it; write one at an angle to the axis"),
    ('turns = "thigh", about = "fold", zero = [0, 0, 0]',
     ".zero: a direction needs a length; got [0.0, 0.0, 0.0]; give it a number other than 0"),
    ('turns = "thigh", about = "fold", from_line = ["knee", "toe"]',
     ".from_line: the ground has no line: the angle counts from the direction `toward`; got "
     '["knee", "toe"]; write toward = [x, y, z] instead, or say `from`'),
    ('turns = "thigh", about = "fold", line = ["hip", "knee"]',
     '.line: in space the line runs from a joint of the axis to one beside it; got ["hip", '
     '"knee"]; the axis is ["knee", "fold axis"]'),
    ('turns = "thigh", about = "fold", line = ["knee", "toe"]',
     '.line: the line must end at a joint of "thigh"; got "toe"; beside the axis it has hip'),
    ('turns = "wing", about = "fold", line = ["knee", "up"]',
     '.line: the line must end beside the axis; got "up", which lies on it; name another joint of '
     "the part"),
    ('turns = "thigh", about = "fold", range = [3]',
     ".range: must be a list of two numbers, lowest and highest; got [3]; write [lowest, highest]"),
]


@pytest.mark.parametrize(("text", "message"), CRANKS)
def test_faults_of_cranks(tmp_path: Path, text: str, message: str) -> None:
    assert refusal(tmp_path, LEG + f"[cranks]\nc = {{ {text} }}\n") == (
        f"leg.toml:{ROW + 1}: cranks.c{message}")


LIMITS = [
    ('from = "thigh", to = "shin", at = "knee", range = [0, 90]',
     ": in space a limit has a sign about a hinge or an `axis` only; got at = \"knee\"; name a "
     "hinge, or write either = true and a range between 0 and 180"),
    ('from = "thigh", to = "shin", at = "fold", range = [0, 400]',
     ".range: a range of more than a whole turn limits nothing; got 400 degrees; write at most 360 "
     "degrees"),
    ('from = "thigh", to = "shin", at = "fold", range = [0, 200], either = true',
     ".range: with either = true a range lies between 0 and 180 degrees; got [0.0, 200.0]; mend "
     "the range, or take `either` out"),
    ('from = "thigh", to = "thigh", at = "fold", range = [0, 20]',
     '.to: a limit is between two different lines; got "thigh" twice; name another part'),
    ('from = "thigh", to = "shin", at = "toe", axis = ["knee", "fold axis"], range = [0, 90]',
     '.at: a limit about an axis stands at a joint of it; got "toe"; write at = "knee"'),
    ('from = "ground", to = "shin", at = "heel", axis = ["heel", "hip"], range = [0, 90]',
     ".from: both parts have a joint off the axis, by which their turn is seen; got pinned joints: "
     "heel; axis: heel, hip; pin a joint beside the axis"),
]


@pytest.mark.parametrize(("text", "message"), LIMITS)
def test_faults_of_limits(tmp_path: Path, text: str, message: str) -> None:
    assert refusal(tmp_path, LEG + f"[limits]\nc = {{ {text} }}\n") == (
        f"leg.toml:{ROW + 1}: limits.c{message}")


IN_THE_PLANE = [
    ('[hinges]\nh = { parts = ["shin", "thigh"], at = "knee", axis = [0, 1, 0] }',
     "hinges: only a rig in space (`dim = 3`) has [hinges]; got dim = 2; take them out: parts that "
     "share a joint turn about it already"),
    ('[sliders]\nh = { parts = ["shin", "thigh"], at = "knee", axis = [0, 1, 0] }\n[ties]\n'
     "t = { sum = { h = 1 } }",
     "sliders: only a rig in space (`dim = 3`) has [sliders]; got dim = 2; take them out: write "
     "rails for two joints of the part"),
    ('[planes]\nh = { joints = ["knee"] }',
     "planes: only a rig in space (`dim = 3`) has [planes]; got dim = 2; take them out: write a "
     "rail for each joint"),
    ("[universals]\nh = 3",
     "universals: only a rig in space (`dim = 3`) has [universals]; got dim = 2; take them out: "
     "let the parts share a joint"),
    ('[rails]\nr = { joint = "knee", normal = [1, 0] }',
     "rails.r.normal: only in space (`dim = 3`) does a joint slide in a plane; got dim = 2; write "
     "`direction` for a line, or take the rail out"),
    ('[cranks]\nc = { turns = "thigh", zero = [1, 0] }',
     "cranks.c.zero: in the plane an angle counts as 0, no direction; got [1, 0]; write degrees, "
     'or "rest"'),
    ('[cranks]\nc = { turns = "thigh", toward = [1, 0] }',
     "cranks.c.toward: a plane rig turns in its plane: it has no `toward`; got [1, 0]; take "
     "`toward` out"),
    ('[limits]\nl = { from = "thigh", to = "shin", at = "knee", axis = ["knee", "hip"], '
     "range = [0, 9] }",
     'limits.l.axis: a plane rig turns in its plane: it has no `axis`; got ["knee", "hip"]; take '
     "`axis` out"),
]


@pytest.mark.parametrize(("text", "message"), IN_THE_PLANE)
def test_faults_in_the_plane(tmp_path: Path, text: str, message: str) -> None:
    row = PLANE.count("\n") + (2 if message.split(":", maxsplit=1)[0].count(".") else 1)
    assert refusal(tmp_path, PLANE + text + "\n") == f"leg.toml:{row}: {message}"


def test_what_hangs_on_a_refused_hinge_raises_no_complaint(tmp_path: Path) -> None:
    text = LEG.replace('at = "knee", axis', 'at = "nee", axis') + """
[universals]
u = { parts = ["wing", "nothing"], at = "knee", axes = [[0, 1, 0], [1, 0, 0]] }
[sliders]
s = { parts = ["ground", "shin"], at = "toe", axis = [0, 0] }
[cranks]
c = { turns = "shin", from = "thigh", about = "fold" }
d = { turns = "shin", axis = ["knee", "fold axis"] }
e = { turns = "u", axis = ["knee", "u axis 1"] }
[limits]
l = { from = "shin", to = "thigh", at = "fold", range = [0, 90] }
[planes]
p = { joints = ["fold axis", "u axis 2", "s side"], through = [0, 0, 0], normal = [0, 0, 1] }
[ties]
t = { sum = { s = 1, c = 2 } }
"""
    assert [line.split(": ")[1] for line in refusal(tmp_path, text).splitlines()] == [
        "hinges.fold.at", "universals.u.parts[1]", "sliders.s.axis"]


def test_all_faults_of_a_part_are_told_at_once(tmp_path: Path) -> None:
    text = LEG + """more = { parts = ["thi", "shin"], at = "nee", axis = [0, "x", 0] }
[universals]
u = { parts = ["thigh"], at = "lost", axes = [[0, 0, 0], [1]] }
[sliders]
s = { parts = ["ground", "ram"], at = "lost", axis = [0] }
[cranks]
c = { turns = "thi", from = "shim", axis = ["hip", "hop"], range = [2, 1] }
[limits]
l = { from = "thi", to = "shim", at = "fold", range = [2, 1] }
[planes]
p = { joints = ["tow"], through = [0], normal = [0, 0, 0] }
"""
    told = [line.split(": ")[1] for line in refusal(tmp_path, text).splitlines()]
    assert told == [
        "hinges.more.parts[0]", "hinges.more.at", "hinges.more.axis[1]",
        "universals.u.parts", "universals.u.at", "universals.u.axes[0]", "universals.u.axes[1]",
        "sliders.s.parts[1]", "sliders.s.at", "sliders.s.axis",
        "planes.p.joints[0]", "planes.p.through", "planes.p.normal",
        "cranks.c.axis[1]", "cranks.c.range", "cranks.c.turns", "cranks.c.from",
        "limits.l.range", "limits.l.from", "limits.l.to"]
