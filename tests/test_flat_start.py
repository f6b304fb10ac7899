"""Every key of a rig file, rigs written out flat, rigs started from a CSV, and the schema."""

from __future__ import annotations

import json
import math
import tomllib
from pathlib import Path

import msgspec
import numpy as np
import pytest

from rigpose.files.flat import flat_text
from rigpose.files.rigfile import load_rig
from rigpose.files.schema import rig_schema, shot_schema
from rigpose.files.shotspec import ShotForm
from rigpose.files.start import start_text
from rigpose.ground.errors import BadInput
from rigpose.model.rig import Rig, Stand
from rigpose.model.spec import IN_SPACE, SECTIONS, HeadSpec, RigSpec

ROOT = Path(__file__).parent.parent
RIGS = sorted(p for p in (ROOT / "rigs").glob("*.toml") if not p.name.endswith(".shot.toml"))

EVERY_KEY = """
rigpose = 1
name = "slipway winch"
dim = 2
unit = "cm"
slack = "1 / 100000"
close = 2e-5
up = "z"
note = "of the inner slip"
flat = false
rest = { file = "survey.csv", unit = "mm", up = "z" }
plane = { origin = [1, 2, "arm / 2"], x = [0, 1, 0], y = [0, 0, 1] }

[sizes]
arm = 3
reach = "(arm + 1) * 2 - -arm / 1.5"

[joints]
foot = { at = [0, 0], pin = true, note = "on the quay", layer = 2, skin = "iron" }
head = { at = ["arm + 1", 0], pin = true }
knee = [0, "arm"]
far = [4, 3]
block = [2, 0]
rider = [1, 3]
surveyed = {}
open = [5, 0]
left = [5, 3]
right = [1, 3]

[bones]
post = ["foot", "knee"]
beam = { ends = ["knee", "far"], length = "reach - 6", play = 1e-3, skin = "oak" }
strut = ["foot", "far"]
spare = { ends = ["head", "surveyed"] }

[plates]
jib = ["head", "far", "block"]
fork = { joints = ["open", "left", "right"], hand = "left", lengths = [
    ["open", "left", "arm"], ["left", "right", 4], ["open", "right", 5]] }
cast = { joints = ["foot", "open", "left"], shape = [[0, 0], [5, 0], [0, "arm"]] }

[rails]
quay = { joint = "block", through = [0, 0], direction = [2, 0], range = ["-arm", 8] }
slot = { joint = "rider", along = ["knee", "far"] }

[rams]
luff = { ends = ["head", "knee"], range = [4, "arm + 3"] }

[cranks]
slew = { turns = "post", from = "ground", about = "foot", zero = "rest", range = [-90, 90] }
nod = { turns = "jib", line = ["head", "far"], from = "beam", from_line = ["far", "knee"], \
zero = "90 / 2" }

[limits]
elbow = { from = "post", to = "beam", at = "knee", range = [-160, "-10 / 2"] }
chin = { from = "beam", from_line = ["far", "knee"], to = "jib", to_line = ["far", "head"], \
at = "far", range = [5, 175], either = true }

[ties]
gear = { sum = { slew = 20, nod = "-arm * 4", luff = 1, quay = -1 }, equals = "2 - arm" }

[frozen]
tower = ["post", "beam"]
more = { bones = ["strut"], note = "keeps its side" }

[copies]
fore = { of = "arm.toml", join = { root = "far" }, turn = 30, mirror = "y", sizes = { arm = 2 } }
rib = { of = "arm.toml", at = [1, 1], repeat = 3, turn = "360 / 3", shift = [0, 1] }
link = { of = "arm.toml", join = { root = "head" }, chain = { root = "tip" }, repeat = 2 }

[branches]
"knee up" = { knee = "left", block = "after" }

[names]
knee = "winch01:knee"

[studio]
shelf = [1, { deep = "x" }]
"""
ARM = """
rigpose = 1
unit = "cm"
[sizes]
arm = 1
[joints]
root = [0, 0]
tip = ["arm", 0]
[bones]
bar = ["root", "tip"]
"""
SURVEY = "joint,x,y,z\nsurveyed,10,30,55\nsomebody else,1,2,3\n"
CARRIED = {"note", "layer", "skin"}
SPACE_KEYS = {"copies.axis", "cranks.axis", "cranks.toward", "limits.axis", "rails.normal"}
"""Keys that a plane rig refuses, beside whole sections; test_spacefile has them all."""


@pytest.fixture
def folder(tmp_path: Path) -> Path:
    (tmp_path / "arm.toml").write_text(ARM, encoding="utf-8")
    (tmp_path / "survey.csv").write_text(SURVEY, encoding="utf-8")
    (tmp_path / "winch.toml").write_text(EVERY_KEY, encoding="utf-8")
    return tmp_path


def read_flat(folder: Path, rig: Rig) -> Rig:
    folder.joinpath("flat.toml").write_text(flat_text(rig), encoding="utf-8")
    return load_rig(folder / "flat.toml")


def test_the_example_has_every_key() -> None:
    """So that the tests below that load it speak of all keys; the schema tells which there are."""
    document = tomllib.loads(EVERY_KEY)
    assert set(document) == {*HeadSpec.__struct_encode_fields__, *SECTIONS} - {*IN_SPACE}
    kinds = {"rest": "RestSpec", "plane": "StandSpec", "copies": "CopySpec", "frozen": "FrozenSpec"}
    missing = set()
    for name, kind in rig_schema()["$defs"].items():
        section = next((s for s, k in kinds.items() if k == name), f"{name[:-4].lower()}s")
        if section in IN_SPACE:
            continue
        table = document.get(section, {})
        parts = [table] if section in ("rest", "plane") else table.values()
        seen = {key for part in parts if isinstance(part, dict) for key in part}
        missing |= {f"{section}.{key}" for key in set(kind["properties"]) - seen - CARRIED}
    assert missing - {f"rigs.{key}" for key in (*document, *IN_SPACE)} == SPACE_KEYS


def test_every_key_in_toml_and_json(folder: Path) -> None:
    rig = load_rig(folder / "winch.toml")
    (folder / "winch.json").write_text(json.dumps(tomllib.loads(EVERY_KEY)), encoding="utf-8")
    assert load_rig(folder / "winch.json").fingerprint == rig.fingerprint
    # The file's numbers by hand: reach is (3 + 1) * 2 + 3 / 1.5 = 10.
    assert (rig.slack, rig.close, rig.unit, rig.up) == (1e-5, 2e-5, "cm", "z")
    assert {b.name: b.length for b in rig.bones if "/" not in b.name} == {
        "post": 3, "beam": 4, "strut": 5, "spare": pytest.approx(math.dist((4, 0), (1, 4)))}
    assert rig.plane == Stand((1, 2, 1.5), (0, 1, 0), (0, 0, 1))
    # The surveyed place, in mm with z up: (1, 3, 5.5) cm, less the plane's origin, along its axes.
    assert rig.joints[rig.index["surveyed"]].at == pytest.approx((1, 4))
    assert rig.rails[0].direction == (1.0, 0.0)
    assert rig.ties[0].sum == (
        ("slew", 20.0), ("nod", -12.0), ("luff", 1.0), ("quay", -1.0))
    assert (rig.ties[0].equals, rig.cranks[1].zero, rig.cranks[0].zero) == (-1, 45, "rest")
    assert [b.length for b in rig.bones if "/" in b.name] == [2, 1, 1, 1, 1, 1]
    assert rig.joints[0].layer == 2
    assert (rig.names, rig.studio) == ({"knee": "winch01:knee"}, {"shelf": [1, {"deep": "x"}]})


def test_flat_keeps_everything(folder: Path) -> None:
    rig = load_rig(folder / "winch.toml")
    flat = read_flat(folder, rig)
    assert flat.fingerprint == rig.fingerprint
    kept = ("joints", "bones", "plates", "rails", "rams", "cranks", "limits", "ties", "frozen",
            "branches", "names", "studio", "plane", "up", "note", "slack", "close", "name")
    assert [k for k in kept if getattr(flat, k) != getattr(rig, k)] == []
    assert flat_text(flat) == flat_text(rig)


@pytest.mark.parametrize("path", RIGS, ids=lambda p: p.stem)
def test_flat_keeps_the_fingerprint_of_every_rig(path: Path, tmp_path: Path) -> None:
    rig = load_rig(path)
    assert read_flat(tmp_path, rig).fingerprint == rig.fingerprint


@pytest.mark.parametrize("path", RIGS, ids=lambda p: p.stem)
def test_the_schema_accepts_every_rig(path: Path) -> None:
    """The schema is made from RigSpec; what decodes to it strictly is what the schema accepts."""
    msgspec.convert(tomllib.loads(path.read_text(encoding="utf-8")), RigSpec)


@pytest.mark.parametrize("path", sorted((ROOT / "rigs").glob("*.shot.toml")),
                         ids=lambda p: p.name.partition(".")[0])
def test_the_schema_accepts_every_shot(path: Path) -> None:
    msgspec.convert(tomllib.loads(path.read_text(encoding="utf-8")), ShotForm)


@pytest.mark.parametrize(("name", "schema"), [("rig", rig_schema()), ("shot", shot_schema())])
def test_the_schemas_are_shipped_as_made(name: str, schema: dict[str, object]) -> None:
    file = f"{name}.schema.json"
    assert json.loads((ROOT / "rigpose/files" / file).read_text(encoding="utf-8")) == schema
    project = tomllib.loads((ROOT / "pyproject.toml").read_text(encoding="utf-8"))
    assert file in project["tool"]["setuptools"]["package-data"]["rigpose.files"]


def start(folder: Path, csv: str, unit: str = "m", up: str = "y") -> Rig:
    (folder / "points.csv").write_text(csv, encoding="utf-8")
    (folder / "new.toml").write_text(start_text(folder / "points.csv", unit, up), encoding="utf-8")
    return load_rig(folder / "new.toml")


def test_start_takes_names_and_places(tmp_path: Path) -> None:
    rig = start(tmp_path, "joint,x,y\nfoot,0,0\nhook end,1.25,-3e-2\n", "cm", "z")
    assert (rig.name, rig.dim, rig.unit, rig.up) == ("points", 2, "cm", "z")
    assert [(j.name, j.at) for j in rig.joints] == [("foot", (0, 0)), ("hook end", (1.25, -0.03))]


def test_start_lays_the_sections_out_as_comments(tmp_path: Path) -> None:
    (tmp_path / "points.csv").write_text("joint,x,y\na,0,0\n", encoding="utf-8")
    text = start_text(tmp_path / "points.csv")
    for section in ("bones", "plates", "rails", "rams", "cranks", "limits"):
        assert f"\n# [{section}]\n" in text
    filled = text.replace("# [bones]\n# NAME", "[bones]\n# NAME")
    assert tomllib.loads(filled)["bones"] == {}


@pytest.mark.parametrize(("rows", "at", "plane"), [
    ("a,1,2,0\nb,3,4,0", (3, 4), Stand()),
    ("a,1,2,5\nb,3,4,5", (3, 4), Stand((0, 0, 5))),
    ("a,1,7,2\nb,3,7,4", (3, 4), Stand((0, 7, 0), (1, 0, 0), (0, 0, 1))),
    ("a,6,1,2\nb,6,3,4", (3, 4), Stand((6, 0, 0), (0, 1, 0), (0, 0, 1))),
])
def test_joints_in_one_plane_make_a_plane_rig(tmp_path: Path, rows: str, at: tuple[float, ...],
                                              plane: Stand) -> None:
    """Put back onto its plane every joint is where the file had it."""
    rig = start(tmp_path, f"joint,x,y,z\n{rows}\n")
    assert (rig.dim, rig.joints[1].at, rig.plane) == (2, at, plane)
    stand = np.array([rig.plane.x, rig.plane.y])
    back = np.array(rig.plane.origin) + np.array([j.at for j in rig.joints]) @ stand
    assert back.tolist() == [[float(c) for c in r.split(",")[1:]] for r in rows.split("\n")]


def test_joints_in_no_plane_make_a_rig_in_space(tmp_path: Path) -> None:
    rig = start(tmp_path, "name,frame,x,y,z\na,1,0,1,2\nb,1,3,4,5\na,2,9,9,9\n")
    assert (rig.dim, [j.at for j in rig.joints]) == (3, [(0, 1, 2), (3, 4, 5)])


def test_names_that_a_rig_cannot_have_are_kept_beside(tmp_path: Path) -> None:
    rig = start(tmp_path, "joint,x,y\ncrane01:elbow,1,2\nelbow,0,0\na/b,3,3\n")
    assert rig.joint_names == ("elbow_2", "elbow", "a_b")
    assert rig.names == {"elbow_2": "crane01:elbow", "a_b": "a/b"}


@pytest.mark.parametrize(("csv", "message"), [
    ("", "points.csv:1: the first line names the columns once: joint,x,y or joint,x,y,z"),
    ("joint,x,y\n", "points.csv: there is a row for each joint; got none; export the joints again"),
    ("joint,x,y\na,1\n", 'points.csv:2: a row has a cell for each column; got "a,1"'),
    ("joint,x,y\na,1,2\na,1,3\n", "points.csv:3: a: a joint has one row; got a second one"),
    ("joint,x,y\na,nan,2\n", 'points.csv:2: a: a coordinate is a finite number; got "nan"'),
])
def test_faults_of_the_csv(tmp_path: Path, csv: str, message: str) -> None:
    with pytest.raises(BadInput) as told:
        start(tmp_path, csv)
    assert str(told.value).startswith(message)


def test_an_unknown_unit_or_axis_is_refused(tmp_path: Path) -> None:
    with pytest.raises(BadInput) as told:
        start(tmp_path, "joint,x,y\na,1,2\n", "metre", "x")
    assert str(told.value).splitlines() == [
        'unit: a unit is one of m, cm, mm, in, ft; got "metre"; there are "m", "cm", "mm", "in", '
        '"ft"', 'up: up is y or z; got "x"; write y or z']
