"""Channels: what the keys give at every frame, checked by hand and against cam design's numbers."""

from __future__ import annotations

import pickle
from fractions import Fraction

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from rigpose.ground.errors import BadInput
from rigpose.model.rig import Joint, Ram, Rig
from rigpose.motion.channels import Knowns, channels, smooth
from rigpose.motion.shot import EASES, Key, Shot

RIG = Rig("tide gate", 2, (Joint(name="sill", at=(0.0, 0.0), pin=True), Joint(name="lip")),
          rams=(Ram(name="lift", ends=("sill", "lip")),))


def shot(*keys: Key, frames: tuple[float, float] = (1, 25), step: float = 1.0) -> Shot:
    return Shot("high tide", RIG, Fraction(24), frames, step, keys=keys)


def test_frame_numbers_hold_both_ends() -> None:
    assert shot().numbers.tolist() == list(range(1, 26))
    assert shot(frames=(7, 7)).numbers.tolist() == [7.0]


def test_frame_numbers_are_the_floats_that_people_write() -> None:
    numbers = shot(frames=(0, 1), step=0.1).numbers
    assert numbers.tolist() == [0.0, 0.1, 0.2, 0.3, 0.4, 0.5, 0.6, 0.7, 0.8, 0.9, 1.0]


def test_linear_keys_are_straight_lines() -> None:
    given_keys = shot(Key(1, {"lift": 2.0}, ease="linear"), Key(5, {"lift": 6.0}))
    assert channels(given_keys, [1, 2, 2.5, 4, 5]).drives["lift"].tolist() == [2, 3, 3.5, 5, 6]


def test_hold_jumps_at_the_next_key_and_not_before() -> None:
    held = shot(Key(1, {"lift": 2.0}, ease="hold"), Key(5, {"lift": 6.0}))
    assert channels(held, [1, 4.999999, 5]).drives["lift"].tolist() == [2, 2, 6]


def test_first_and_last_values_hold_outside_the_keys() -> None:
    keys = shot(Key(3, {"lift": 2.0}, ease="linear"), Key(5, {"lift": 6.0}, ease="linear"))
    assert channels(keys, [-100, 2.9, 5.1, 1e9]).drives["lift"].tolist() == [2, 2, 6, 6]


def test_a_key_that_does_not_name_a_channel_leaves_it_alone() -> None:
    keys = shot(
        Key(1, {"lift": 0.0}, {"lip": (0.0, None)}, "linear"),
        Key(3, {}, {"lip": (None, 7.0)}, "hold"),
        Key(5, {"lift": 4.0}, {"lip": (8.0, 9.0)}, "linear"),
    )
    known = channels(keys, [1, 2, 3, 4, 5])
    assert known.drives["lift"].tolist() == [0, 1, 2, 3, 4]
    assert known.targets["lip"].tolist() == [[0, 7], [2, 7], [4, 7], [6, 7], [8, 9]]


def test_a_coordinate_without_a_key_is_free_in_every_frame() -> None:
    known = channels(shot(Key(1, target={"lip": (None, 2.0)})), [1, 9])
    np.testing.assert_array_equal(known.targets["lip"], [[np.nan, 2.0], [np.nan, 2.0]])


def test_frames_come_in_any_order_and_may_be_none() -> None:
    keys = shot(Key(1, {"lift": 0.0}, ease="linear"), Key(5, {"lift": 4.0}))
    assert channels(keys, [5, 1, 3]).drives["lift"].tolist() == [4, 0, 2]
    assert channels(keys, []).drives["lift"].shape == (0,)


def test_smooth_has_the_peaks_of_the_3_4_5_polynomial() -> None:
    # R. L. Norton, Cam Design and Manufacturing Handbook, table of peak factors (from memory):
    # velocity 1.8750, acceleration 5.7735 for a unit rise in unit time.
    u = np.linspace(0.0, 1.0, 20001)
    speed = np.gradient(smooth(u), u)
    assert speed.max() == pytest.approx(1.8750, abs=1e-6)
    assert np.gradient(speed, u)[2:-2].max() == pytest.approx(5.7735, abs=1e-4)


def test_smooth_starts_and_ends_at_rest_without_acceleration() -> None:
    h = 1e-4
    for end in (np.array([h]), np.array([1.0 - h])):
        left = min(abs(float(smooth(end)[0])), abs(1.0 - float(smooth(end)[0])))
        assert left < 10.1 * h**3


finite = st.floats(-1e6, 1e6)


@given(st.lists(st.tuples(finite, finite, st.sampled_from(EASES)), min_size=1, max_size=8,
                unique_by=lambda key: key[0]), st.lists(finite, max_size=30))
def test_values_stay_between_their_keys_and_meet_them(
    rows: list[tuple[float, float, str]], frames: list[float]
) -> None:
    rows.sort()
    keys = [Key(f, {"lift": v}, ease=next(e for e in EASES if e == name)) for f, v, name in rows]
    known = channels(shot(*keys), frames)
    values = [value for _, value, _ in rows]
    when = np.array([frame for frame, _, _ in rows])
    for frame, got in zip(frames, known.drives["lift"].tolist(), strict=True):
        k = int(np.searchsorted(when, frame, side="right"))
        around = values[max(k - 1, 0):k + 1]
        assert min(around) <= got <= max(around)
    assert channels(shot(*keys), when).drives["lift"].tolist() == values


def test_results_are_read_only_and_inputs_stay_their_owner_s() -> None:
    frames = np.array([1.0, 2.0])
    known = channels(shot(Key(1, {"lift": 0.0}, {"lip": (1.0, 2.0)})), frames)
    for array in (known.frames, known.drives["lift"], known.targets["lip"]):
        with pytest.raises(ValueError, match="read-only"):
            array[0] = 5.0
    frames[0] = 9.0
    assert known.frames[0] == 1.0


def test_shots_travel_to_other_processes() -> None:
    keys = shot(Key(1, {"lift": 0.0}, {"lip": (1.0, None)}))
    assert pickle.loads(pickle.dumps(keys)) == keys
    assert isinstance(pickle.loads(pickle.dumps(channels(keys, [1]))), Knowns)


def test_errors() -> None:
    with pytest.raises(BadInput, match=r"^frames: frames are finite numbers; got NaN or infinity$"):
        channels(shot(), [1.0, np.nan])
    odd = Key(3, {"lift": 0.0}, ease="bouncy")  # type: ignore[arg-type]
    with pytest.raises(BadInput, match=r'^key at frame 3: ease is one of linear, smooth, hold; '
                                       r'got "bouncy"$'):
        channels(shot(odd), [1.0])
