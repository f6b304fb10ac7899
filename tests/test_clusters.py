"""Blocks of several joints: all their poses, nothing that moves freely, lengths to rounding."""

from __future__ import annotations

import math
from collections.abc import Iterator
from functools import cache
from pathlib import Path

import numpy as np
import pytest
import random_rigs
import random_space
from scipy.optimize import root
from scipy.spatial.transform import Rotation

import rigpose as rp
from rigpose.model.equations import Array
from rigpose.solve.knowns import read_knowns
from rigpose.solve.ownrows import OwnRows, own_rows
from rigpose.solve.plan import Cluster
from rigpose.solve.planner import plan_for
from rigpose.solve.starts import hung

RIGS = Path(__file__).parent.parent / "rigs"


# -- a block's own rows ---------------------------------------------------------------------------

def blocks_of(rig: rp.Rig, drives: dict[str, float], targets: object) -> tuple[Cluster, ...]:
    knowns = read_knowns(rig, drives, targets)  # type: ignore[arg-type]
    return plan_for(rig, knowns.drive_names, knowns.target_names).clusters


@cache
def shot_blocks(name: str) -> tuple[Cluster, ...]:
    shot = rp.load_shot(RIGS / f"{name}.shot.toml")
    given = rp.channels(shot, shot.numbers)
    return blocks_of(shot.rig, {k: v[0] for k, v in given.drives.items()},
                     {k: v[0] for k, v in given.targets.items()})


def some_blocks() -> Iterator[Cluster]:
    for name in ("beacon_lift", "lamplighter", "letter_sorter", "storm_table", "lamp_cart",
                 "mooring_stage"):
        yield from shot_blocks(name)
    for seed in range(6):
        for case in (random_space.random_space_case(seed, 2, random_space.BLOCKS),
                     random_rigs.random_case(seed, 3, random_rigs.BLOCKS)):
            yield from blocks_of(case.rig, case.drives, case.targets)


def test_a_blocks_own_rows_are_those_of_the_whole_rig() -> None:
    rng, count = np.random.default_rng(5), 0
    for step in some_blocks():
        own, eqs = own_rows(step), step.system.eqs
        x, goal = rng.normal(size=(2, 3, eqs.n, eqs.dim))
        values = rng.normal(size=(3, len(eqs.values)))
        residual, slopes = step.system.both(x, values, goal)
        columns = (np.array(step.joints)[:, None] * eqs.dim + np.arange(eqs.dim)).ravel()
        for which, rows in ((None, step.rows), (own.choice, step.square)):
            mine, by = own.both(x[:, own.keep], values, goal[:, own.keep], which)
            assert np.array_equal(mine, residual[:, rows])
            assert np.abs(by - slopes[:, rows][:, :, columns]).max() < 1e-14
        assert np.array_equal(own.residual(x[:, own.keep], values, goal[:, own.keep]),
                              residual[:, step.rows])
        count += 1
    assert count > 15


# -- starts ---------------------------------------------------------------------------------------

def body_misfits(own: OwnRows, x: Array) -> Array:
    """How far distances within bodies are off in poses ``(N, k, dim)``, ``(N, bodies)``."""
    out = []
    for body in own.system.eqs.bodies:
        p = x[:, body.joints]
        gaps = np.linalg.norm(p[:, :, None] - p[:, None], axis=-1)
        want = np.linalg.norm(body.shape[:, None] - body.shape[None], axis=-1)
        out.append(np.abs(gaps - want).max(axis=(1, 2)))
    return np.stack(out, axis=1)


@pytest.mark.parametrize("name", ["letter_sorter", "storm_table", "lamp_cart"])
def test_bodies_are_thrown_whole_about_what_holds_them(name: str) -> None:
    (step,) = shot_blocks(name)
    own = own_rows(step)
    x = np.repeat(step.system.eqs.at[own.keep][None], 200, axis=0)
    values = np.full((200, len(step.system.eqs.values)), 0.7)
    start = hung(own, x, values, 1.0, np.random.default_rng(2))
    outside = np.setdiff1d(np.arange(len(own.keep)), own.inside)
    assert np.array_equal(start[:, outside], x[:, outside])
    # In every second start bodies come before bones; each but the last closes no loop.
    off = np.sort(body_misfits(own, start[::2]), axis=1)
    assert (off[:, : 1 if name == "storm_table" else -1] < 1e-12).all()
    assert start[:, own.inside].std(axis=0).max() > 0.1


# -- all poses ------------------------------------------------------------------------------------

SORTER_LEGS = [(f"plate_{k}l", f"plate_{k}r", f"leg{k}/") for k in (1, 2, 3)]


def turned(vector: Array) -> Array:
    """The turn about a vector by its length."""
    matrix: Array = Rotation.from_rotvec(vector).as_matrix()
    return matrix


def sorter_places(rig: rp.Rig, goal: Array, unknowns: Array) -> dict[str, Array]:
    """The plate turned about the sucker by three unknowns, and each arm by one."""
    at = {j.name: np.array(j.at) for j in rig.joints}
    turn = turned(unknowns[:3])
    places = {}
    for k, (left, right, leg) in enumerate(SORTER_LEGS, 1):
        for corner in (left, right):
            places[corner] = turn @ (at[corner] - at["sucker"]) + goal
        shoulder, along = at[leg + "shoulder"], at[leg + "right"] - at[leg + "left"]
        swing = turned(along / np.linalg.norm(along) * unknowns[2 + k])
        for side in ("left", "right"):
            places[leg + side] = swing @ (at[leg + side] - shoulder) + shoulder
    return places


def test_a_plate_free_to_tilt_reaches_a_place_in_all_the_ways_that_scipy_finds() -> None:
    rig, goal = rp.load_rig(RIGS / "letter_sorter.toml"), np.array([5.0, 3, -62])
    found = rp.find_branches(rig, targets={"sucker": goal})
    assert (len(found), found.found) == (38, rp.Found.PROBABLY)
    assert rp.judge(rig, found.positions, found.size).worst()[0] < 1e-14

    def loops(unknowns: Array) -> Array:
        p = sorter_places(rig, goal, unknowns)
        return np.array([((p[corner] - p[leg + side]) ** 2).sum() - 4900
                         for left, right, leg in SORTER_LEGS
                         for corner, side in ((left, "left"), (right, "right"))]) / 4900

    rng, seen = np.random.default_rng(3), set()
    for _ in range(100):
        unknowns = root(loops, rng.uniform(-3, 3, 6), tol=1e-13).x
        if np.abs(loops(unknowns)).max() > 1e-11:
            continue
        places = sorter_places(rig, goal, unknowns)
        joints = [found.joints.index(j) for j in places]
        gaps = np.abs(found.positions[:, 0, joints] - np.array(list(places.values())))
        assert gaps.max(axis=(1, 2)).min() < 1e-5
        seen.add(int(gaps.max(axis=(1, 2)).argmin()))
    assert len(seen) > 20


# -- continua and dead centres --------------------------------------------------------------------

@cache
def three_equal_legs() -> rp.Rig:
    """An equilateral triangle on three legs from the corners of one as large.

    With legs of one length L and the platform turned by t about the middle, moved by m: the feet
    are 2 sin(t / 2) away from the corners, in three directions that add up to nothing; so m = 0
    and 2 sin(t / 2) = L, or t = 0 and m is anywhere on a circle of radius L.
    """
    corners = [np.array([math.cos(a), math.sin(a)]) for a in np.radians([90, 210, 330])]
    sixth = Rotation.from_euler("z", 60, degrees=True).as_matrix()[:2, :2]
    joints: dict[str, object] = {}
    for name, corner in zip("abc", corners, strict=True):
        joints[name] = {"at": corner.tolist(), "pin": True}
        joints[name + "'"] = (sixth @ corner).tolist()
    rams = {f"leg_{n}": {"ends": [n, n + "'"]} for n in "abc"}
    return rp.make_rig(joints, {}, plates={"deck": ["a'", "b'", "c'"]}, rams=rams)


@pytest.mark.parametrize(("length", "turns"), [
    (1.0, (-60, 60)), (1.5, (-97.18075578, 97.18075578)), (2.0, (180,)), (2.1, ())])
def test_a_circle_of_poses_is_told_and_only_poses_apart_are_listed(
        length: float, turns: tuple[float, ...]) -> None:
    rig = three_equal_legs()
    found = rp.find_branches(rig, {f"leg_{n}": length for n in "abc"})
    places = found.positions[:, 0, [rig.index[n + "'"] for n in "abc"]]
    assert len(found) == len(turns)
    assert np.abs(places.mean(axis=1)).max(initial=0) < 1e-7
    arm = places[:, 0]
    have = np.degrees(np.arctan2(arm[:, 1], arm[:, 0])) - 90
    assert sorted(np.round(np.remainder(have + 170, 360) - 170, 5)) == pytest.approx(
        sorted(turns), abs=1e-4)
    dead = length == 2
    assert ((found.margin[:, 0] == 0) == dead).all()
    assert any("turns freely" in note for note in found.notes)


def test_the_lift_at_full_height_is_one_pose_at_a_dead_centre() -> None:
    """With the boards upright above each other there is no higher place."""
    found = rp.find_branches(rp.load_rig(RIGS / "beacon_lift.toml"), {"lift": 90.0})
    assert found.margin.tolist() == [[0.0]]
    assert found.positions[0, 0, found.joints.index("lamp"), 2] == pytest.approx(74, abs=1e-6)


# -- numbers that agree to slack only -------------------------------------------------------------

@pytest.mark.parametrize(("rounded", "off"), [(0.0, 2e-4), (1e-8, 2e-4), (1e-8, 0.0)])
def test_a_surplus_leg_rules_out_what_it_does_not_fit(rounded: float, off: float) -> None:
    """The fourth leg is a mirror image's too where its pin is on the mirror line (``off`` 0)."""
    drawn = three_equal_legs()
    at = {j.name: j.at for j in drawn.joints if j.at is not None}
    sixth = math.radians(60)
    below = (0.3 * math.sin(sixth), -0.3 * math.cos(sixth))
    joints = {n: {"at": list(p), "pin": True} if len(n) == 1 else list(p) for n, p in at.items()}
    joints |= {"d": {"at": [off, -2], "pin": True}, "d'": list(below)}
    bones: dict[str, object] = {f"leg_{n}": [n, n + "'"] for n in "abc"}
    length = math.dist((off, -2), below) + rounded
    bones["leg_d"] = {"ends": ["d", "d'"], "length": length}
    rig = rp.make_rig(joints, bones, plates={"deck": ["a'", "b'", "c'", "d'"]})
    found = rp.find_branches(rig)
    assert len(found) == (1 if off else 2)
    exact = found.positions[:, 0, [rig.index[n] for n in ("d", "d'")]]
    gap = np.linalg.norm(exact[:, 1] - exact[:, 0], axis=1) - length
    assert np.abs(gap).max() == pytest.approx(rounded, abs=1e-13)


# -- the judge ------------------------------------------------------------------------------------

def test_poses_that_do_not_exist_are_measured_as_unknown_without_a_warning() -> None:
    rig = rp.load_rig(RIGS / "gull_leg.toml")
    pose = np.array([j.at for j in rig.joints], dtype=float)
    poses = np.stack([pose, np.full_like(pose, np.nan), pose * [1, 1, -1]])
    broken = rp.judge(rig, poses, 1.0).broken
    assert np.isnan(broken[1]).all()
    assert np.isfinite(broken[[0, 2]]).all()
    # A mirrored body is off by its own size.
    assert broken[0].max() < 1e-12
    assert broken[2].max() > 0.1
