"""The machines in rigs/: what their comments say of them, and what their shots can and can't do.

Formulas of the slider-crank, the quick return and the scissor lift are elementary geometry. The
deviations of the straight-line linkages are named with their source where they stand.
"""

from __future__ import annotations

import math
from functools import cache
from pathlib import Path

import numpy as np
import pytest

from rigpose.files.rigfile import load_rig
from rigpose.files.shotfile import load_shot
from rigpose.ground.words import State
from rigpose.model.equations import Array
from rigpose.motion.bake import bake
from rigpose.motion.branches import find_branches
from rigpose.motion.branchset import Branches
from rigpose.motion.channels import channels
from rigpose.motion.shot import Shot
from rigpose.solve.rest import find_rest

RIGS = Path(__file__).parent.parent / "rigs"
MACHINES = sorted(p.stem for p in RIGS.glob("*.toml") if not p.name.endswith(".shot.toml"))
STUCK = sorted(p.name.removesuffix(".shot.toml") for p in RIGS.glob("*_stuck.shot.toml"))


@cache
def played(name: str) -> tuple[Shot, Branches]:
    shot = load_shot(RIGS / f"{name}.shot.toml")
    given = channels(shot, shot.numbers)
    return shot, find_branches(shot.rig, given.drives, given.targets)


def path(name: str, joint: str) -> Array:
    """The way of a joint, (n_frames, 2), in the row nearest to rest."""
    shot, found = played(name)
    way: Array = found.positions[0, :, shot.rig.index[joint]]
    return way


def test_there_are_machines_enough() -> None:
    assert len(MACHINES) >= 12
    assert len(STUCK) >= 3


@pytest.mark.parametrize("name", MACHINES)
def test_each_is_drawn_as_its_lengths_say(name: str) -> None:
    rest = find_rest(load_rig(RIGS / f"{name}.toml"))
    assert rest.misfit < 1e-9
    # The walking machine's legs are drawn once, for one place of the shaft.
    assert name == "quay_strider" or np.nanmax(rest.moved) < 1e-4 * rest.size


@pytest.mark.parametrize("name", MACHINES)
def test_each_has_a_shot_that_lives_in_every_frame(name: str) -> None:
    shot, found = played(name)
    assert len(shot.numbers) >= 48
    assert (found.state[0] == State.MET).all()
    motion = bake(shot)
    assert motion.ok, motion.note()
    assert np.isfinite(motion.positions).all()


@pytest.mark.parametrize("name", STUCK)
def test_what_is_stuck_starts_well_and_then_has_no_pose_at_all(name: str) -> None:
    shot, found = played(name)
    alive = (found.state == State.MET).any(axis=0)
    assert alive[0]
    assert not alive[-1]
    motion = bake(shot)
    assert not motion.ok
    assert (np.isfinite(motion.positions).all(axis=(1, 2)) == alive).all()


def test_the_walking_machine_has_thirty_joints_and_walks_on_level_ground() -> None:
    shot, found = played("quay_strider")
    feet = [k for k, joint in enumerate(shot.rig.joint_names) if joint.endswith("/foot")]
    heights = found.positions[0][:, feet, 1]
    assert len(shot.rig.joints) >= 30
    # In every frame two feet or more stand, within 6 cm, where the lowest of all ever is.
    assert ((heights < heights.min() + 0.06).sum(axis=1) >= 2).all()
    assert np.ptp(heights) > 0.4


def test_the_inversors_line_is_exact() -> None:
    """Peaucellier 1864: x = (arm^2 - side^2) / (2 radius)."""
    lamp = path("lamp_inversor", "lamp")
    assert np.abs(lamp[:, 0] - (2.5**2 - 1.5**2) / 1.5).max() < 1e-12 * 5
    assert np.ptp(lamp[:, 1]) > 3


def test_the_pumps_rod_leaves_its_line_by_what_watts_linkage_does() -> None:
    """Arms 1, half a coupler 0.25: 6.285e-3 where it goes 0.4 (our own calculation)."""
    rod = path("bilge_pump", "rod")
    inside = np.abs(rod[:, 1]) <= 0.4
    assert inside.all()
    assert 4e-3 < np.abs(rod[:, 0]).max() <= 6.285e-3


def test_the_ice_drag_pulls_level_for_half_a_turn() -> None:
    """Hoeken's linkage 1 : 2 : 2.5: stroke 4, height within 0.0097538 (our own calculation)."""
    shot, _ = played("ice_drag")
    wheel = channels(shot, shot.numbers).drives["wheel"] % 360
    hook = path("ice_drag", "hook")[(wheel >= 90) & (wheel <= 270)]
    assert 3.8 < np.ptp(hook[:, 0]) <= 4 + 1e-12
    assert 0.008 < np.ptp(hook[:, 1]) <= 0.0097539


def test_strokes_of_the_two_engines() -> None:
    angles = np.linspace(0, 360, 7201)

    def stroke(name: str) -> float:
        rig = load_rig(RIGS / f"{name}.toml")
        found = find_branches(rig, {"wheel": angles})
        return float(np.ptp(found.positions[0, :, rig.index["crosshead"], 0]))

    assert stroke("paddle_engine") == pytest.approx(1.2, abs=1e-12)
    # 0.5 times that of throw 1, rod 4, offset 0.5.
    exact = math.sqrt(2.5**2 - 0.25**2) - math.sqrt(1.5**2 - 0.25**2)
    assert exact == pytest.approx(2.0168972940 / 2, abs=1e-10)
    assert stroke("paddle_engine_offset") == pytest.approx(exact, abs=1e-6)


def test_the_planer_cuts_slowly_and_comes_back_quickly() -> None:
    rig = load_rig(RIGS / "plank_planer.toml")
    angles = np.linspace(0, 360, 3600, endpoint=False)
    found = find_branches(rig, {"wheel": angles})
    top = found.positions[0, :, rig.index["top"], 0]
    back = (np.diff(top, append=top[:1]) > 0).mean()
    half = 90 - math.degrees(math.asin(0.3 / 0.8))
    assert min(back, 1 - back) == pytest.approx(2 * half / 360, abs=1 / 3600)


def test_the_pen_draws_twice_the_tracers_figure() -> None:
    tracer, pen = path("chart_pantograph", "tracer"), path("chart_pantograph", "pen")
    assert np.abs(pen - 2 * tracer).max() < 1e-12


def test_the_coupled_wheels_stay_parallel_for_ten_turns() -> None:
    """They go straight through the twenty places where they could begin to turn crossed."""
    pins = [path("quay_engine", f"pin_{k}") for k in (1, 2, 3)]
    assert np.abs(pins[1] - pins[0] - (1.6, 0)).max() < 1e-11
    assert np.abs(pins[2] - pins[1] - (1.45, 0)).max() < 1e-11


def test_the_lift_is_as_high_as_its_stages_say() -> None:
    deck, shoe = path("lantern_lift", "stage4/top_left"), path("lantern_lift", "right")
    assert np.abs(deck[:, 1] - 4 * np.sqrt(4 - shoe[:, 0] ** 2)).max() < 1e-11
    assert np.abs(deck[:, 0]).max() < 1e-11


def test_leaf_and_balance_beam_turn_together() -> None:
    eye, head = path("bascule_bridge", "eye"), path("bascule_bridge", "head")
    assert np.abs(head - eye - (-1, 7)).max() < 1e-11


def test_the_valve_stands_still_with_the_block_at_the_trunnion() -> None:
    rig = load_rig(RIGS / "valve_gear.toml")
    wheel = np.arange(0, 360, 5.0)
    found = find_branches(rig, {"wheel_angle": wheel, "slot": np.full(72, 0.3)})
    assert np.ptp(found.positions[0, :, rig.index["spindle"], 0]) < 1e-12
    ahead = find_branches(rig, {"wheel_angle": wheel, "slot": np.full(72, 0.5)})
    astern = find_branches(rig, {"wheel_angle": wheel, "slot": np.full(72, 0.1)})
    way = [b.positions[0, :, rig.index["spindle"], 0] for b in (ahead, astern)]
    assert np.corrcoef(way[0], way[1])[0, 1] < -0.9


def test_the_clocks_wheels_turn_as_their_teeth_and_the_moon_comes_back() -> None:
    shot, _ = played("tide_clock")
    sun = channels(shot, shot.numbers).drives["sun_turn"]
    moon_pin, hub = path("tide_clock", "moon_pin"), (33, 0)
    angle = np.degrees(np.unwrap(np.arctan2(*(moon_pin - hub).T[::-1])))
    assert np.abs(angle - angle[0] - sun * 48 / 36).max() < 1e-9
    assert np.abs(path("tide_clock", "moon")[-1] - path("tide_clock", "moon")[0]).max() < 1e-9
    weight = path("tide_clock", "weight")
    assert weight[-1, 1] - weight[0, 1] == pytest.approx(-6 * 3 * 2 * math.pi)


def test_the_hook_travels_nearly_level() -> None:
    hook = path("quay_crane", "hook")
    assert np.ptp(hook[:, 0]) > 2
    assert np.ptp(hook[:, 1]) < 0.1
