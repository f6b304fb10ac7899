"""Copies: how other rig files are brought in, placed, joined and repeated, and what is refused."""

from __future__ import annotations

import math
from pathlib import Path

import pytest

from rigpose.files.rigfile import load_rig
from rigpose.ground.errors import BadInput
from rigpose.model.rig import Coordinates, Rig

LEG = """
rigpose = 1
[sizes]
shin = 2
[joints]
hip = [0, 0]
knee = [3, 0]
toe = [3, -2]
[bones]
thigh = ["hip", "knee"]
calf = { ends = ["knee", "toe"], length = "shin" }
[cranks]
lift = { turns = "thigh", about = "hip", range = [-20, 50] }
[branches]
step = { toe = "right" }
"""
"""A right angle: the thigh along x, the calf down from the knee."""

BODY = 'rigpose = 1\n[joints]\nhip = { at = [10, 20], pin = true }\ntail = [0, 0]\n[copies]\n'


@pytest.fixture
def folder(tmp_path: Path) -> Path:
    (tmp_path / "leg.toml").write_text(LEG, encoding="utf-8")
    return tmp_path


def load(folder: Path, copies: str, body: str = BODY) -> Rig:
    (folder / "walker.toml").write_text(body + copies, encoding="utf-8")
    return load_rig(folder / "walker.toml")


def refusal(folder: Path, copies: str, body: str = BODY) -> str:
    with pytest.raises(BadInput) as told:
        load(folder, copies, body)
    return str(told.value)


def places(rig: Rig) -> dict[str, Coordinates]:
    return {j.name: j.at for j in rig.joints if j.at is not None}


def test_a_copy_joined_at_its_hip(folder: Path) -> None:
    rig = load(folder, 'fore = { of = "leg.toml", join = { hip = "hip" } }')
    assert places(rig) == {"hip": (10, 20), "tail": (0, 0), "fore/knee": (13, 20),
                           "fore/toe": (13, 18)}
    assert [(b.name, b.ends, b.length) for b in rig.bones] == [
        ("fore/thigh", ("hip", "fore/knee"), 3.0), ("fore/calf", ("fore/knee", "fore/toe"), 2.0)]
    assert rig.joints[0].pin
    assert rig.cranks[0].turns == "fore/thigh"
    assert rig.branches == {"fore/step": {"fore/toe": "right"}}


def test_lengths_stay_though_the_joints_take_the_parents_place(folder: Path) -> None:
    """Two joints joined where the copy doesn't fit: the first stands, the length is its own."""
    rig = load(folder, 'fore = { of = "leg.toml", join = { hip = "hip", toe = "tail" } }')
    assert places(rig) == {"hip": (10, 20), "tail": (0, 0), "fore/knee": (13, 20)}
    assert [b.length for b in rig.bones] == [3.0, 2.0]
    assert rig.bones[1].ends == ("fore/knee", "tail")


def test_at_and_turn(folder: Path) -> None:
    rig = load(folder, 'fore = { of = "leg.toml", at = [1, 2], turn = 90 }')
    assert places(rig) == {"hip": (10, 20), "tail": (0, 0), "fore/hip": (1, 2),
                           "fore/knee": (1, 5), "fore/toe": (3, 5)}
    # The copy's own x axis has turned along: its crank reads 0 in the pose where its file's did.
    assert rig.cranks[0].zero == 90
    assert rig.cranks[0].range == (-20, 50)


@pytest.mark.parametrize(("axis", "knee", "toe", "zero"), [
    ("x", (-3, 0), (-3, -2), 180), ("y", (3, 0), (3, 2), 0)])
def test_a_mirror_turns_sides_over(folder: Path, axis: str, knee: Coordinates, toe: Coordinates,
                                   zero: float) -> None:
    rig = load(folder, f'fore = {{ of = "leg.toml", at = [0, 0], mirror = "{axis}" }}')
    assert places(rig)["fore/knee"] == knee
    assert places(rig)["fore/toe"] == toe
    assert rig.branches == {"fore/step": {"fore/toe": "left"}}
    assert (rig.cranks[0].zero, rig.cranks[0].range) == (zero, (-50, 20))


def test_sizes_win_over_the_files_own(folder: Path) -> None:
    rig = load(folder, 'a = { of = "leg.toml", sizes = { shin = "foot / 4" } }\n'
               'b = { of = "leg.toml" }\n', BODY.replace("[joints]", "[sizes]\nfoot = 2\n[joints]"))
    assert {b.name: b.length for b in rig.bones if "calf" in b.name} == {
        "a/calf": 0.5, "b/calf": 2.0}


def test_units_are_changed(folder: Path) -> None:
    (folder / "leg.toml").write_text(LEG.replace("[sizes]", 'unit = "cm"\n[sizes]'),
                                     encoding="utf-8")
    rig = load(folder, 'fore = { of = "leg.toml", join = { hip = "hip" } }')
    assert [b.length for b in rig.bones] == pytest.approx([0.03, 0.02], rel=1e-15)
    assert places(rig)["fore/toe"] == pytest.approx((10.03, 19.98), rel=1e-15)


def test_repeated_round_a_point(folder: Path) -> None:
    rig = load(folder, 'rib = { of = "leg.toml", join = { hip = "hip" }, repeat = 4, turn = 90 }')
    found = places(rig)
    assert [found[f"rib{k}/knee"] for k in range(1, 5)] == [(13, 20), (10, 23), (7, 20), (10, 17)]
    assert all(math.dist(found["hip"], found[f"rib{k}/toe"]) == pytest.approx(math.sqrt(13))
               for k in range(1, 5))


def test_repeated_in_a_row(folder: Path) -> None:
    rig = load(folder, 'post = { of = "leg.toml", at = [1, 1], repeat = 3, shift = [4, 0.5] }')
    assert [places(rig)[f"post{k}/hip"] for k in (1, 2, 3)] == [(1, 1), (5, 1.5), (9, 2)]


def test_each_joins_the_one_before(folder: Path) -> None:
    rig = load(folder, 'link = { of = "leg.toml", join = { hip = "hip" }, '
               'chain = { hip = "toe" }, repeat = 3, turn = 90 }')
    assert list(places(rig)) == ["hip", "tail", "link1/knee", "link1/toe", "link2/knee",
                                 "link2/toe", "link3/knee", "link3/toe"]
    assert [b.ends[0] for b in rig.bones if "thigh" in b.name] == ["hip", "link1/toe", "link2/toe"]
    # Each stands a quarter turn on from the one before: (3, -2), then (2, 3), then (-3, 2).
    assert [places(rig)[f"link{k}/toe"] for k in (1, 2, 3)] == [(13, 18), (15, 21), (12, 23)]


def test_a_chain_goes_on_through_joints_that_were_joined(folder: Path) -> None:
    """All hips are one pinned joint; each copy's toe is named by the copies after it."""
    rig = load(folder, 'link = { of = "leg.toml", join = { hip = "hip" }, '
               'chain = { hip = "hip" }, repeat = 2 }')
    assert [b.ends[0] for b in rig.bones if "thigh" in b.name] == ["hip", "hip"]


def test_parts_of_copies_are_used_by_their_full_names(folder: Path) -> None:
    rig = load(folder, 'fore = { of = "leg.toml", join = { hip = "hip" } }\n[bones]\n'
               'tie_rod = ["tail", "fore/toe"]\n[ties]\nstill = { sum = { "fore/lift" = 1 } }\n')
    assert rig.bones[-1].ends == ("tail", "fore/toe")
    assert rig.bones[-1].length == math.dist((0, 0), (13, 18))
    assert rig.ties[0].sum == (("fore/lift", 1.0),)


def test_a_copy_may_hold_copies(folder: Path) -> None:
    (folder / "pair.toml").write_text(
        'rigpose = 1\n[joints]\npelvis = [0, 0]\n[copies]\n'
        'l = { of = "leg.toml", join = { hip = "pelvis" } }\n'
        'r = { of = "leg.toml", join = { hip = "pelvis" }, mirror = "x" }\n', encoding="utf-8")
    rig = load(folder, 'fore = { of = "pair.toml", join = { pelvis = "hip" } }')
    assert places(rig)["fore/l/knee"] == (13, 20)
    assert places(rig)["fore/r/knee"] == (7, 20)


def test_ties_and_slots_of_a_scaled_mirror_image_hold_in_the_same_pose(folder: Path) -> None:
    """A rack: rolled by 1 degree it goes 0.5 cm on; mirrored, angles change their sign."""
    (folder / "rack.toml").write_text("""
rigpose = 1
unit = "cm"
[joints]
hub = { at = [0, 0], pin = true }
rim = [2, 0]
shoe = [0, -2]
[bones]
spoke = ["hub", "rim"]
[cranks]
roll = { turns = "spoke" }
[rails]
bed = { joint = "shoe", through = [0, -2], direction = [1, 0], range = [-4, 6] }
[ties]
teeth = { sum = { roll = 0.5, bed = -1 } }
""", encoding="utf-8")
    rig = load(folder, 'r = { of = "rack.toml", at = [0, 0], mirror = "x" }')
    roll, bed = -10.0, 0.05  # 10 degrees and 5 cm of the file, seen from the other side in metres
    assert math.fsum(f * {"r/roll": roll, "r/bed": bed}[n] for n, f in rig.ties[0].sum) == (
        pytest.approx(0, abs=1e-12))
    assert rig.rails[0].direction == (-1.0, 0.0)
    assert rig.rails[0].range == pytest.approx((-0.04, 0.06))


def test_a_copy_of_itself_is_refused(folder: Path) -> None:
    assert refusal(folder, 'me = { of = "walker.toml" }') == (
        "walker.toml:6: copies.me.of: a rig may not be a copy inside itself; got walker.toml → "
        "walker.toml; bring in another file")
    (folder / "leg.toml").write_text(LEG + '[copies]\nb = { of = "walker.toml" }', encoding="utf-8")
    assert "got walker.toml → leg.toml → walker.toml" in refusal(
        folder, 'fore = { of = "leg.toml" }')


@pytest.mark.parametrize("name", ["../leg.toml", "/etc/passwd", "sub/../../leg.toml", "C:leg.toml",
                                  "..\\\\leg.toml", "", "inner/link.toml"])
def test_files_outside_the_folder_are_refused(folder: Path, name: str) -> None:
    """A link that leads outside is no way out either."""
    inner = folder / "inner"
    inner.mkdir()
    (inner / "inner").mkdir()
    (inner / "inner" / "link.toml").symlink_to(folder / "leg.toml")
    message = refusal(inner, f'fore = {{ of = "{name}" }}')
    assert message.startswith("walker.toml:6: copies.fore.of: files are looked for inside the "
                              "rig's own folder only; got ")


def test_folders_inside_are_allowed(folder: Path) -> None:
    (folder / "legs").mkdir()
    (folder / "leg.toml").rename(folder / "legs" / "leg.toml")
    rig = load(folder, 'fore = { of = "legs/leg.toml", join = { hip = "hip" } }')
    assert places(rig)["fore/knee"] == (13, 20)


@pytest.mark.parametrize(("copies", "message"), [
    ('f = { of = "log.toml" }', 'copies.f.of: there must be a file of this name beside the rig '
     'file; got "log.toml"; check the name'),
    ('f = { of = "leg.toml", join = { hop = "hip" } }', 'copies.f.join.hop: there is no joint in '
     'leg.toml of this name; got "hop"; did you mean "hip"?'),
    ('f = { of = "leg.toml", join = { hip = "hop" } }', 'copies.f.join.hip: there is no joint of '
     'this name; got "hop"; did you mean "hip"?'),
    ('f = { of = "leg.toml", join = { hip = "hip", toe = "hip" } }', 'copies.f.join.toe: two '
     'joints of a copy cannot become the same joint; got "hip" again; join it to another'),
    ('f = { of = "leg.toml", sizes = { shim = 1 } }', 'copies.f.sizes.shim: there is no size in '
     'leg.toml of this name; got "shim"; did you mean "shin"?'),
    ('f = { of = "leg.toml", repeat = 0 }', 'copies.f.repeat: must be a whole number from 1 to '
     '10000; got 0; bring in fewer, or leave `repeat` out'),
    ('f = { of = "leg.toml", chain = { hip = "toe" } }', 'copies.f.chain: `chain` speaks of '
     'several copies, so it needs `repeat`; got none; add `repeat`, or take `chain` out'),
    ('f = { of = "leg.toml", mirror = "z" }', 'copies.f.mirror: a plane rig has no z to mirror; '
     'got "z"; write "x" or "y"'),
    ('f = { of = "leg.toml", mirror = "w" }', 'copies.f.mirror: must be "x", "y" or, in space, '
     '"z"; got "w"'),
    ('f = { of = "leg.toml", trun = 3 }', 'copies.f.trun: there is no key of this name; got '
     '"trun"; did you mean "turn"?'),
    ('f = { join = { hip = "hip" } }', "copies.f: needs the key `of`; `of` is the name of a rig "
     "file in this file's folder"),
    ('f = { of = "leg.toml" }\n[bones]\nb = ["tail", "g/toe"]', None),
])
def test_faults_of_copies(folder: Path, copies: str, message: str | None) -> None:
    told = refusal(folder, copies)
    if message is None:
        assert told == ('walker.toml:8: bones.b.ends[1]: there is no joint of this name; got '
                        '"g/toe"; did you mean "f/toe"?')
    else:
        assert told == f"walker.toml:6: {message}"


def test_what_is_wrong_inside_is_told_of_its_own_file_once(folder: Path) -> None:
    (folder / "leg.toml").write_text(LEG.replace('"shin"', '"shank"'), encoding="utf-8")
    told = refusal(folder, 'a = { of = "leg.toml" }\nb = { of = "leg.toml" }\n'
                   '[bones]\nc = ["tail", "a/toe"]')
    assert told == ('leg.toml:11: bones.calf.length: there is no size "shank" in [sizes]; got '
                    '"shank"; did you mean "shin"?')


def test_a_copy_has_the_parents_dimension(folder: Path) -> None:
    body = "rigpose = 1\ndim = 3\n[joints]\nhip = [0, 0, 0]\ntail = [1, 0, 0]\n[copies]\n"
    assert refusal(folder, 'f = { of = "leg.toml" }', body) == (
        "walker.toml:7: copies.f.of: a copy has the dimension of the rig, 3; got dim = 2 in "
        "leg.toml; bring in another file")


def test_copies_in_space_turn_about_an_axis(folder: Path) -> None:
    (folder / "rib.toml").write_text("rigpose = 1\ndim = 3\n[joints]\nroot = [0, 0, 0]\n"
                                     'tip = [1, 0, 2]\n[bones]\nrib = ["root", "tip"]\n',
                                     encoding="utf-8")
    body = "rigpose = 1\ndim = 3\n[joints]\nhub = { at = [0, 0, 5], pin = true }\n[copies]\n"
    rig = load(folder, 'rib = { of = "rib.toml", join = { root = "hub" }, repeat = 4, turn = 90 }\n'
               'low = { of = "rib.toml", join = { root = "hub" }, turn = 180, axis = [1, 0, 0] }\n'
               'far = { of = "rib.toml", join = { root = "hub" }, mirror = "z" }', body)
    found = places(rig)
    assert [found[f"rib{k}/tip"] for k in range(1, 5)] == [
        (1, 0, 7), (0, 1, 7), (-1, 0, 7), (0, -1, 7)]
    assert [found["low/tip"], found["far/tip"]] == [(1, 0, 3), (1, 0, 3)]


def test_many_copies_of_many_joints_are_stopped_at_a_bound(folder: Path) -> None:
    """Each file brings in the one before a thousand times: a few lines ask for 1e9 joints."""
    for k in range(3):
        inner = "leg.toml" if k == 0 else f"c{k - 1}.toml"
        (folder / f"c{k}.toml").write_text(
            f'rigpose = 1\n[copies]\nm = {{ of = "{inner}", repeat = 1000 }}\n', encoding="utf-8")
    assert refusal(folder, 'm = { of = "c1.toml" }').startswith(
        "c1.toml:3: copies.m: a rig has at most 1000000 joints; got 1000 copies of 3000 joints")
