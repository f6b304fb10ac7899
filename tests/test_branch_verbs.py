"""The verbs on branches: stream, count, the nearest, all from one, flip, pick, names, mirrors.

Each is held against the whole list, or against what can be counted by hand.
"""

from __future__ import annotations

import itertools

import numpy as np
import pytest
from linkages import four_bar
from random_rigs import ONE_BY_ONE, PRUNED, random_case

import rigpose as rp
from rigpose.model.bends import measure_bends
from rigpose.model.equations import Array

PIN = {"pin": True}
ALL = rp.Budget(poses=1 << 20)


def ladder(rungs: int, seed: int = 0) -> rp.Rig:
    """Each joint hangs on the two before it: every choice turns over all that comes later."""
    rng = np.random.default_rng(seed)
    joints: dict[str, object] = {"a": {"at": [0, 0], **PIN}, "b": {"at": [1, 0], **PIN}}
    bones: dict[str, object] = {}
    names = ["a", "b"]
    for k in range(rungs):
        joints[f"k{k}"] = [.5 + .1 * rng.normal(), .8 * (k + 1)]
        bones |= {f"l{k}": [names[-2], f"k{k}"], f"r{k}": [names[-1], f"k{k}"]}
        names.append(f"k{k}")
    return rp.make_rig(joints, bones)


def ribs(count: int) -> rp.Rig:
    """Two dyads each, side by side: groups that share nothing."""
    joints: dict[str, object] = {}
    bones: dict[str, object] = {}
    for k in range(count):
        x = 3.0 * k
        joints |= {f"a{k}": {"at": [x, 0], **PIN}, f"b{k}": {"at": [x + 1, 0], **PIN},
                   f"c{k}": [x + .4 + .05 * k, 1], f"d{k}": [x + 1.3, 1.8]}
        bones |= {f"{i}{j}{k}": [f"{i}{k}", f"{j}{k}"] for i, j in ("ac", "bc", "cd", "bd")}
    return rp.make_rig(joints, bones)


def gaps(found: rp.Branches) -> Array:
    """Root mean square distances to rest, as fractions of the size."""
    away = found.positions[:, 0] - rp.find_rest(found.rig).positions
    out: Array = np.sqrt((away**2).sum(axis=2).mean(axis=1)) / found.size
    return out


def as_set(poses: Array) -> set[tuple[float, ...]]:
    return {tuple(p) for p in np.round(poses.reshape(len(poses), -1), 7) + 0.0}


# -- the list -------------------------------------------------------------------------------------

@pytest.mark.parametrize("seed", range(6))
def test_nearest_to_rest_first_and_the_same_each_time(seed: int) -> None:
    case = random_case(seed + 500, 4, PRUNED)
    found = rp.find_branches(case.rig, case.drives, case.wishes)
    assert (np.diff(gaps(found)) > -2e-9).all()
    again = rp.find_branches(case.rig, case.drives, case.wishes)
    assert np.array_equal(found.positions, again.positions)
    assert list(found.names) == list(again.names)


def test_equal_distances_are_in_the_order_of_their_names() -> None:
    """Without places at rest a four-bar's two poses are mirror images of a rest on the line."""
    rig = rp.make_rig({"a": {"at": [0, 0], **PIN}, "b": {"at": [2, 0], **PIN}, "c": [1, 0]},
                      {"ac": {"ends": ["a", "c"], "length": 1.5},
                       "bc": {"ends": ["b", "c"], "length": 1.5}})
    gap = gaps(rp.find_branches(rig))
    assert list(rp.find_branches(rig).names) in (["c:left", "c:right"], ["c:right", "c:left"])
    if gap[0] == pytest.approx(gap[1], abs=1e-9):
        assert list(rp.find_branches(rig).names) == ["c:left", "c:right"]


@pytest.mark.parametrize("most", [1, 10, 100])
def test_a_budget_cuts_and_says_so(most: int) -> None:
    whole = rp.find_branches(ladder(9))
    assert (len(whole), whole.found) == (512, rp.Found.COMPLETE)
    cut = rp.find_branches(ladder(9), budget=rp.Budget(poses=most))
    assert (len(cut), cut.found) == (most, rp.Found.BUDGET)
    assert as_set(cut.positions[:, 0]) <= as_set(whole.positions[:, 0])
    assert not cut.found.whole
    assert "stopped at a budget" in str(cut)


def test_a_watch_sees_the_work_and_can_stop_it() -> None:
    seen = []
    rp.find_branches(ribs(3), watch=lambda *a: seen.append(a))
    assert seen == [("groups", k, 3) for k in range(3)]
    stopped = rp.find_branches(ribs(3), watch=lambda what, done, total: done < 1)
    assert stopped.found is rp.Found.STOPPED


def test_what_was_stopped_claims_no_pose() -> None:
    stopped = rp.find_branches(ribs(3), watch=lambda what, done, total: done < 1)
    met = stopped.state == rp.State.MET
    assert np.isfinite(stopped.positions[met]).all()


# -- stream and count -----------------------------------------------------------------------------

def test_a_stream_brings_every_branch_once() -> None:
    rig = ladder(11)
    blocks = list(rp.stream_branches(rig))
    poses = np.concatenate([b.positions[:, 0] for b in blocks])
    assert len(poses) == 2**11 == len(as_set(poses))
    assert as_set(poses) == as_set(rp.find_branches(rig, budget=ALL).positions[:, 0])
    for block in blocks:
        assert (np.diff(gaps(block)) > -2e-9).all()
        assert rp.judge(rig, block.positions, block.size).worst()[0] < 1e-12


@pytest.mark.parametrize("seed", range(8))
def test_streams_counts_and_lists_agree(seed: int) -> None:
    case = random_case(seed + 600, 5, PRUNED)
    given = case.rig, case.drives, case.wishes
    found = rp.find_branches(*given, budget=ALL)
    streamed = [b.positions[:, 0] for b in rp.stream_branches(*given)]
    poses = np.concatenate(streamed) if streamed else np.zeros((0, *case.drawn.shape))
    assert as_set(poses) == as_set(found.positions[:, 0])
    count = rp.count_branches(*given)
    assert count.branches == len(found) == found.count
    assert int(np.prod(count.groups)) == count.branches
    assert len(count.how) == len(count.groups) == len(found.groups)


def test_a_large_stream_comes_in_blocks_and_can_be_stopped() -> None:
    rig = ladder(18)
    total, largest = 0, 0
    for block in rp.stream_branches(rig):
        total += len(block)
        largest = max(largest, len(block))
    assert total == 2**18
    assert largest <= 2**17
    seen = 0
    for block in rp.stream_branches(rig, watch=lambda what, done, count: done < 1):
        seen += len(block)
    assert 0 < seen < 2**18


def test_what_can_be_reflected_is_counted_without_a_list() -> None:
    """A branch of one pose doubles with each cut: 2^30 in no time, and no pose is held."""
    count = rp.count_branches(ladder(30))
    assert (count.branches, count.how) == (2**30, ("partial reflections",))
    assert count.found is rp.Found.COMPLETE


def test_what_cannot_be_reflected_is_enumerated_up_to_the_budget() -> None:
    """A bone across the last rungs keeps the two choices of one hand: half of all poses."""
    rig = ladder(8)
    rest = rp.find_rest(rig).positions
    names = rig.joint_names
    tied = rp.make_rig(
        {j.name: {"at": at.tolist(), "pin": j.pin} for j, at in zip(rig.joints, rest, strict=True)},
        {**{b.name: list(b.ends) for b in rig.bones}, "tie": [names[-4], names[-1]]})
    count = rp.count_branches(tied)
    assert count.how == ("enumerated",)
    assert count.branches == len(rp.find_branches(tied)) == 2**7
    cut = rp.count_branches(tied, budget=rp.Budget(poses=20))
    assert cut.found is rp.Found.BUDGET
    assert cut.branches >= 20


def test_where_nothing_assembles_every_verb_says_so() -> None:
    rig = four_bar(5, 1, 2, 1)
    assert len(rp.find_branches(rig, {"input": 0.0})) == 0
    assert rp.count_branches(rig, {"input": 0.0}).branches == 0
    assert list(rp.stream_branches(rig, {"input": 0.0})) == []
    assert len(rp.nearest_branch(rig, {"input": 0.0})) == 0
    with pytest.raises(rp.BadInput, match="one branch is picked first; got 0 branches; nothing"):
        rp.find_branches(rig, {"input": 0.0}).motion()


def test_one_pose_has_no_choice() -> None:
    """Everything hangs on what is known: one branch, called the only one."""
    rig = rp.make_rig({"a": {"at": [0, 0], **PIN}, "b": [1, 0]}, {"ab": ["a", "b"]},
                      cranks={"turn": {"turns": "ab", "about": "a"}})
    found = rp.find_branches(rig, {"turn": 30.0})
    assert (len(found), found.count, list(found.names)) == (1, 1, ["only"])
    assert rp.count_branches(rig, {"turn": 30.0}).branches == 1
    assert sum(len(b) for b in rp.stream_branches(rig, {"turn": 30.0})) == 1
    assert len(rp.nearest_branch(rig, {"turn": 30.0})) == 1


# -- the nearest ----------------------------------------------------------------------------------

@pytest.mark.parametrize("seed", range(6))
def test_the_nearest_branch_is_the_first_of_the_list(seed: int) -> None:
    case = random_case(seed + 700, 4, PRUNED)
    given = case.rig, case.drives, case.wishes
    found = rp.find_branches(*given)
    one = rp.nearest_branch(*given)
    assert len(one) == 1
    assert np.abs(one.positions[0] - found.positions[0]).max() < 1e-9 * found.size
    # Nearest to some joints' places instead: the last pose of the list finds itself.
    far = found.positions[-1, 0]
    near = {j: far[k] for k, j in enumerate(case.rig.joint_names)}
    back = rp.nearest_branch(*given, near=near)
    assert np.abs(back.positions[0, 0] - far).max() < 1e-9 * found.size


def test_the_nearest_of_a_million_branches_is_found_without_a_list() -> None:
    rig = ladder(20)
    one = rp.nearest_branch(rig)
    assert np.abs(one.positions[0, 0] - rp.find_rest(rig).positions).max() < 1e-9
    assert rp.judge(rig, one.positions, one.size).worst()[0] < 1e-12


def test_the_nearest_is_nearest_for_one_joint() -> None:
    rig = ladder(9)
    whole = rp.find_branches(rig).positions[:, 0]
    for goal in ([0.0, -3.0], [4.0, 1.0], [-1.0, 0.5]):
        one = rp.nearest_branch(rig, near={"k8": goal}).positions[0, 0]
        away = np.linalg.norm(whole[:, -1] - goal, axis=1)
        assert np.linalg.norm(one[-1] - goal) == pytest.approx(away.min(), abs=1e-9)


def test_a_near_place_of_an_unknown_joint_is_refused() -> None:
    with pytest.raises(rp.BadInput, match='near "k99": names a joint; got "k99"'):
        rp.nearest_branch(ladder(3), near={"k99": [0, 0]})


# -- all from one, and one bend over --------------------------------------------------------------

@pytest.mark.parametrize("seed", range(4))
def test_all_branches_come_from_one_by_reflections(seed: int) -> None:
    rig = ladder(6, seed)
    found = rp.find_branches(rig)
    for k in (0, len(found) // 2, len(found) - 1):
        again = rp.branches_from_one(found.pick(k))
        assert as_set(again.positions[:, 0]) == as_set(found.positions[:, 0])
        assert list(again.names) == list(found.names)
        assert rp.judge(rig, again.positions, again.size).worst()[0] < 1e-12


def test_what_cannot_come_from_one_is_refused() -> None:
    found = rp.find_branches(ladder(4))
    with pytest.raises(rp.BadInput, match="one branch of one frame; got 16 branches"):
        rp.branches_from_one(found)
    with pytest.raises(rp.BadInput, match="at most 8 branches are held; got 16; raise"):
        rp.branches_from_one(found.pick(0), rp.Budget(poses=8))
    driven = rp.find_branches(four_bar(4, 3, 4, 3), {"input": np.linspace(0, 9, 4)})
    with pytest.raises(rp.BadInput, match="1 branches over 4 frames"):
        rp.branches_from_one(driven.pick(0))


def test_flip_turns_one_bend_and_keeps_the_others() -> None:
    found = rp.find_branches(ladder(6))
    for branch, joint in itertools.product((0, 17, 40), ("k0", "k3", "k5")):
        before = found.names.bends(branch)
        over = rp.flip(found, branch, joint)
        after = over.names.bends(0)
        assert {j for j in before if before[j] != after[j]} == {joint}
        back = rp.flip(found, over.names[0], joint)
        assert np.array_equal(back.positions[0], found.positions[branch])


def test_what_cannot_be_flipped_is_refused() -> None:
    found = rp.find_branches(ladder(3))
    with pytest.raises(rp.BadInput, match='joint "a": has a bend; got none; joints with bends are'):
        rp.flip(found, 0, "a")
    # A coupler's plate ties two bends together: the one can't turn over without the other.
    case = random_case(3, 2, ONE_BY_ONE)
    rows = rp.find_branches(case.rig, case.drives, case.wishes)
    bends = [rows.names.bends(k) for k in range(len(rows))]
    for k, joint in itertools.product(range(len(rows)), bends[0]):
        other = [b for b in bends if {j for j in b if b[j] != bends[k][j]} == {joint}]
        if other:
            assert rp.flip(rows, k, joint).names.bends(0) in other
        else:
            with pytest.raises(rp.BadInput, match="can bend the other way with all else kept"):
                rp.flip(rows, k, joint)


# -- names and picks ------------------------------------------------------------------------------

@pytest.mark.parametrize("seed", range(10))
def test_names_tell_all_branches_apart_and_find_them_again(seed: int) -> None:
    case = random_case(seed + 800, 4, PRUNED)
    found = rp.find_branches(case.rig, case.drives, case.wishes)
    names = list(found.names)
    assert len(set(names)) == len(names)
    assert np.array_equal(found.signs, measure_bends(case.rig, found.positions[:, 0]))
    for k, name in enumerate(names):
        assert np.array_equal(found.pick(name).positions, found.positions[k:k + 1])
        assert np.array_equal(found.pick(k).positions, found.positions[k:k + 1])
        assert list(found.take([k]).names) == [name]
        words = found.names.bends(k)
        fitting = found.fitting({j: w for j, w in words.items() if w != "straight"})
        assert k in fitting
        # What the name tells is true of the pose.
        for word in name.split(" "):
            if ":" in word:
                joint, side = word.rsplit(":", 1)
                assert words[joint] == side


def test_bends_are_measured_as_they_are_told() -> None:
    """Left of the line from the first to the second joint that it is tied to; on a rail before or
    after the foot of the perpendicular."""
    found = rp.find_branches(four_bar(4, 3, 4, 3), {"input": 90.0})
    for k, name in enumerate(found.names):
        left, right, tip, knee = found.positions[k, 0]
        cross = np.linalg.det(np.array([right - tip, knee - tip]))
        assert name == f"knee:{'left' if cross > 0 else 'right'}"
        turn = np.linalg.det(np.array([knee - left, tip - left]))
        assert found.names.bends(k)["tip"] == ("left" if turn > 0 else "right")
    slider = rp.make_rig(
        {"hub": {"at": [0, 0], **PIN}, "tip": [0, 1], "block": [2, 0]},
        {"crank": ["hub", "tip"], "rod": ["tip", "block"]},
        rails={"way": {"joint": "block", "through": [0, 0], "direction": [1, 0]}},
        cranks={"turn": {"turns": "crank", "about": "hub"}})
    found = rp.find_branches(slider, {"turn": 60.0})
    foot = found.positions[0, 0, 1, 0]
    for k, name in enumerate(found.names):
        assert name == f"block:{'after' if found.positions[k, 0, 2, 0] > foot else 'before'}"


def test_picks() -> None:
    rig = rp.make_rig(
        {"a": {"at": [0, 0], **PIN}, "b": {"at": [2, 0], **PIN}, "c": [1, 1], "d": [2.2, 1.5]},
        {"ac": ["a", "c"], "bc": ["b", "c"], "cd": ["c", "d"], "bd": ["b", "d"]},
        branches={"both up": {"c": "left", "d": "left"}, "down": {"c": "right"}})
    found = rp.find_branches(rig)
    assert len(found) == 4
    assert len(found.pick(c="left")) == 2
    assert found.pick("both up").names[0] == "c:left d:left"
    assert len(found.pick("down")) == 2
    assert len(found.pick("down", d="left")) == 1
    assert np.array_equal(found.pick(-1).positions[0], found.positions[3])
    assert [len(one) for one in found] == [1, 1, 1, 1]
    with pytest.raises(IndexError):
        found.pick(4)
    with pytest.raises(rp.BadInput, match=r'branch "e": names a joint that has a bend; got "e"'):
        found.pick(e="left")
    with pytest.raises(rp.BadInput, match='branch "c": is one of left, right, straight; got "up"'):
        found.pick(c="up")
    with pytest.raises(rp.BadInput, match='branch "left": there is one of this name; got none'):
        found.pick("left")
    with pytest.raises(rp.BadInput, match="some branch has these bends"):
        found.pick(c="straight")
    with pytest.raises(rp.BadInput, match=r"one branch is picked first; got 2 .*use pick"):
        found.pick(c="left").motion()


def test_branches_that_share_all_bends_are_counted_by_distance() -> None:
    """Two poses of a platform that no bend tells apart get #1 and #2, the nearer first."""
    base = [(0, 0), (15.91, 0), (0, 10)]
    deck = np.array([[0, 0], [17.04, 0],
                     [20.84 * np.cos(.8822603), 20.84 * np.sin(.8822603)]])
    rig = rp.make_rig(
        {f"A{k}": {"at": base[k], **PIN} for k in range(3)} | {f"B{k}": {} for k in range(3)},
        {f"leg{k}": {"ends": [f"A{k}", f"B{k}"], "length": length}
         for k, length in enumerate((14.98, 15.38, 12.0))},
        plates={"deck": {"joints": ["B0", "B1", "B2"], "shape": deck}})
    found = rp.find_branches(rig)
    counted = [n for n in found.names if "#" in n]
    assert len(counted) >= 2
    alike: dict[str, list[int]] = {}
    for name in counted:
        head, number = name.rsplit(" #", 1)
        alike.setdefault(head, []).append(int(number))
    assert all(numbers == list(range(1, len(numbers) + 1)) for numbers in alike.values())
    signs = {tuple(s) for s in found.signs}
    assert len(signs) == len(found) - len(counted) + len(alike)


# -- mirrors --------------------------------------------------------------------------------------

def test_mirror_images_are_told_and_can_be_left_out() -> None:
    found = rp.find_branches(ladder(5))
    for k, other in enumerate(found.mirror_of):
        assert other is not None
        assert found.mirror_of[other] == k
        flipped = found.positions[k, 0] * (1, -1)
        assert np.abs(found.positions[other, 0] - flipped).max() < 1e-8
        assert np.array_equal(found.signs[other], -found.signs[k])
    once = rp.find_branches(ladder(5), mirrors=False)
    assert len(once) == 16
    both = np.concatenate([once.positions[:, 0], once.positions[:, 0] * (1, -1)])
    assert as_set(both) == as_set(found.positions[:, 0])
    # Of two images the nearer to rest is kept.
    assert np.array_equal(once.positions[0], found.positions[0])


def test_an_angle_or_a_third_pin_leaves_no_mirror_image() -> None:
    driven = rp.find_branches(four_bar(4, 3, 4, 3), {"input": 70.0})
    assert driven.mirror_of == (None, None)
    assert len(rp.find_branches(four_bar(4, 3, 4, 3), {"input": 70.0}, mirrors=False)) == 2
    # A handed plate off the line has no image either, though the pins are on it.
    rig = rp.make_rig(
        {"a": {"at": [0, 0], **PIN}, "b": {"at": [3, 0], **PIN}, "c": [.5, 1], "d": [2.5, 1.2],
         "e": [1.5, 2]},
        {"ac": ["a", "c"], "bd": ["b", "d"]}, plates={"coupler": ["c", "d", "e"]})
    found = rp.find_branches(rig, targets={"c": {"x": 0.5}})
    assert len(found) > 0
    assert all(k is None for k in found.mirror_of)


# -- groups ---------------------------------------------------------------------------------------

def test_groups_are_chosen_for_themselves() -> None:
    found = rp.find_branches(ribs(3))
    assert (len(found), found.count) == (64, 64)
    assert found.groups == (("c0", "d0"), ("c1", "d1"), ("c2", "d2"))
    assert {tuple(c) for c in found.choice} == set(itertools.product(range(4), repeat=3))
    for g, joints in enumerate(found.groups):
        at = [found.rig.index[j] for j in joints]
        for choice in range(4):
            mine = found.positions[found.choice[:, g] == choice][:, 0, at]
            assert np.abs(mine - mine[0]).max() == 0.0
    assert len(found.pick(c0="left", d0="left")) == 16


def test_a_set_says_what_it_is() -> None:
    found = rp.find_branches(ladder(5))
    lines = str(found).splitlines()
    assert lines[0] == "rig: 32 branches, complete"
    assert lines[1].strip().startswith("1. ")
    assert lines[-1].strip() == "… and 12 more"
    moving = rp.find_branches(four_bar(4, 3, 4, 3), {"input": [0.0, 1.0]})
    assert str(moving).splitlines()[0] == "rig: 2 branches over 2 frames, complete"
