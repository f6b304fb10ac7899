"""Units, up axes, planes and frame numbers at the door."""

from __future__ import annotations

from dataclasses import replace
from fractions import Fraction

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from scipy.spatial.transform import Rotation

from rigpose.files.scene import Frame, Outlet, from_scene, outlet, to_scene
from rigpose.ground.errors import BadInput
from rigpose.model.rig import METRES, Joint, Rig, Stand

FLAT = Rig("lamp post", 2, (Joint(name="foot", at=(0.0, 0.0)),))
SPACE = Rig("lamp post", 3, (Joint(name="foot", at=(0.0, 0.0, 0.0)),))
FILM = Fraction(24)
NTSC = Fraction(24000, 1001)


def test_a_plane_rig_stands_at_z_0_with_the_same_bits() -> None:
    flat = np.random.default_rng(1).normal(size=(4, 3, 2))
    scene = to_scene(FLAT, flat)
    np.testing.assert_array_equal(scene[..., :2], flat)
    np.testing.assert_array_equal(scene[..., 2], 0.0)
    back, off = from_scene(FLAT, scene)
    np.testing.assert_array_equal(back, flat)
    assert off == 0.0


def test_a_missing_pose_is_missing_in_the_scene_too() -> None:
    assert np.isnan(to_scene(FLAT, np.full((1, 1, 2), np.nan))).all()


def test_a_rig_in_space_comes_through_untouched() -> None:
    places = np.random.default_rng(2).normal(size=(5, 3))
    assert to_scene(SPACE, places) is places
    assert from_scene(SPACE, places) == (places, 0.0)


def test_a_plane_of_its_own() -> None:
    rig = replace(FLAT, plane=Stand((10.0, 0.0, 5.0), (0.0, 0.0, -1.0), (0.0, 1.0, 0.0)))
    scene = to_scene(rig, np.array([[2.0, 3.0]]))
    assert scene.tolist() == [[10.0, 3.0, 3.0]]
    back, off = from_scene(rig, scene + np.array([0.25, 0.0, 0.0]))
    assert back.tolist() == [[2.0, 3.0]]
    assert off == 0.25


def test_nothing_to_change_means_the_same_array() -> None:
    same = outlet(FLAT, FILM)
    places = np.random.default_rng(3).normal(size=(5, 3))
    frames = np.arange(5.0)
    assert same.convert(places) is places
    assert same.revert(places) is places
    assert same.lengths(places) is places
    assert same.number(frames) is frames


def test_up_axes_turn_and_never_mirror() -> None:
    # Outside check: SciPy's rotation by a right angle about x, positive by the right hand.
    turn = Rotation.from_euler("x", 90, degrees=True).as_matrix()
    up = Outlet(Frame(up="y"), Frame(up="z"))
    places = np.random.default_rng(4).normal(size=(50, 3))
    np.testing.assert_allclose(up.convert(places), places @ turn.T, atol=1e-15)
    np.testing.assert_array_equal(up.revert(up.convert(places)), places)
    assert up.convert(np.array([1.0, 2.0, 3.0])).tolist() == [1.0, -3.0, 2.0]
    assert np.linalg.det(up.convert(np.eye(3))) == 1.0


def test_no_minus_zero_comes_from_a_turn() -> None:
    turned = Outlet(Frame(up="y"), Frame(up="z")).convert(np.array([1.0, 2.0, 0.0]))
    assert not np.signbit(turned).any()


def test_units_are_the_exact_decimal_ones() -> None:
    # International foot and inch: 0.3048 m and 0.0254 m exactly (NIST SP 811, appendix B).
    def one(unit: str, to: str) -> float:
        return float(Outlet(Frame(unit), Frame(to)).lengths(np.array([1.0]))[0])

    assert one("ft", "in") == 12.0
    assert one("m", "cm") == 100.0
    assert one("mm", "cm") == 0.1
    assert one("in", "mm") == 25.4
    assert one("ft", "m") == 0.3048
    assert one("m", "ft") == float(Fraction(1250, 381))


@given(st.sampled_from(sorted(METRES)), st.sampled_from(sorted(METRES)),
       st.floats(1e-6, 1e6), st.sampled_from("yz"), st.sampled_from("yz"))
def test_there_and_back(unit: str, to: str, x: float, up: str, to_up: str) -> None:
    way = Outlet(Frame(unit, up), Frame(to, to_up))
    places = np.array([x, -x, 2 * x])
    np.testing.assert_allclose(way.revert(way.convert(places)), places, rtol=1e-15)


def test_frame_numbers_keep_the_instant() -> None:
    frames = np.array([0.0, 24.0, 36.0])
    assert outlet(FLAT, FILM, to_fps=Fraction(30)).number(frames).tolist() == [0.0, 30.0, 45.0]
    moved = outlet(FLAT, FILM, to_fps=Fraction(30), offset=Fraction(1000))
    assert moved.number(frames).tolist() == [1000.0, 1030.0, 1045.0]
    assert moved.unnumber(moved.number(frames)).tolist() == frames.tolist()


@given(st.integers(-10**6, 10**7))
def test_frame_numbers_are_rounded_once(frame: int) -> None:
    got = outlet(FLAT, FILM, to_fps=NTSC).number(np.array([float(frame)]))
    assert got[0] == float(frame * NTSC / FILM)


def test_what_a_file_is_written_in_reads_as_a_sentence() -> None:
    assert str(Frame("cm", "y", FILM)) == "24 a second, cm, y up"
    assert str(Frame("m", "z", NTSC, Fraction(100))) == "24000/1001 a second, m, z up, frames +100"


def test_errors_come_together() -> None:
    with pytest.raises(BadInput) as told:
        outlet(FLAT, FILM, unit="furlong", up="x", to_fps=Fraction(0))
    assert str(told.value) == (
        'unit: a unit is one of m, cm, mm, in, ft; got "furlong"\n'
        'up: up is y or z; got "x"\n'
        "fps: a rate is more than 0; got 0")
