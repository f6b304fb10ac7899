"""Rows of rigs in space: motions that don't depend on how they are sampled, dead centres, shots.

What happens where is geometry that anyone can redo by hand: a tripod whose top is drawn through the
plane of its feet, four upright hinges as a parallelogram.
"""

from __future__ import annotations

from fractions import Fraction
from pathlib import Path
from typing import Any

import numpy as np
import pytest
from calling import Capture, said
from random_space import MOVING, Case, lattice_space_case, random_space_case
from test_properties import right, row_among, whole_rows

import rigpose as rp
from rigpose.model.equations import Array
from rigpose.motion.bake import Baking
from rigpose.motion.settle import pieces

PIN = {"pin": True}
COARSE, FINE = 41, 121


def swept(case: Case, seed: int, count: int, back: bool = False) -> rp.Branches:
    """Drives that go a long way at an even pace."""
    rng = np.random.default_rng(seed)
    cranks = {c.name for c in case.rig.cranks}
    t = np.linspace(0, 1, count)[::-1 if back else 1]
    drives = {}
    for name, value in case.drives.items():
        way = rng.uniform(60, 400) if name in cranks else rng.uniform(0.1, 1)
        drives[name] = value + way * rng.choice([-1, 1]) * t
    return rp.find_branches(case.rig, drives, case.wishes)


def rows_agree(case: Case, seed: int) -> int:
    """The same motion is found from fewer frames, from more, and from back to front; how many."""
    coarse, fine = swept(case, seed, COARSE), swept(case, seed, FINE)
    back = swept(case, seed, FINE, back=True)
    for found in (coarse, fine, back):
        right(found)
    for k in whole_rows(coarse):
        assert row_among(coarse.positions[k], fine.positions[:, ::3])
    for k in whole_rows(fine):
        assert row_among(fine.positions[k], back.positions[:, ::-1])
    return len(whole_rows(fine))


@pytest.mark.parametrize("seed", range(100, 116))
def test_rows_do_not_depend_on_how_they_are_sampled(seed: int) -> None:
    rows_agree(random_space_case(seed, 3, MOVING), seed)


@pytest.mark.parametrize("seed", range(12))
def test_rows_through_dead_centres_do_not_depend_on_how_they_are_sampled(seed: int) -> None:
    try:
        rows_agree(lattice_space_case(seed, 2 + seed % 2), seed)
    except rp.BadInput as refused:
        assert "still move" in str(refused)


def test_enough_rows_are_compared() -> None:
    assert sum(rows_agree(random_space_case(seed, 2, MOVING), seed) for seed in range(6)) > 6


def test_the_judge_measures_frames_without_a_pose_in_silence() -> None:
    found = swept(random_space_case(102, 3, MOVING), 102, COARSE)
    assert not (found.state == rp.State.MET).all()
    rp.judge(found.rig, found.positions, found.size)


@pytest.mark.parametrize("seed", range(120, 126))
def test_a_sweep_has_the_poses_of_its_frames(seed: int) -> None:
    case = random_space_case(seed, 3, MOVING)
    found = swept(case, seed, 8)
    for frame in range(len(found.frames)):
        drives = {n: v[frame] for n, v in found.knowns.drives.items()}
        one = rp.find_branches(case.rig, drives, case.wishes)
        alive = found.state[:, frame] == rp.State.MET
        assert alive.sum() == len(one)
        if len(one):
            apart = np.abs(found.positions[alive, frame][:, None]
                           - one.positions[:, 0]).max(axis=(2, 3))
            assert apart.min(axis=1).max() < 1e-6 * found.size
            assert apart.min(axis=0).max() < 1e-6 * found.size


@pytest.mark.slow
def test_hundreds_of_sweeps() -> None:
    wrong = []
    for seed in range(1000, 1400):
        try:
            rows_agree(random_space_case(seed, 1 + seed % 4, MOVING), seed)
        except (AssertionError, rp.BadInput) as error:
            wrong.append(f"{seed}: {str(error)[:200]}")
    assert wrong == []


# -- dead centres ---------------------------------------------------------------------------------

def _tables() -> dict[str, Any]:
    """Two bones of the root of 2 and a ram. The bones leave the top a circle of radius 1 about the
    y axis; at the angle t from x towards z the ram's length is the root of 10 - 6 cos(t)."""
    return {"joints": {"fore": {"at": [0, 1, 0], **PIN}, "aft": {"at": [0, -1, 0], **PIN},
                       "heel": {"at": [3, 0, 0], **PIN}, "top": [0.6, 0, 0.8]},
            "bones": {"left": ["fore", "top"], "right": ["aft", "top"]},
            "rams": {"lift": {"ends": ["heel", "top"]}}}


def tripod(up: str = "y") -> rp.Rig:
    return rp.make_rig(**_tables(), dim=3, up=up)


def ram_at(turn: Array) -> Array:
    """Its length ``(n,)`` for the top at angles in radians."""
    long: Array = np.sqrt(10 - 6 * np.cos(turn))
    return long


def tops(turn: Array) -> Array:
    return np.stack([np.cos(turn), 0 * turn, np.sin(turn)], axis=-1)


def kinds(found: rp.Branches) -> list[list[str]]:
    return [[e.kind for e in row] for row in found.events]


def test_a_ram_turns_a_top_round_through_the_plane_of_its_feet() -> None:
    """The ram is moved as a top that turns evenly would move it, so the top turns evenly."""
    turn = np.radians(np.arange(-100.0, 981.0))
    found = rp.find_branches(tripod(), {"lift": ram_at(turn)})
    right(found)
    assert len(found) == 2
    assert (found.state == rp.State.MET).all()
    top = found.positions[:, :, 3]
    for row, want in ((int(np.argmin(top[:, 0, 2])), turn), (int(np.argmax(top[:, 0, 2])), -turn)):
        assert np.abs(top[row] - tops(want)).max() < 1e-6
        assert kinds(found)[row] == ["passed"] * 6
        assert [e.frame for e in found.events[row]] == pytest.approx(
            100 + 180 * np.arange(6), abs=1e-4)


def test_a_ram_that_eases_into_its_shortest_passes_over_to_the_other_side() -> None:
    """2 + s^2 / 4: the squared height goes like s^2, and its smooth way changes sides."""
    s = np.linspace(-1, 1, 101)
    found = rp.find_branches(tripod(), {"lift": 2 + s * s / 4})
    right(found)
    assert kinds(found) == [["passed"], ["passed"]]
    height = found.positions[:, :, 3, 2]
    assert (height[:, 0] * height[:, -1] < 0).all()
    assert np.abs(height + height[:, ::-1]).max() < 1e-6
    assert np.abs(np.diff(height, n=2, axis=1)).max() < 0.01


def test_rows_end_where_the_ram_is_too_short() -> None:
    long = np.linspace(3.5, 1.5, 201)
    found = rp.find_branches(tripod(), {"lift": long})
    right(found)
    alive = long >= 2
    # At 2 itself the last bit decides.
    clear = np.abs(long - 2) > 1e-12
    assert len(found) == 2
    assert ((found.state == rp.State.MET) == alive)[:, clear].all()
    assert np.isnan(found.positions[:, ~alive & clear]).all()
    motion = rp.bake(_shot(tripod(), {"lift": [(1, 3.5), (201, 1.5)]}, (1, 201), "linear"))
    assert not motion.ok
    (span,) = motion.spans
    assert (span.first, span.last) in ((151, 201), (152, 201))
    assert set(span.parts) >= {"lift"}


def test_the_end_of_a_range_stops_a_row() -> None:
    """A slack ram from a pin above: 4 above the feet it is the root of 17 - 8 z to the top."""
    tables = _tables()
    rig = rp.make_rig(
        {**tables["joints"], "davit": {"at": [0, 0, 4], **PIN}}, tables["bones"], dim=3,
        rams={**tables["rams"], "rope": {"ends": ["davit", "top"], "range": [0, 4]}})
    turn = np.radians(np.linspace(90, 0, 181))
    found = rp.find_branches(rig, {"lift": ram_at(turn)})
    right(found)
    assert len(found) == 1
    assert np.array_equal(found.state[0] == rp.State.MET, 17 - 8 * np.sin(turn) <= 16)


def parallelogram() -> rp.Rig:
    """Four upright hinges: ground and coupler 2, both cranks 0.5."""
    up = [0, 0, 1]
    return rp.make_rig(
        {"left": {"at": [0, 0, 0], **PIN}, "right": {"at": [2, 0, 0], **PIN}, "tip": [0.5, 0, 0],
         "knee": [2.5, 0, 0]},
        {"crank": ["left", "tip"], "coupler": ["tip", "knee"], "follower": ["right", "knee"]},
        dim=3, hinges={"a": {"parts": ["ground", "crank"], "at": "left", "axis": up},
                "b": {"parts": ["crank", "coupler"], "at": "tip", "axis": up},
                "c": {"parts": ["coupler", "follower"], "at": "knee", "axis": up},
                "d": {"parts": ["ground", "follower"], "at": "right", "axis": up}},
        cranks={"input": {"turns": "crank", "about": "a", "zero": [1, 0, 0]},
                "output": {"turns": "follower", "about": "d", "zero": [1, 0, 0]}})


@pytest.mark.parametrize("frames", [73, 100])
def test_hinged_cranks_go_straight_through_for_two_turns(frames: int) -> None:
    turn = np.linspace(10, 730, frames)
    found = rp.find_branches(parallelogram(), {"input": turn})
    right(found)
    assert len(found) == 2
    assert kinds(found) == [["passed"] * 4] * 2
    knee = found.positions[:, :, found.joints.index("knee")] - (2, 0, 0)
    follower = np.degrees(np.unwrap(np.arctan2(knee[..., 1], knee[..., 0]), axis=1))
    straight = int(np.argmin(np.abs(follower - turn).max(axis=1)))
    assert np.abs(follower[straight] - turn).max() < 1e-6
    assert np.abs(knee[..., 2]).max() < 1e-9


def test_a_hinged_crank_that_comes_and_goes_touches_a_change_point() -> None:
    """180 - 40 s^2: the height goes like s^2, whose smooth way stays on its side."""
    s = np.linspace(-1, 1, 101)
    found = rp.find_branches(parallelogram(), {"input": 180 - 40 * s * s})
    right(found)
    assert kinds(found) == [["touched"], ["touched"]]
    assert np.abs(found.positions - found.positions[:, ::-1]).max() < 1e-10


# -- shots ----------------------------------------------------------------------------------------

def _shot(rig: rp.Rig, drives: dict[str, list[tuple[float, float]]], frames: tuple[float, float],
          ease: str = "smooth", near: dict[str, tuple[float, ...]] | None = None) -> rp.Shot:
    keys: dict[float, dict[str, float]] = {}
    for name, values in drives.items():
        for frame, value in values:
            keys.setdefault(frame, {})[name] = value
    return rp.Shot("shot", rig, Fraction(24), frames, near=near or {}, keys=tuple(
        rp.Key(f, keys[f], ease=ease) for f in sorted(keys)))  # type: ignore[arg-type]


def shot_of(seed: int) -> rp.Shot:
    """A random rig, its drives led away from the drawing and half the way back."""
    case = random_space_case(seed, 3, PLACED)
    rng = np.random.default_rng(seed)
    cranks = {c.name for c in case.rig.cranks}
    drives = {}
    for name, at in case.drives.items():
        way = (90 if name in cranks else 0.3) * rng.uniform(-1, 1)
        drives[name] = [(1.0, at), (21.0, at + way), (41.0, at + way / 2)]
    near = {j: tuple(case.drawn[k]) for k, j in enumerate(case.rig.joint_names)}
    return _shot(case.rig, drives, (1, 41), near=near)


PLACED = [kind for kind in MOVING if "target" not in kind.__name__]
SHOTS = [200, 203, 209, 218]


@pytest.mark.parametrize("seed", SHOTS)
def test_a_baked_row_is_a_row_of_the_map(seed: int) -> None:
    shot = shot_of(seed)
    motion = rp.bake(shot)
    given = rp.channels(shot, shot.numbers)
    rows = rp.find_branches(shot.rig, given.drives)
    assert motion.ok
    assert shot.keys
    assert row_among(motion.positions, rows.positions)
    assert motion.worst < 1e-12
    start = np.array([j.at for j in shot.rig.joints])
    assert np.abs(motion.positions[0] - start).max() < 1e-9 * motion.size


@pytest.mark.parametrize("seed", [215, 219])
def test_a_shot_that_opens_has_a_span_and_the_poses_of_its_other_frames(seed: int) -> None:
    shot = shot_of(seed)
    motion = rp.bake(shot)
    assert not motion.ok
    (span,) = motion.spans
    inside = (shot.numbers >= span.first) & (shot.numbers <= span.last)
    assert np.array_equal(inside, motion.state != rp.State.MET)
    given = rp.channels(shot, shot.numbers)
    for frame in range(0, len(inside), 4):
        one = rp.find_branches(shot.rig, {n: v[frame] for n, v in given.drives.items()})
        if inside[frame]:
            assert len(one) == 0
        else:
            apart = np.abs(one.positions[:, 0] - motion.positions[frame]).max(axis=(1, 2))
            assert apart.min() < 1e-9 * motion.size


@pytest.mark.parametrize("seed", SHOTS)
def test_a_baked_row_does_not_depend_on_its_windows(seed: int) -> None:
    work = Baking(shot_of(seed), rp.Budget())
    assert work.row is not None
    got = [np.concatenate([p.positions for p in pieces(
        work.context, work.clock, work.row.begins, window)]) for window in (5, 16, 4096)]
    for other in got[1:]:
        assert np.nanmax(np.abs(got[0] - other)) < 1e-10


def turned_up(places: Array, up: str) -> Array:
    """A quarter turn about x: y up in the scene becomes z up in the file, or back."""
    x, y, z = np.moveaxis(places, -1, 0)
    return np.stack([x, -z, y] if up == "z" else [x, z, -y], axis=-1)


@pytest.mark.parametrize(("scene", "file"), [("y", "y"), ("y", "z"), ("z", "z"), ("z", "y")])
def test_csv_of_a_rig_in_space(tmp_path: Path, scene: str, file: str) -> None:
    shot = _shot(tripod(scene), {"lift": [(1, 2.5), (9, 3.5)]}, (1, 9))
    motion = rp.bake(shot)
    assert motion.ok
    path = tmp_path / "top.csv"
    rp.save_motion(motion, path, up=file)
    wanted = motion.positions if scene == file else turned_up(motion.positions, file)
    read = rp.load_motion(path, shot.rig, up=file)
    assert np.array_equal(read.positions, motion.positions)
    lines = path.read_text().splitlines()
    assert lines[0] == "frame,joint,x,y,z"
    cells = [line.split(",") for line in lines[1:]]
    assert [c[:2] for c in cells[:4]] == [["1", j] for j in shot.rig.joint_names]
    assert np.array_equal(np.array([c[2:] for c in cells], dtype=float),
                          wanted.reshape(-1, 3))


def test_the_command_bakes_a_shot_in_space_with_z_up(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch, capsys: Capture) -> None:
    monkeypatch.chdir(tmp_path)
    Path("davit.toml").write_text("""rigpose = 1
dim = 3
unit = "m"
[joints]
fore = { at = [0, 1, 0], pin = true }
aft = { at = [0, -1, 0], pin = true }
heel = { at = [3, 0, 0], pin = true }
top = [0.6, 0, 0.8]
[bones]
left = ["fore", "top"]
right = ["aft", "top"]
[rams]
lift = { ends = ["heel", "top"] }
""", encoding="utf-8")
    Path("davit.shot.toml").write_text("""rigpose = 1
rig = "davit.toml"
fps = 24
frames = [1, 25]
[[keys]]
frame = 1
drive = { lift = 2.5 }
[[keys]]
frame = 25
drive = { lift = 3.5 }
""", encoding="utf-8")
    lines = said(capsys, "bake", "davit.shot.toml", "--out", "davit.csv", "--up", "z",
                 "--unit", "cm")
    assert lines[-1] == "25 frames, 24 a second, cm, z up"
    last = Path("davit.csv").read_text(encoding="utf-8").splitlines()[-1].split(",")
    # 12.25 = 10 - 6 cos(t); y up in metres becomes z up in centimetres.
    cosine = -2.25 / 6
    assert last[:2] == ["25", "top"]
    assert [float(v) for v in last[2:]] == pytest.approx(
        [100 * cosine, -100 * np.sqrt(1 - cosine**2), 0], abs=1e-9)
