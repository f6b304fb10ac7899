"""Why a set of branches is empty, in words; the amounts follow from the triangle inequality."""

from __future__ import annotations

import math

import numpy as np
import pytest
from linkages import PIN, four_bar, slider_crank

import rigpose as rp
from rigpose.motion.why import why_nothing


@pytest.mark.parametrize(("degrees", "short"), [
    (0.0, 2.0), (180.0, 6.0), (90.0, math.hypot(10, 2) - 6), ([0.0, 90.0, 180.0], 6.0)])
def test_two_bones_too_short_for_what_is_between_them(degrees: float | list[float],
                                                      short: float) -> None:
    # From tip to right it is 8 with the crank along the frame, 12 away from it; the bones reach 6.
    found = rp.find_branches(four_bar(10, 2, 3, 3), {"input": np.array(degrees)})
    assert len(found) == 0
    assert why_nothing(found) == (
        f'"follower" and "coupler" can\'t meet at "knee", by up to {short:.4g} m',)


def test_a_bone_too_long_for_the_others() -> None:
    # Circles of 1 and 8 about points that lie 1 apart: one lies inside the other, 6 from it.
    found = rp.find_branches(four_bar(3, 2, 1, 8), {"input": 0.0})
    assert why_nothing(found) == (
        '"follower" and "coupler" can\'t meet at "knee", by up to 6 m',)


def test_a_rod_too_short_for_its_guide() -> None:
    found = rp.find_branches(slider_crank(1, 1, 4), {"input": 90.0})
    assert why_nothing(found) == ('"guide" and "rod" can\'t meet at "block", by up to 2 m',)


def test_each_way_may_fail_by_an_amount_of_its_own() -> None:
    # The knee lies at (4, 3) or (4, -3), so 4 or 10 from the beacon; strut and stay reach 3.5.
    rig = rp.make_rig(
        {"left": {"at": [0, 0], **PIN}, "right": {"at": [8, 0], **PIN},
         "beacon": {"at": [4, 7], **PIN}, "knee": {}, "lamp": {}},
        {"mast": {"ends": ["left", "knee"], "length": 5},
         "boom": {"ends": ["right", "knee"], "length": 5},
         "strut": {"ends": ["knee", "lamp"], "length": 1.5},
         "stay": {"ends": ["beacon", "lamp"], "length": 2}})
    found = rp.find_branches(rig)
    assert len(found) == 0
    assert set(why_nothing(found)) == {
        '"stay" and "strut" can\'t meet at "lamp", by up to 0.5 m',
        '"stay" and "strut" can\'t meet at "lamp", by up to 6.5 m'}


def test_a_set_that_has_branches_needs_no_reason() -> None:
    assert why_nothing(rp.find_branches(four_bar(10, 2, 8, 6), {"input": 90.0})) == ()
