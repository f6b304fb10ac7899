"""How many assemblies: published counts of structures, each against the solver's list.

Bounds of complex counts are met by real examples or not passed by random ones. Counts include
mirror images wherever two pins alone hold the rig.
"""

from __future__ import annotations

import cmath
import itertools
from collections.abc import Mapping, Sequence
from fractions import Fraction

import numpy as np
import pytest
from linkages import four_bar

import rigpose as rp
from rigpose.model.equations import Array

PIN = {"pin": True}


def framework(lengths: Mapping[tuple[int, int], float], ground: tuple[int, int]) -> rp.Rig:
    """Bars only; the two ends of one of them are pinned, the first at the origin."""
    joints: dict[str, object] = {f"v{k}": {} for k in sorted({k for e in lengths for k in e})}
    joints[f"v{ground[0]}"] = {"at": [0, 0], **PIN}
    joints[f"v{ground[1]}"] = {"at": [lengths[ground], 0], **PIN}
    return rp.make_rig(joints, {
        f"e{i}_{j}": {"ends": [f"v{i}", f"v{j}"], "length": length}
        for (i, j), length in lengths.items() if (i, j) != ground})


def holds(found: rp.Branches) -> None:
    """Every length holds, and no branch is there twice."""
    verdict = rp.judge(found.rig, found.positions, found.size)
    assert verdict.worst()[0] < 1e-12
    for a, b in itertools.combinations(found.positions[:, 0], 2):
        assert np.abs(a - b).max() > 1e-6 * found.size


# -- one by one: dyads ----------------------------------------------------------------------------

def dyads(n: int, seed: int) -> tuple[dict[tuple[int, int], float], list[tuple[int, int]]]:
    """A random graph in which each joint after the first two hangs on two earlier ones."""
    rng = np.random.default_rng(seed)
    places = rng.uniform(-1, 1, (n, 2))
    edges, parents = [(0, 1)], []
    for k in range(2, n):
        a, b = sorted(rng.choice(k, 2, replace=False).tolist())
        parents.append((a, b))
        edges += [(a, k), (b, k)]
    return {(i, j): float(np.linalg.norm(places[i] - places[j])) for i, j in edges}, parents


def placed_by_hand(lengths: Mapping[tuple[int, int], float],
                   parents: Sequence[tuple[int, int]]) -> list[list[complex]]:
    """All poses of a graph of dyads, circle by circle in complex numbers."""
    poses = [[0j, complex(lengths[0, 1])]]
    for k, (a, b) in enumerate(parents, 2):
        p, q = lengths[a, k], lengths[b, k]
        longer = []
        for pose in poses:
            d = pose[b] - pose[a]
            x = (p * p - q * q + abs(d) ** 2) / (2 * abs(d))
            if p * p - x * x < 0:
                continue
            h = cmath.sqrt(p * p - x * x)
            longer += [[*pose, pose[a] + d / abs(d) * (x + s * 1j * h)] for s in (1, -1)]
        poses = longer
    return poses


@pytest.mark.parametrize("seed", range(12))
def test_graphs_of_dyads_have_the_poses_that_circles_give(seed: int) -> None:
    """At most 2^(n - 2), two ways for each joint (elementary)."""
    n = 4 + seed % 6
    lengths, parents = dyads(n, seed)
    want = np.array(placed_by_hand(lengths, parents))
    found = rp.find_branches(framework(lengths, (0, 1)))
    got = found.positions[:, 0, :, 0] + 1j * found.positions[:, 0, :, 1]
    assert found.found is rp.Found.COMPLETE
    assert len(got) == len(want) <= 2 ** (n - 2)
    apart = np.abs(got[:, None] - want[None]).max(axis=2)
    assert apart.min(axis=0).max() < 1e-9
    assert apart.min(axis=1).max() < 1e-9
    count = rp.count_branches(framework(lengths, (0, 1)))
    assert (count.branches, count.found) == (len(want), rp.Found.COMPLETE)
    # Both pins lie on one line: each branch has its mirror image among the others.
    other = found.mirror_of
    assert sorted(k for k in other if k is not None) == list(range(len(found)))
    assert all(found.positions[a, 0, :, 1] == pytest.approx(-found.positions[b, 0, :, 1], abs=1e-8)
               for a, b in enumerate(other) if b is not None)


# -- blocks: prism and K3,3 -----------------------------------------------------------------------

PRISM = {(1, 2): 2.0, (1, 3): 2.0, (2, 3): 2.0, (1, 4): 7 / 4, (3, 6): 27 / 10, (2, 5): 197 / 100,
         (4, 5): 11 / 5, (4, 6): 29 / 10, (5, 6): 43 / 20}
PRISM_CLASSES = [
    (.494278, 1.966905), (.495396, 2.331616), (.533860, 2.403136), (.851798, 1.538405),
    (1.181414, 1.294018), (1.204294, 1.280842), (1.488771, 1.167052), (2.464476, 4.136034),
    (3.331300, 2.741545), (3.632230, 4.649878), (3.895568, 3.936853), (3.936252, 4.414656)]
"""Distances of joints 1 and 5, 1 and 6 in the twelve assemblies but for mirror images (worked
out again by polynomial homotopy)."""


def test_a_prism_with_all_its_24_assemblies_real() -> None:
    """Lengths: C. Koutschan, koutschan.de/data/laman; 24 is the most of six joints (OEIS A306420;
    Capco, Gallet, Grasegger, Koutschan, Lubbes, Schicho 2018)."""
    found = rp.find_branches(framework(PRISM, (1, 2)))
    assert (len(found), found.found) == (24, rp.Found.PROBABLY)
    holds(found)
    p = found.positions[:, 0]
    gaps = np.stack([np.linalg.norm(p[:, 0] - p[:, k], axis=1) for k in (4, 5)], axis=1)
    apart = np.abs(gaps[:, None] - np.array(PRISM_CLASSES)[None]).max(axis=2)
    assert apart.min(axis=1).max() < 1e-6
    # Each class twice: a pose and its mirror image.
    assert np.bincount(apart.argmin(axis=1)).tolist() == [2] * 12
    assert sorted(k for k in found.mirror_of if k is not None) == list(range(24))


K33 = [(i, j) for i in range(3) for j in range(3, 6)]


def test_a_k33_with_all_its_16_assemblies_real() -> None:
    """At most 16 (Wunderlich 1977; Walter and Husty 2007, from memory). These lengths are ours."""
    lengths = dict(zip(K33, (.8, 1.5, .7, .7, 1.2, .9, 1.5, 2.3, 1.0), strict=True))
    found = rp.find_branches(framework(lengths, (0, 3)))
    assert (len(found), found.found) == (16, rp.Found.PROBABLY)
    holds(found)
    assert sorted(k for k in found.mirror_of if k is not None) == list(range(16))


@pytest.mark.parametrize("seed", range(5))
def test_random_k33s_have_0_4_8_12_or_16_assemblies(seed: int) -> None:
    """Counts met by random lengths to one decimal (worked out again by homotopy)."""
    rng = np.random.default_rng(seed)
    lengths = dict(zip(K33, np.round(rng.uniform(.6, 2.4, 9), 1).tolist(), strict=True))
    found = rp.find_branches(framework(lengths, (0, 3)))
    assert len(found) in (0, 4, 8, 12, 16)
    if len(found):
        holds(found)


# -- platform on three legs -----------------------------------------------------------------------

BASE = np.array([[0, 0], [15.91, 0], [0, 10]])
DECK = np.array([[0, 0], [17.04, 0], [20.84 * np.cos(.8822603), 20.84 * np.sin(.8822603)]])
LEGS = (14.98, 15.38, 12.0)
ASSEMBLIES = [  # direction of B1 B2 in degrees, and B1
    (-56.55304, -8.725713, 12.176302), (-2.71453, -5.503869, -13.932259),
    (14.02877, -14.894325, 1.599836), (33.62319, -13.409719, -6.676812),
    (57.43211, 14.920129, -1.337966), (122.22219, 14.673669, -3.013943)]
MIRRORED = [(-120.26654, 14.704690, 2.858755), (-117.05914, 8.553068, 12.298188)]


def platform(deck: str, legs: str = "bones") -> rp.Rig:
    """Three legs as bones or rams; the deck as a plate or as three bars."""
    joints: dict[str, object] = {f"A{k}": {"at": BASE[k], **PIN} for k in range(3)}
    joints |= {f"B{k}": {} for k in range(3)}
    ends = {f"leg{k}": {"ends": [f"A{k}", f"B{k}"]} for k in range(3)}
    sections: dict[str, dict[str, object]] = {"bones": {}, "rams": {}, "plates": {}}
    sections[legs] = {n: {**e, **({"length": LEGS[k]} if legs == "bones" else {})}
                      for k, (n, e) in enumerate(ends.items())}
    if deck == "plate":
        sections["plates"] = {"deck": {"joints": ["B0", "B1", "B2"], "shape": DECK}}
    else:
        sections["bones"] |= {
            f"side{i}{j}": {"ends": [f"B{i}", f"B{j}"],
                            "length": float(np.linalg.norm(DECK[i] - DECK[j]))}
            for i, j in ((0, 1), (0, 2), (1, 2))}
    return rp.make_rig(joints, **{k: v for k, v in sections.items() if v})


def stances(found: rp.Branches) -> Array:
    """``(n_branches, 3)``: direction of B1 B2 in degrees, and B1."""
    p = found.positions[:, 0, 3:]
    way = p[:, 1] - p[:, 0]
    return np.column_stack([np.degrees(np.arctan2(way[:, 1], way[:, 0])), p[:, 0]])


@pytest.mark.parametrize(("deck", "want"), [
    ("plate", ASSEMBLIES), ("bars", ASSEMBLIES + MIRRORED)])
def test_a_platform_on_three_legs(deck: str, want: list[tuple[float, float, float]]) -> None:
    """Innocenti and Parenti-Castelli 1992; Merlet 1996; McAree and Daniel 1999 (data from
    memory, worked out again): six assemblies, and two more if the deck may turn over."""
    found = rp.find_branches(platform(deck))
    got = stances(found)
    assert len(got) == len(want)
    apart = np.abs(got[:, None] - np.array(want)[None])
    match = (apart < (6e-6, 6e-7, 6e-7)).all(axis=2)
    assert (match.sum(axis=0) == 1).all()
    assert (match.sum(axis=1) == 1).all()
    holds(found)


@pytest.mark.parametrize("seed", range(5))
def test_no_platform_has_more_than_six_assemblies(seed: int) -> None:
    """A circle meets a coupler's curve in six points at most (S. Roberts 1875, from memory)."""
    rng = np.random.default_rng(seed)
    a, deck = rng.uniform(-2, 2, (3, 2)), rng.uniform(-1, 1, (3, 2))
    turn = rng.uniform(0, 2 * np.pi)
    c, s = np.cos(turn), np.sin(turn)
    b = deck @ np.array([[c, s], [-s, c]]) + rng.uniform(-2, 2, 2)
    joints = {f"A{k}": {"at": a[k], **PIN} for k in range(3)} | {f"B{k}": b[k] for k in range(3)}
    found = rp.find_branches(rp.make_rig(
        joints, {f"leg{k}": [f"A{k}", f"B{k}"] for k in range(3)},
        plates={"deck": ["B0", "B1", "B2"]}))
    assert 2 <= len(found) <= 6
    assert len(found) % 2 == 0
    assert np.abs(found.positions[:, 0, 3:] - b).max(axis=(1, 2)).min() < 1e-9
    holds(found)


def test_legs_that_come_back_may_find_another_assembly() -> None:
    """A closed loop of leg lengths without a dead centre takes the fifth assembly to the fourth
    (worked out again): the row follows the mechanism, not the lengths."""
    from5, to4 = ASSEMBLIES[4], ASSEMBLIES[3]
    stops = np.array([[from5[1], from5[2], np.radians(from5[0])], [-14.9, 13.5, 2.6],
                      [to4[1], to4[2], np.radians(to4[0])]])
    t = np.linspace(0, 2, 161)
    x, y, turn = (np.interp(t, [0, 1, 2], stops[:, k]) for k in range(3))
    c, s = np.cos(turn), np.sin(turn)
    deck = np.stack([np.stack([x + c * b[0] - s * b[1], y + s * b[0] + c * b[1]], axis=1)
                     for b in DECK])
    legs = {f"leg{k}": np.linalg.norm(deck[k] - BASE[k], axis=1) for k in range(3)}
    assert [legs[f"leg{k}"][end] for end in (0, -1) for k in range(3)] == pytest.approx(
        [*LEGS, *LEGS], abs=3e-6)
    shot = rp.Shot(
        "legs", platform("plate", "rams"), Fraction(24), (0, 160), near={"B0": from5[1:]},
        keys=tuple(rp.Key(f, {leg: float(v[f]) for leg, v in legs.items()}, ease="linear")
                   for f in range(161)))
    motion = rp.bake(shot)
    assert motion.ok, motion.note()
    assert motion.margin.min() > 1e-3
    assert np.abs(motion.positions[:, 3:] - deck.transpose(1, 0, 2)).max() < 1e-9 * motion.size
    b = motion.positions[-1, 3:]
    got = (np.degrees(np.arctan2(*(b[1] - b[0])[::-1])), *b[0])
    assert got == pytest.approx(to4, abs=2e-5)


def test_a_crank_that_comes_round_may_find_another_assembly() -> None:
    """A Stephenson III six-bar ends a full turn of its crank in another pose (worked out again)."""
    centre, radius = (-1.76, -0.891), 1.078
    deck = np.array([[0, 0], [-0.685, 0.08], [-1.292, -1.83]])
    legs = (2.192, 1.643, 3.826)
    rig = rp.make_rig(
        {"hub": {"at": centre, **PIN}, "west": {"at": [0, 0], **PIN},
         "east": {"at": [2.781, 0], **PIN}, "tip": {}, "P": {}, "Q": {}, "R": {}},
        {"crank": {"ends": ["hub", "tip"], "length": radius},
         "leg1": {"ends": ["tip", "P"], "length": legs[0]},
         "leg2": {"ends": ["west", "Q"], "length": legs[1]},
         "leg3": {"ends": ["east", "R"], "length": legs[2]}},
        plates={"deck": {"joints": ["P", "Q", "R"], "shape": deck}},
        cranks={"turn": {"turns": "crank", "about": "hub"}})

    def pose(x: float, y: float, turn: float) -> Array:
        c, s = np.cos(turn), np.sin(turn)
        placed: Array = deck @ np.array([[c, s], [-s, c]]) + (x, y)
        return placed

    start, end = pose(1.109057, 0.372716, -1.688621), pose(-2.228925, 0.662025, -3.437894)
    shot = rp.Shot(
        "one turn", rig, Fraction(24), (0, 120), near={"P": start[0], "R": start[2]},
        keys=(rp.Key(0, {"turn": 0.0}, ease="linear"), rp.Key(120, {"turn": 360.0})))
    motion = rp.bake(shot)
    assert motion.ok, motion.note()
    assert motion.margin.min() > 0.1
    assert np.abs(motion.positions[0, 4:] - start).max() < 1e-5
    assert np.abs(motion.positions[-1, 4:] - end).max() < 1e-5


# -- six-bars with one joint locked ---------------------------------------------------------------

WATT = {"T1": "abc", "T2": "ade", "B1": "bf", "B2": "fd", "B3": "cg", "B4": "ge"}
STEPHENSON = {"T1": "pqr", "T2": "stu", "B1": "ps", "B2": "qt", "B3": "rv", "B4": "vu"}
WATT_JOINTS = dict.fromkeys("abcdefg", 4)
STEPHENSON_JOINTS = dict.fromkeys("pqst", 4) | dict.fromkeys("ruv", 6)


def locked(chain: Mapping[str, str], joint: str, seed: int) -> tuple[rp.Rig, dict[str, float]]:
    """The chain drawn at random on the ground of its first link, one joint's angle driven."""
    rng = np.random.default_rng(seed)
    places = {j: rng.uniform(-1, 1, 2) for j in sorted(set("".join(chain.values())))}
    one, two = (link for link, joints in chain.items() if joint in joints)
    ground = chain["T1"][:2]
    lines = {link: [joint, next(j for j in chain[link] if j != joint)] for link in (one, two)}
    ways = {link: places[b] - places[a] for link, (a, b) in lines.items()}
    turn = np.degrees(np.arctan2(*ways[two][::-1]) - np.arctan2(*ways[one][::-1]))
    told = {"line": lines[two]} if len(chain[two]) == 3 else {}
    told |= {"from_line": lines[one]} if len(chain[one]) == 3 else {}
    rig = rp.make_rig(
        {j: {"at": at, "pin": j in ground} for j, at in places.items()},
        bones={n: list(js) for n, js in chain.items() if len(js) == 2},
        plates={n: list(js) for n, js in chain.items() if len(js) == 3},
        cranks={"lock": {"turns": two, "from": one, "about": joint, **told}})
    return rig, {"lock": float(turn)}


@pytest.mark.parametrize(("chain", "joint", "most"), [
    *((WATT, j, n) for j, n in WATT_JOINTS.items()),
    *((STEPHENSON, j, n) for j, n in STEPHENSON_JOINTS.items())])
def test_six_bars_with_one_joint_locked(chain: Mapping[str, str], joint: str, most: int) -> None:
    """A Watt chain has 4 assemblies, a Stephenson chain 4 or, with a joint outside its four-bar
    loop, 6 (by structure: two dyads or a triad). No seed has more, and some seed has as many."""
    counts = []
    for seed in range(8):
        rig, lock = locked(chain, joint, seed)
        found = rp.find_branches(rig, lock)
        drawn = rp.find_rest(rig).positions
        assert np.abs(found.positions[:, 0] - drawn).max(axis=(1, 2)).min() < 1e-9
        holds(found)
        counts.append(len(found))
        if found.found is rp.Found.PROBABLY and len(counts) >= 3:
            break
    assert max(counts) <= most
    assert all(n % 2 == 0 for n in counts)
    assert max(counts) == most or most == 6


# -- a coupler's curve met by a line --------------------------------------------------------------

@pytest.mark.parametrize("seed", range(6))
def test_a_line_meets_a_couplers_curve_in_at_most_six_points(seed: int) -> None:
    """Degree 6 (S. Roberts 1875, from memory). As many as the curve, drawn densely, crosses."""
    rng = np.random.default_rng(seed)
    rig = four_bar(1.0, rng.uniform(.3, .5), rng.uniform(.8, 1.1), rng.uniform(.7, 1.0))
    coupler = rig.bones[1].length
    place = rng.uniform(-1, 1, 2) + np.array([.5 * coupler, 0])
    rig = rp.make_rig(
        {j.name: {"at": j.at, "pin": True} if j.pin else {} for j in rig.joints} | {"point": {}},
        {b.name: {"ends": b.ends, "length": b.length} for b in rig.bones if b.name != "coupler"},
        plates={"coupler": {"joints": ["tip", "knee", "point"],
                            "shape": [[0, 0], [coupler, 0], place]}},
        cranks={"input": {"turns": "crank", "about": "left"}})
    rows = rp.find_branches(rig, {"input": np.linspace(0, 360, 36001)})
    heights = rows.positions[:, :, rows.joints.index("point"), 1]
    level = float(np.nanmean(heights)) + 1e-3
    # Rows that turn back end close to one another; there is no crossing in the gap between.
    crossings = int((np.diff(np.sign(heights - level), axis=1) != 0)[
        np.isfinite(heights[:, 1:] + heights[:, :-1])].sum())
    found = rp.find_branches(rig, targets={"point": {"y": level}})
    assert len(found) == crossings <= 6
    holds(found)
