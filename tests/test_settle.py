"""The rest pose written back into a rig file."""

from __future__ import annotations

import json
import tomllib
from pathlib import Path

import numpy as np
import pytest

from rigpose.files.flat import flat_text
from rigpose.files.rigfile import load_rig
from rigpose.files.settle import settle_text
from rigpose.ground.errors import BadInput
from rigpose.motion.branches import find_branches
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


# hinges, universals and sliders

LEG = """\
rigpose = 1
name = "leg"
dim = 3

[joints]
hip = { at = [0, 0, 3], pin = true }
heel = { at = [3, 0.3, 0], pin = true }   # on the deck
knee = [1, 0, 2]                          # drawn by eye
toe = [2, 0, 0.5]

[bones]
thigh = { ends = ["hip", "knee"], length = 1.5 }
shin = { ends = ["knee", "toe"], length = 2.0 }
stay = { ends = ["toe", "heel"], length = 1.0 }

[hinges]
hip = { parts = ["ground", "thigh"], at = "hip", axis = [0, 1, 0] }
knee = { parts = ["thigh", "shin"], at = "knee", axis = [0, 2, 0] }

[cranks]
raise = { turns = "thigh", about = "hip", zero = [1, 0, 0] }
"""

SLIDE = """\
rigpose = 1
dim = 3

[joints]
hub = { at = [0, 0, 0], pin = true }
tip = [20, 35, 0]
pin = [120, -20, 0]
top = [120, 5, 7]

[bones]
crank = { ends = ["hub", "tip"], length = 40 }
rod = { ends = ["tip", "pin"], length = 120 }
block = ["pin", "top"]

[hinges]
a = { parts = ["ground", "crank"], at = "hub", axis = [0, 0, 1] }
b = { parts = ["crank", "rod"], at = "tip", axis = [0, 0, 1] }
c = { parts = ["rod", "block"], at = "pin", axis = [0, 0, 1] }

[sliders]
way = { parts = ["ground", "block"], at = "pin", axis = [1, 0, 0] }
"""


def test_a_rig_with_hinges_is_settled_and_stays_the_same_machine(tmp_path: Path) -> None:
    """The outside check: poses at a drive far from rest, which hang on the axes too."""
    path, text = settled(tmp_path, LEG)
    old = load_rig(path)
    assert find_rest(old).moved[old.index["knee axis"]] > 0.1
    changed = [k for k, (a, b) in enumerate(zip(LEG.splitlines(), text.splitlines(), strict=True))
               if a != b]
    assert [LEG.splitlines()[k].split()[0] for k in changed] == ["knee", "toe"]
    path.write_text(text, encoding="utf-8")
    new = load_rig(path)
    assert np.nanmax(find_rest(new).moved) < 1e-12
    own = [new.index[j] for j in new.own_joints]
    for angle in (30.0, 60.0):
        before, after = (find_branches(rig, {"raise": angle}) for rig in (old, new))
        assert len(before) == len(after) == 2
        assert np.abs(before.positions[:, :, own] - after.positions[:, :, own]).max() < 1e-12
    assert settled(tmp_path, text)[1] == text


def test_helpers_that_only_rounding_moves_are_passed_over(tmp_path: Path) -> None:
    # Lengths to 13 digits, as somebody may have copied them: the drawing is off by the rest.
    text = LEG.replace("[1, 0, 2] ", "[0.1, 0.7, 2.9]").replace("[0, 2, 0]", "[0.3, 0.1, 0.7]")
    drawn = {"1.5": (0.1, 0.7, 0.1), "2.0": (1.9, 0.7, 2.4), "1.0": (1.0, 0.3, 0.5)}
    for length, away in drawn.items():
        text = text.replace(f"length = {length} ", f"length = {np.linalg.norm(away):.13g} ")
    path, new = settled(tmp_path, text)
    assert new == text
    rig = load_rig(path)
    assert 0 < find_rest(rig).moved[rig.index["knee axis"]] < 1e-12


def test_an_axis_that_would_have_to_change_is_told_with_both_directions(tmp_path: Path) -> None:
    """Slanting, the axis turns with the thigh about the hip's: its part along that stays."""
    text = LEG.replace("[0, 2, 0]", "[0, 1, 0.2]")
    with pytest.raises(BadInput) as told:
        settled(tmp_path, text)
    rig = load_rig(tmp_path / "gate.toml")
    places = find_rest(rig).positions
    now = places[rig.index["knee axis"]] - places[rig.index["knee"]]
    now /= np.linalg.norm(now)
    assert now[1] == pytest.approx(1 / np.hypot(1, 0.2))
    assert str(told.value) == (
        f"{tmp_path / 'gate.toml'}: hinges.knee.axis: settling writes places, and an axis keeps "
        "its direction; got a rest that turns [0.0, 0.9805806757, 0.1961161351] to "
        f"{[round(float(v), 10) for v in now]}; draw the parts so that it stays, or settle the rig "
        "written out flat")


def test_the_axes_of_a_cross_are_told_by_their_number(tmp_path: Path) -> None:
    text = """rigpose = 1
dim = 3
[joints]
mid = { at = [0, 0, 0], pin = true }
eye = [1, 0.2, -2]
lug = { at = [1, 0, -3.3], pin = true }
[bones]
lamp = { ends = ["mid", "eye"], length = 2 }
cord = { ends = ["eye", "lug"], length = 1.5 }
[universals]
ring = { parts = ["ground", "lamp"], at = "mid", axes = [[1, 0, 0], [0, 1, 0]] }
"""
    with pytest.raises(BadInput, match=r"universals\.ring\.axes\[1\]: .* turns \[0\.0, 1\.0, 0\.0"):
        settled(tmp_path, text)


def test_a_slider_that_rest_moves_would_count_from_elsewhere(tmp_path: Path) -> None:
    """By Pythagoras: drawn at 120, its pin rests where the rod of 120 reaches down to y = -20."""
    with pytest.raises(BadInput, match=r"sliders\.way: a slider counts from its drawing") as told:
        settled(tmp_path, SLIDE)
    rig = load_rig(tmp_path / "gate.toml")
    tip = find_rest(rig).positions[rig.index["tip"]]
    away = tip[0] + np.sqrt(120**2 - (tip[1] + 20) ** 2) - 120
    assert f"moves it by {away:.6g} m" in str(told.value)


def test_a_slider_at_its_place_keeps_its_start(tmp_path: Path) -> None:
    """The crank is drawn 1 too long; the pin hangs on a rod that fits at the settled place."""
    tip = 40 * np.array([0.6, 0.8])
    x = tip[0] + np.sqrt(120**2 - (tip[1] + 20) ** 2)
    text = SLIDE.replace("[20, 35, 0]", "[24.3, 32.4, 0]")
    text = text.replace("[120, -20, 0]", f"[{float(x)!r}, -20, 0]")
    text = text.replace("[120, 5, 7]", f"[{float(x)!r}, 5, 7]")
    # A gauge rod from the ground holds the block where it is drawn.
    text = text.replace("[hinges]", 'gauge = ["hub", "pin"]\n\n[hinges]')
    path, new = settled(tmp_path, text)
    assert [a.split()[0] for a, b in zip(text.splitlines(), new.splitlines(), strict=True)
            if a != b] == ["tip"]
    path.write_text(new, encoding="utf-8")
    rig = load_rig(path)
    assert find_rest(rig).positions[rig.index["tip"]] == pytest.approx((24, 32, 0), abs=1e-9)


def test_what_cannot_be_settled_can_be_written_out_flat(tmp_path: Path) -> None:
    for text in (LEG.replace("[0, 2, 0]", "[0, 1, 0.2]"), SLIDE):
        path = tmp_path / "drawn.toml"
        path.write_text(text, encoding="utf-8")
        rig = load_rig(path)
        flat, new = settled(tmp_path, flat_text(rig))
        flat.write_text(new, encoding="utf-8")
        rest = find_rest(load_rig(flat))
        assert np.nanmax(rest.moved) < 1e-12 * rest.size
        assert np.abs(rest.positions - find_rest(rig).positions).max() < 1e-12 * rest.size


def test_a_copy_s_axis_is_told_beside_its_joints(tmp_path: Path) -> None:
    (tmp_path / "leg.toml").write_text(LEG.replace("[0, 2, 0]", "[0, 1, 0.2]"), encoding="utf-8")
    with pytest.raises(BadInput) as told:
        settled(tmp_path, 'rigpose = 1\ndim = 3\n[copies]\nfore = { of = "leg.toml" }\n')
    assert [(p.part, p.rule.split()[0]) for p in told.value.problems] == [
        ("hinges.fore/knee.axis", "settling"), ("fore/knee", "a"), ("fore/toe", "a")]


@pytest.mark.parametrize("name", ["gull_leg", "lamplighter", "beacon_lift", "weather_loop",
                                  "letter_sorter", "market_canopy"])
def test_shipped_rigs_with_hinges_are_settled_as_they_are(name: str) -> None:
    path = Path(__file__).resolve().parent.parent / "rigs" / f"{name}.toml"
    rig = load_rig(path)
    assert rig.helper_joints
    assert settle_text(path, rig, find_rest(rig)) == path.read_text(encoding="utf-8")
