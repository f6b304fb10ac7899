"""The order of placing: what has a closed form, what is a block, what is surplus, what is loose.

Closed forms are elementary geometry. A plan is never wrong in silence: bodies are seen as bodies,
surplus lengths are checked and told, and whatever still moves is named.
"""

from __future__ import annotations

import math
from collections.abc import Mapping

import numpy as np
import pytest
from linkages import four_bar, slider_crank
from quadratics import conditions

import rigpose as rp
from rigpose.model.equations import Array
from rigpose.solve.plan import Plan
from rigpose.solve.planner import plan_for

PIN = {"pin": True}
ORIGIN = {"at": [0, 0], **PIN}


def plan(rig: rp.Rig, *drives: str, targets: tuple[tuple[str, int], ...] = ()) -> Plan:
    return plan_for(rig, frozenset(drives), frozenset(targets))


def closed(rig: rp.Rig, drives: dict[str, float], count: int,
           targets: dict[str, tuple[float | None, float | None]] | None = None) -> Array:
    """Poses of a rig without blocks, ``(n, n_joints, 2)``, as many as there must be."""
    wishes = {j: {"xy"[k]: x for k, x in enumerate(p) if x is not None}
              for j, p in (targets or {}).items()}
    found = rp.find_branches(rig, drives, wishes)
    asked = tuple((j, k) for j, p in (targets or {}).items()
                  for k, x in enumerate(p) if x is not None)
    assert not plan(rig, *drives, targets=asked).clusters
    assert (len(found), found.found) == (count, rp.Found.COMPLETE)
    poses: Array = found.positions[:, 0]
    c = conditions(rig, drives, targets)
    for pose in poses:
        assert np.abs(c.residual(pose.ravel()[c.free])).max(initial=0.0) < 1e-14
    return poses


def places(rig: rp.Rig, poses: Array, joint: str) -> set[tuple[float, float]]:
    return {(round(float(x), 9) + 0.0, round(float(y), 9) + 0.0)
            for x, y in poses[:, rig.index[joint]]}


# -- dyads of the plane ---------------------------------------------------------------------------
# Named by their joints from one placed part to the other, R turning and P sliding.

def test_rrr() -> None:
    poses = closed(four_bar(4, 3, 4, 3), {"input": 90.0}, 2)
    assert places(four_bar(4, 3, 4, 3), poses, "knee") == {(4, 3), (1.12, -0.84)}


def test_rrp() -> None:
    rig = slider_crank(3, 5)
    assert places(rig, closed(rig, {"input": 90.0}, 2), "block") == {(4, 0), (-4, 0)}


@pytest.mark.parametrize("offset", [0.0, 0.6])
def test_rpr(offset: float) -> None:
    """A lever whose slot passes the crank's tip at a distance of its own from the pivot."""
    rig = rp.make_rig(
        {"hub": ORIGIN, "pivot": {"at": [0, -2], **PIN}, "tip": [0, 1],
         "low": [offset, -1], "high": [offset, 3]},
        {"crank": ["hub", "tip"]}, plates={"lever": ["pivot", "low", "high"]},
        rails={"slot": {"joint": "tip", "along": ["low", "high"]}},
        cranks={"turn": {"turns": "crank", "about": "hub"}})
    for degrees in (90.0, 20.0, -75.0):
        t = math.radians(degrees)
        tip = np.array([math.cos(t), math.sin(t)])
        poses = closed(rig, {"turn": degrees}, 2)
        for pose in poses:
            low, high = pose[rig.index["low"]], pose[rig.index["high"]]
            along = (high - low) / np.linalg.norm(high - low)
            away = tip - (0, -2)
            # The pivot's distance from the slot is the offset, the rest of the way is along it.
            assert abs(along[0] * away[1] - along[1] * away[0]) == pytest.approx(offset, abs=1e-12)
            assert abs(along @ away) == pytest.approx(
                math.sqrt(away @ away - offset**2), abs=1e-12)


def yoke(lean: float = 90.0) -> rp.Rig:
    """A crank's tip in a slot that leans, on a body that slides along the ground's x axis."""
    c, s = math.cos(math.radians(lean)), math.sin(math.radians(lean))
    return rp.make_rig(
        {"hub": ORIGIN, "tip": [0.6, 0.8], "foot": [0.6 - 0.8 * c / s, 0],
         "heel": [3 + 0.6 - 0.8 * c / s, 0], "top": [0.6 + c, 0.8 + s], "low": [0.6 - c, 0.8 - s]},
        {"crank": ["hub", "tip"]}, plates={"yoke": ["foot", "heel", "top", "low"]},
        rails={"way_1": {"joint": "foot", "through": [0, 0], "direction": [1, 0]},
               "way_2": {"joint": "heel", "through": [0, 0], "direction": [1, 0]},
               "slot": {"joint": "tip", "along": ["low", "top"]}},
        cranks={"turn": {"turns": "crank", "about": "hub"}})


@pytest.mark.parametrize("lean", [90.0, 60.0])
def test_rpp(lean: float) -> None:
    """The slotted yoke: x = cos t - sin t / tan(lean). Turned over by half a turn it fits too."""
    rig = yoke(lean)
    for degrees in (10.0, 90.0, 200.0):
        t = math.radians(degrees)
        poses = closed(rig, {"turn": degrees}, 2)
        want = math.cos(t) - math.sin(t) / math.tan(math.radians(lean))
        assert poses[:, rig.index["foot"], 0] == pytest.approx([want, want], abs=1e-12)
        assert sorted(poses[:, rig.index["heel"], 0] - want) == pytest.approx([-3, 3])


def test_prp() -> None:
    """A joint where a turning slot crosses a fixed guide: y = x tan t, one way only."""
    rig = rp.make_rig(
        {"hub": ORIGIN, "end": [0.6, 0.8], "block": [1, 4 / 3]}, {"arm": ["hub", "end"]},
        rails={"guide": {"joint": "block", "through": [1, 0], "direction": [0, 1]},
               "slot": {"joint": "block", "along": ["hub", "end"]}},
        cranks={"turn": {"turns": "arm", "about": "hub"}})
    poses = closed(rig, {"turn": 30.0}, 1)
    assert poses[0, rig.index["block"]] == pytest.approx([1, math.tan(math.radians(30))])


def test_a_body_of_known_heading_on_two_rails() -> None:
    rig = rp.make_rig(
        {"x": [1.2, 0], "y": [0, 1.6]}, {"rod": ["x", "y"]},
        rails={"rx": {"joint": "x", "through": [0, 0], "direction": [1, 0]},
               "ry": {"joint": "y", "through": [0, 0], "direction": [0, 1]}},
        cranks={"turn": {"turns": "rod", "about": "x"}})
    poses = closed(rig, {"turn": 120.0}, 1)
    assert poses[0] == pytest.approx(np.array([[1, 0], [0, math.sqrt(3)]]))


def test_coordinates_asked_for_are_lines() -> None:
    rig = four_bar(4, 3, 4, 3)
    for axis, value in ((0, 1.8), (1, 2.4)):
        place = (value, None) if axis == 0 else (None, value)
        poses = closed(rig, {}, 4, {"tip": place})
        assert np.abs(poses[:, rig.index["tip"], axis] - value).max() < 1e-14


def test_a_whole_place_asked_for_and_read_off() -> None:
    rig = four_bar(4, 3, 4, 3)
    poses = closed(rig, {}, 2, {"tip": (0.0, 3.0)})
    assert places(rig, poses, "knee") == {(4, 3), (1.12, -0.84)}
    # Out of reach it is a result, not an exception.
    assert len(rp.find_branches(rig, targets={"tip": [0.0, 3.1]})) == 0


# -- bodies, blocks and what is surplus -----------------------------------------------------------

SQUARE = {"p": [0, 2], "q": [1, 2], "r": [1, 3], "s": [0, 3]}
BRACED = {"pq": ["p", "q"], "qr": ["q", "r"], "rs": ["r", "s"], "sp": ["s", "p"],
          "pr": ["p", "r"], "qs": ["q", "s"]}
LEGS = {"ap": ["a", "p"], "bq": ["b", "q"], "cs": ["c", "s"]}
FEET = {"a": ORIGIN, "b": {"at": [1.3, 0], **PIN}, "c": {"at": [-1, 1], **PIN}}


def braced(legs: int) -> rp.Rig:
    """A square with both braces on two or three bars."""
    held = dict(list(LEGS.items())[:legs])
    feet = dict(list(FEET.items())[:legs])
    return rp.make_rig({**feet, **SQUARE}, {**BRACED, **held},
                       cranks={"turn": {"turns": "ap", "about": "a"}})


def test_a_braced_square_on_two_bars_still_moves() -> None:
    """Eight bars for eight coordinates, and yet one is surplus and the square swings."""
    with pytest.raises(rp.BadInput, match="p, q, r, s still move; drive turn"):
        rp.find_branches(braced(2))


def test_a_braced_square_on_two_bars_that_is_driven() -> None:
    rig = braced(2)
    found = rp.find_branches(rig, {"turn": 90.0})
    assert (len(found), found.found) == (4, rp.Found.COMPLETE)
    assert len(found.redundant) == 1
    assert found.redundant < set(BRACED)
    assert rp.judge(rig, found.positions, found.size).worst()[0] < 1e-12


def test_of_a_surplus_set_the_last_in_the_file_gives_way() -> None:
    assert rp.find_branches(braced(2), {"turn": 90.0}).redundant == {"qs"}


def as_plates(shape: list[list[float]], names: list[str], lengths: dict[str, float],
              legs: dict[str, list[str]], feet: Mapping[str, object]) -> int:
    """How many poses a rigid body of this shape has on its legs."""
    rig = rp.make_rig({**feet, **{n: {} for n in names}},
                      {k: {"ends": v, "length": lengths[k]} for k, v in legs.items()},
                      plates={"body": {"joints": names, "shape": shape}})
    return len(rp.find_branches(rig))


def test_a_braced_square_on_three_bars_is_a_platform_of_either_hand() -> None:
    rig = braced(3)
    lengths = {b.name: b.length for b in rig.bones}
    found = rp.find_branches(rig)
    want = [as_plates([[s * x, y] for x, y in SQUARE.values()], list(SQUARE), lengths, LEGS, FEET)
            for s in (1, -1)]
    assert len(found) == sum(want) == 6
    assert rp.judge(rig, found.positions, found.size).worst()[0] < 1e-12


def test_a_block_tells_its_surplus_bar() -> None:
    assert len(rp.find_branches(braced(3)).redundant & set(BRACED)) == 1


TRIANGLES = {"u0": [0, 3], "u1": [1, 3.1], "u2": [.4, 3.9], "w0": [-.2, 5], "w1": [1.3, 5.2],
             "w2": [.5, 5.9]}
PRISM = {f"{n}{i}{j}": [f"{n}{i}", f"{n}{j}"] for n in "uw" for i, j in ((0, 1), (1, 2), (0, 2))}
PRISM |= {f"m{i}": [f"u{i}", f"w{i}"] for i in range(3)}
PRISM_LEGS = {"la": ["a", "u0"], "lb": ["b", "u1"], "lc": ["c", "w1"]}
PRISM_FEET = {"a": {"at": [-1, 0], **PIN}, "b": {"at": [1, 0], **PIN}, "c": {"at": [2, 1], **PIN}}


def floating_prism() -> rp.Rig:
    return rp.make_rig({**PRISM_FEET, **TRIANGLES}, {**PRISM, **PRISM_LEGS})


def test_a_floating_prism_on_three_bars_holds_its_lengths() -> None:
    """Sixteen shapes of the prism, four poses of each; the next test counts them so."""
    found = rp.find_branches(floating_prism())
    assert len(found) == 64
    assert rp.judge(found.rig, found.positions, found.size).worst()[0] < 1e-12
    flat = found.positions[:, 0].reshape(64, -1)
    apart = np.abs(flat[:, None] - flat[None]).max(axis=2)
    assert apart[~np.eye(64, dtype=bool)].min() > 1e-4


@pytest.mark.slow
def test_a_floating_prism_on_three_bars_has_the_poses_of_its_shapes() -> None:
    """As many as the prism's own shapes have, each taken as a plate on the three bars."""
    rig = floating_prism()
    lengths = {b.name: b.length for b in rig.bones}
    alone = rp.make_rig({n: {"at": at, "pin": n in ("u0", "u1")} for n, at in TRIANGLES.items()},
                        {k: v for k, v in PRISM.items() if k != "u01"})
    shapes = rp.find_branches(alone).positions[:, 0]
    held = ["u0", "u1", "w1"]
    want = [as_plates(s[[alone.index[j] for j in held]].tolist(), held, lengths, PRISM_LEGS,
                      PRISM_FEET) for s in shapes]
    assert want == [4] * 16
    assert len(rp.find_branches(rig)) == sum(want)


@pytest.mark.xfail(strict=True, reason="a floating prism is not condensed before it is placed")
def test_a_floating_prism_on_three_bars_is_two_small_blocks() -> None:
    assert max(len(c.joints) for c in plan(floating_prism()).clusters) <= 3


@pytest.mark.parametrize("cranks", [2, 3, 5])
def test_parallel_cranks_on_one_bar(cranks: int) -> None:
    """Any crank may be driven; all but two are surplus and check."""
    joints: dict[str, object] = {f"hub{k}": {"at": [1.3 * k, 0], **PIN} for k in range(cranks)}
    joints |= {f"pin{k}": [1.3 * k + 0.3, 0.4] for k in range(cranks)}
    bar = [f"pin{k}" for k in range(cranks)]
    more = {"plates": {"bar": bar}} if cranks > 2 else {}
    bones = {f"arm{k}": [f"hub{k}", f"pin{k}"] for k in range(cranks)}
    bones |= {"bar": bar} if cranks == 2 else {}
    for driven in range(cranks):
        rig = rp.make_rig(joints, bones, **more,
                          cranks={"turn": {"turns": f"arm{driven}", "about": f"hub{driven}"}})
        found = rp.find_branches(rig, {"turn": 70.0})
        assert len(found) == (2 if cranks == 2 else 1)
        assert len(found.redundant) == cranks - 2
        pins = found.positions[:, 0, cranks:]
        parallel = np.abs(pins - [[1.3 * k + .5 * math.cos(math.radians(70)),
                                   .5 * math.sin(math.radians(70))] for k in range(cranks)])
        assert parallel.max(axis=(1, 2)).min() < 1e-12


# -- rounded lengths ------------------------------------------------------------------------------

def rods(third: float, **more: object) -> rp.Rig:
    """Three wheels on one rod of bones; the last wheel's crank is off by ``third``."""
    joints: dict[str, object] = {f"hub{k}": {"at": [1.5 * k, 0], **PIN} for k in range(3)}
    joints |= {f"pin{k}": [1.5 * k, 0.5] for k in range(3)}
    return rp.make_rig(
        joints, {"arm0": {"ends": ["hub0", "pin0"], "length": 0.5},
                 "arm1": {"ends": ["hub1", "pin1"], "length": 0.5},
                 "arm2": {"ends": ["hub2", "pin2"], "length": 0.5 + third, **more}},
        plates={"rod": {"joints": ["pin0", "pin1", "pin2"], "shape": [[0, 0], [1.5, 0], [3, 0]]}},
        cranks={"turn": {"turns": "arm0", "about": "hub0"}})


def test_a_surplus_length_that_agrees_within_slack_is_only_measured() -> None:
    turn = np.linspace(20, 160, 141)
    found = rp.find_branches(rods(1e-6), {"turn": turn})
    assert len(found) == 1
    assert (found.state == rp.State.MET).all()
    motion = found.motion()
    assert motion.worst < 1e-12
    assert motion.worst_redundant == pytest.approx(1e-6 / found.size, rel=1e-3)
    assert found.redundant == {"arm2"}


def test_a_surplus_length_beyond_slack_prunes() -> None:
    assert len(rp.find_branches(rods(1e-4), {"turn": 70.0})) == 0
    # Play is slack for one bone.
    assert len(rp.find_branches(rods(1e-4, play=2e-4), {"turn": 70.0})) == 1


def test_a_rounded_coupling_rod_is_out_for_some_degrees_a_turn_and_then_turns_crossed() -> None:
    """A rod longer by 5e-4 than the way between equal cranks of 0.5 doesn't close where the
    cosine law says (q < b - c), and it never comes back to parallel by itself."""
    d, r, rod = 2.0, 0.5, 2.0005
    turn = np.linspace(0, 720, 7201)
    found = rp.find_branches(four_bar(d, r, rod, r), {"input": turn})
    q = np.sqrt(d * d + r * r - 2 * d * r * np.cos(np.radians(turn)))
    closes = q >= rod - r
    assert np.array_equal((found.state == rp.State.MET).all(axis=0), closes)
    assert 2 * 360 * (~closes).mean() == pytest.approx(2 * 2 * math.degrees(math.acos(
        (d * d + r * r - (rod - r) ** 2) / (2 * d * r))), abs=0.3)


# -- what a target can't do -----------------------------------------------------------------------

def test_a_target_along_which_its_joint_cannot_move_is_named() -> None:
    """The exact inversor's x is settled by its lengths; so is a block's height on a level rail."""
    rig = slider_crank(1, 3)
    found = rp.find_branches(rig, {"input": 40.0}, {"block": {"y": 0.0}})
    assert len(found) == 2
    assert any("target block.y: the joint can't move that way" in n for n in found.notes)
    with pytest.raises(rp.BadInput, match=r"block.y.*asks for a way that its joint can go"):
        rp.find_branches(rig, targets={"block": {"y": 0.0}})
    assert len(rp.find_branches(rig, {"input": 40.0}, {"block": {"y": 0.1}})) == 0


# -- groups and large rigs ------------------------------------------------------------------------

def ribs(count: int) -> rp.Rig:
    """Ribs of two dyads each, side by side."""
    joints: dict[str, object] = {}
    bones: dict[str, object] = {}
    for k in range(count):
        x = 3.0 * k
        joints |= {f"a{k}": {"at": [x, 0], **PIN}, f"b{k}": {"at": [x + 1, 0], **PIN},
                   f"c{k}": [x + .4, 1], f"d{k}": [x + 1.3, 1.8]}
        bones |= {f"{i}{j}{k}": [f"{i}{k}", f"{j}{k}"] for i, j in ("ac", "bc", "cd", "bd")}
    return rp.make_rig(joints, bones)


def test_eight_ribs_are_eight_groups_of_four() -> None:
    rig = ribs(8)
    found = rp.find_branches(rig)
    assert (found.count, len(found), found.found) == (4**8, 4096, rp.Found.BUDGET)
    assert found.groups == tuple((f"c{k}", f"d{k}") for k in range(8))
    assert found.choice.max() == 3
    # Nearest to rest first: the drawn pose leads.
    assert np.abs(found.positions[0, 0] - rp.find_rest(rig).positions).max() < 1e-9
    rest = rp.find_rest(rig).positions
    gaps = ((found.positions[:, 0] - rest) ** 2).sum(axis=(1, 2))
    assert (np.diff(gaps) > -1e-9).all()
    count = rp.count_branches(rig)
    assert (count.branches, count.groups) == (4**8, (4,) * 8)


def test_a_long_chain_of_dyads_keeps_its_lengths() -> None:
    """300 dyads, one on the other: rounding grows on the way and is taken back at the end."""
    rng = np.random.default_rng(4)
    joints: dict[str, object] = {"a0": ORIGIN, "b0": {"at": [0, 1], **PIN}}
    bones: dict[str, object] = {}
    for k in range(1, 301):
        joints |= {f"a{k}": [k + rng.uniform(-.2, .2), rng.uniform(-.2, .2)],
                   f"b{k}": [k + rng.uniform(-.2, .2), 1 + rng.uniform(-.2, .2)]}
        bones |= {f"l{k}": [f"a{k - 1}", f"a{k}"], f"x{k}": [f"b{k - 1}", f"a{k}"],
                  f"u{k}": [f"b{k - 1}", f"b{k}"], f"v{k}": [f"a{k}", f"b{k}"]}
    rig = rp.make_rig(joints, bones)
    one = rp.nearest_branch(rig)
    assert np.abs(one.positions[0, 0] - rp.find_rest(rig).positions).max() < 1e-6
    assert rp.judge(rig, one.positions, one.size).worst()[0] < 1e-12


def test_a_plan_is_made_once_for_a_rig_and_what_is_known() -> None:
    rig = four_bar(4, 3, 4, 3)
    assert plan(rig, "input") is plan(rig, "input")
    assert plan(rig, "input") is not plan(rig, "output")
