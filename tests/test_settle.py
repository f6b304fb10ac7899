"""The rest pose written back into a rig file."""

from __future__ import annotations

import json
import tomllib
from pathlib import Path

import numpy as np
import pytest

from rigpose.files.rigfile import load_rig
from rigpose.files.settle import settle_text
from rigpose.ground.errors import BadInput
from rigpose.solve.rest import find_rest

TEXT = """\
# The lock gate of Lantern Quay
rigpose = 1
name = "lock gate"   # as on the plan

[sizes]
sill = 3.0

[joints]
hinge = { at = [0.0, 0.0], pin = true }     # in the wall
post = { at = ["sill", 0.0], pin = true }
elbow = [0.1, 1.0]                          # drawn by eye
beam = { at = [ 3.1, 2.0 ], note = "oak" }  # this one too
float = { note = "wherever it fits" }       # no place at all

[joints.lamp]
note = "on the beam"
at = [1, 2]      # whole numbers

[bones]
arm = { ends = ["hinge", "elbow"], length = 1.0 }
gate = { ends = ["elbow", "beam"], length = 3.2 }
stay = { ends = ["beam", "post"], length = 2.0 }
cord = { ends = ["float", "elbow"], length = 1.0 }
rope = { ends = ["float", "beam"], length = 3.0 }
hook = { ends = ["lamp", "elbow"], length = 1.5 }
"""


def settled(folder: Path, text: str, name: str = "gate.toml") -> tuple[Path, str]:
    path = folder / name
    path.write_text(text, encoding="utf-8")
    rig = load_rig(path)
    return path, settle_text(path, rig, find_rest(rig))


def test_a_settled_rig_rests_where_its_file_says(tmp_path: Path) -> None:
    path, text = settled(tmp_path, TEXT)
    before = find_rest(load_rig(path))
    assert before.moved[2] > 1e-3
    path.write_text(text, encoding="utf-8")
    after = find_rest(load_rig(path))
    assert after.misfit < 1e-14
    assert np.nanmax(after.moved) < 1e-12
    assert np.abs(after.positions - before.equations.outward(before.scaled)).max() < 1e-12


def test_comments_and_all_else_are_kept(tmp_path: Path) -> None:
    _, text = settled(tmp_path, TEXT)
    old, new = TEXT.splitlines(), text.splitlines()
    assert len(old) == len(new)
    changed = [k for k, (a, b) in enumerate(zip(old, new, strict=True)) if a != b]
    assert [old[k].split()[0] for k in changed] == ["elbow", "beam", "float", "at"]
    for k in changed:
        assert old[k].split("#")[1] == new[k].split("#")[1]
    was, now = tomllib.loads(TEXT), tomllib.loads(text)
    assert now["joints"]["post"] == {"at": ["sill", 0.0], "pin": True}
    assert now["joints"]["float"]["note"] == "wherever it fits"
    assert {k: v for k, v in was.items() if k != "joints"} == {
        k: v for k, v in now.items() if k != "joints"}


def test_a_rig_at_rest_keeps_its_text(tmp_path: Path) -> None:
    _, once = settled(tmp_path, TEXT)
    _, twice = settled(tmp_path, once)
    assert twice == once


def test_json_is_settled_too(tmp_path: Path) -> None:
    _, text = settled(tmp_path, json.dumps(tomllib.loads(TEXT)), "gate.json")
    _, toml = settled(tmp_path, TEXT)
    assert json.loads(text) == tomllib.loads(toml)


def test_lengths_measured_from_the_drawing_stay(tmp_path: Path) -> None:
    text = TEXT.replace('stay = { ends = ["beam", "post"], length = 2.0 }',
                        'stay = ["beam", "post"]')
    path, new = settled(tmp_path, text)
    before = {b.name: b.length for b in load_rig(path).bones}
    path.write_text(new, encoding="utf-8")
    after = {b.name: b.length for b in load_rig(path).bones}
    assert after["stay"] == pytest.approx(before["stay"], rel=1e-14)


def test_places_from_a_csv_file_move_into_the_rig(tmp_path: Path) -> None:
    (tmp_path / "locators.csv").write_text("joint,x,y\nelbow,0.1,1.0\nbeam,3.1,2.0\n",
                                           encoding="utf-8")
    text = TEXT.replace('name = "lock gate"', 'rest = "locators.csv"\nname = "lock gate"')
    text = text.replace("elbow = [0.1, 1.0]", "elbow = [9.0, 9.0]")
    text = text.replace('float = { note = "wherever it fits" }', "float = [1.0, 0.5]")
    path, new = settled(tmp_path, text)
    before = find_rest(load_rig(path)).scaled
    assert "locators" not in new
    path.write_text(new, encoding="utf-8")
    assert np.abs(find_rest(load_rig(path)).scaled - before).max() < 1e-12


def test_a_rig_that_does_not_assemble_is_refused(tmp_path: Path) -> None:
    text = TEXT.replace('"beam"], length = 3.2', '"beam"], length = 32.0')
    with pytest.raises(BadInput, match="only a rig that assembles can be settled"):
        settled(tmp_path, text)


def test_a_joint_of_a_copy_has_its_place_elsewhere(tmp_path: Path) -> None:
    (tmp_path / "leg.toml").write_text(
        'rigpose = 1\n[joints]\nhip = { at = [0, 0], pin = true }\nfoot = [0.2, -1.3]\n'
        '[bones]\nshin = { ends = ["hip", "foot"], length = 1.0 }\n', encoding="utf-8")
    text = ('rigpose = 1\n[joints]\nhip = { at = [1, 0], pin = true }\n'
            '[copies]\nfore = { of = "leg.toml", join = { hip = "hip" } }\n')
    with pytest.raises(BadInput, match=r"fore/foot: a joint of a copy has its place"):
        settled(tmp_path, text)
