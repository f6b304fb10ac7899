"""How many assemblies in space, and which of them move: published facts, each against the solver.

Counts include mirror images, since three pinned joints of a framework leave its mirror image in
their plane possible.
"""

from __future__ import annotations

import itertools
from collections.abc import Iterable, Mapping

import numpy as np
import pytest

import rigpose as rp
from rigpose.model.equations import Array

Edge = tuple[int, int]


def framework(places: Array, edges: Iterable[Edge], pins: Iterable[int]) -> rp.Rig:
    """Joints ``v0, v1, …`` where they are drawn, and bones ``e0_1, …`` measured from that."""
    held = set(pins)
    joints = {f"v{k}": {"at": p.tolist(), **({"pin": True} if k in held else {})}
              for k, p in enumerate(places)}
    return rp.make_rig(joints, {f"e{a}_{b}": [f"v{a}", f"v{b}"] for a, b in edges
                                if not {a, b} <= held}, dim=3)


def lengths_only(squares: Mapping[Edge, float], ground: tuple[int, int, int]) -> rp.Rig:
    """Bones by their squared lengths, three joints of one triangle pinned in the plane z = 0."""
    a, b, c = ground
    ab, ac, bc = (squares[min(i, j), max(i, j)] for i, j in ((a, b), (a, c), (b, c)))
    x = (ab + ac - bc) / (2 * ab**0.5)
    at = {a: (0.0, 0.0, 0.0), b: (ab**0.5, 0.0, 0.0), c: (x, (ac - x * x) ** 0.5, 0.0)}
    joints: dict[str, object] = {f"v{k}": {} for k in sorted({k for e in squares for k in e})}
    joints |= {f"v{k}": {"at": list(p), "pin": True} for k, p in at.items()}
    return rp.make_rig(joints, {
        f"e{i}_{j}": {"ends": [f"v{i}", f"v{j}"], "length": s**0.5}
        for (i, j), s in squares.items() if not {i, j} <= set(ground)}, dim=3)


def holds(found: rp.Branches) -> None:
    """Every length holds, and no branch is there twice."""
    verdict = rp.judge(found.rig, found.positions, found.size)
    assert verdict.worst()[0] < 1e-12
    for a, b in itertools.combinations(found.positions[:, 0], 2):
        assert np.abs(a - b).max() > 1e-6 * found.size


def apart(found: rp.Branches, places: Array) -> float:
    """From a pose to the nearest branch, as a fraction of the size."""
    gaps = np.abs(found.positions[:, 0] - places).max(axis=(1, 2))
    return float(gaps.min()) / found.size


# -- chains of points, each at known distances from the three before it ---------------------------

def chain(n: int, seed: int, extra: int) -> tuple[Array, set[Edge]]:
    """A random chain and its distances: to the three before, and ``extra`` longer ones."""
    rng = np.random.default_rng(seed)
    places = np.cumsum(rng.normal(size=(n, 3)), axis=0)
    edges = {(i, j) for j in range(n) for i in range(max(0, j - 3), j)}
    far = [(i, j) for j in range(n) for i in range(j - 3)]
    picked = rng.permutation(len(far))[:extra]
    return places, edges | {far[int(k)] for k in picked}


def free_reflections(n: int, edges: set[Edge]) -> list[int]:
    """The set S of Liberti, Masson, Lee, Lavor and Mucherino, "On the number of realizations of
    certain Henneberg graphs arising in protein conformation" (Discrete Applied Mathematics 165,
    2014; from memory): joints over which no distance reaches, counted from 1."""
    return [v for v in range(4, n + 1)
            if not any(u + 1 + 3 < v <= w + 1 for u, w in edges)]


@pytest.mark.parametrize(("n", "seed", "extra"), [
    (8, 0, 0), (10, 1, 1), (12, 2, 2), (14, 3, 3), (14, 4, 1), (14, 5, 4), (12, 6, 3), (9, 7, 2)])
def test_chains_have_as_many_poses_as_their_reflections_give(n: int, seed: int,
                                                             extra: int) -> None:
    """2^|S| with probability one (Liberti and others 2014, from memory)."""
    places, edges = chain(n, seed, extra)
    rig = framework(places, edges, (0, 1, 2))
    found = rp.find_branches(rig)
    assert len(found) == 2 ** len(free_reflections(n, edges))
    assert found.found is rp.Found.COMPLETE
    holds(found)
    assert apart(found, places) < 1e-9


@pytest.mark.parametrize("seed", range(4))
def test_a_chain_with_one_long_distance_is_known_up_to_its_mirror_image(seed: int) -> None:
    """A distance from the first to the last leaves the fourth joint's side alone free."""
    places, edges = chain(13, 100 + seed, 0)
    rig = framework(places, edges | {(0, 12)}, (0, 1, 2))
    found = rp.find_branches(rig)
    assert len(found) == 2
    normal = np.cross(places[1] - places[0], places[2] - places[0])
    normal /= np.linalg.norm(normal)
    mirrored = places - 2 * np.outer((places - places[0]) @ normal, normal)
    assert apart(found, places) < 1e-9
    assert apart(found, mirrored) < 1e-9
    assert len(rp.find_branches(rig, mirrors=False)) == 1


# -- frameworks that can't be placed one by one ---------------------------------------------------

OCTAHEDRON = [(a, b) for a, b in itertools.combinations(range(6), 2) if (a, b) not in
              ((0, 1), (2, 3), (4, 5))]

# Bartzos, Emiris, Legersky and Tsigaridas (ISSAC 2018; JSC 102, 2021): lengths with which all
# realizations of graphs of seven joints are real; from the data beside their programs.
SEVEN = {
    "G24": ({(1, 2): 11.05, (4, 7): 5.65, (2, 6): 5.7, (5, 6): 4.7, (1, 4): 8.33, (1, 3): 4.77,
             (2, 3): 10.31, (3, 7): 7.1, (2, 5): 9.32, (2, 7): 6.0, (4, 6): 6.49, (5, 7): 5.77,
             (1, 5): 9.4, (3, 6): 8.57, (3, 4): 7.64}, 24),
    "G32a": ({(4, 7): 8.74, (1, 3): 6.27, (5, 6): 9.23, (1, 4): 8.06, (2, 3): 8.83, (3, 7): 5.62,
              (2, 5): 9.74, (3, 5): 5.6, (1, 2): 10.95, (6, 7): 9.28, (5, 7): 7.88, (3, 6): 8.26,
              (1, 6): 11.56, (3, 4): 6.11, (2, 4): 8.95}, 32),
    "G32b": ({(1, 2): 11.06, (4, 7): 85.49, (2, 6): 7.11, (4, 5): 78.53, (1, 4): 87.33,
              (5, 6): 22.08, (1, 3): 10.81, (2, 3): 4.47, (3, 7): 7.1, (2, 5): 20.7, (2, 7): 7.68,
              (6, 7): 9.29, (1, 5): 21.49, (3, 6): 7.53, (3, 4): 84.17}, 32)}


@pytest.mark.parametrize("name", SEVEN)
def test_frameworks_of_seven_joints_have_all_their_published_poses(name: str) -> None:
    lengths, count = SEVEN[name]
    ends = {k for e in lengths for k in e}
    ground = next(t for t in itertools.combinations(sorted(ends), 3)
                  if all(e in lengths for e in itertools.combinations(t, 2)))
    found = rp.find_branches(lengths_only({e: x * x for e, x in lengths.items()}, ground))
    holds(found)
    assert len(found) == count


def test_octahedra_have_at_most_sixteen_poses() -> None:
    """Bars of an octahedron: 16 complex poses, so real ones come in mirrored pairs, 16 at most
    (the platform whose joints meet in pairs above and below; Faugère and Lazard 1995)."""
    for seed in range(3):
        places = np.random.default_rng(seed).normal(size=(6, 3))
        found = rp.find_branches(framework(places, OCTAHEDRON, (0, 2, 4)))
        holds(found)
        assert apart(found, places) < 1e-9
        assert len(found) % 2 == 0
        assert len(found) <= 16


# -- platforms ------------------------------------------------------------------------------------

def platform(base: Array, top: Array, legs: Array) -> rp.Rig:
    """A plate ``t0, …`` on six legs ``leg0, …``, known by its shape and their lengths alone."""
    joints: dict[str, object] = {f"b{k}": {"at": p.tolist(), "pin": True}
                                 for k, p in enumerate(base)}
    joints |= {f"t{k}": {} for k in range(len(top))}
    bones = {f"leg{k}": {"ends": [f"b{k}", f"t{k}"], "length": float(x)}
             for k, x in enumerate(legs)}
    return rp.make_rig(joints, bones, dim=3, plates={
        "top": {"joints": [f"t{k}" for k in range(len(top))], "shape": top.tolist()}})


DIETMAIER_BASE = np.array([
    (0, 0, 0), (1.107915, 0, 0), (0.549094, 0.756063, 0), (0.735077, -0.223935, 0.525991),
    (0.514188, -0.526063, -0.368418), (0.590473, 0.094733, -0.205018)])
DIETMAIER_TOP = np.array([
    (0, 0, 0), (0.542805, 0, 0), (0.956919, -0.528915, 0), (0.665885, -0.353482, 1.402538),
    (0.478359, 1.158742, 0.107672), (-0.137087, -0.235121, 0.353913)])
DIETMAIER_LEGS = np.array([1, 0.645275, 1.086284, 1.503439, 1.281933, 0.771071])


def test_the_platform_with_forty_real_postures() -> None:
    """P. Dietmaier (Advances in Robot Kinematics, Kluwer 1998, pp. 1-10); his lengths and the sums
    of his forty postures as in PHCpack's demo `stewgou40`."""
    found = rp.find_branches(platform(DIETMAIER_BASE, DIETMAIER_TOP, DIETMAIER_LEGS))
    holds(found)
    assert len(found) == 40
    first = found.positions[:, 0, found.joints.index("t0")]
    second = found.positions[:, 0, found.joints.index("t1")]
    assert first.sum(axis=0) == pytest.approx((30.33783309, -0.58758525, -6.01369889), abs=1e-6)
    # The plate's first axis, whose x is summed over all postures too.
    assert ((second - first)[:, 0] / 0.542805).sum() == pytest.approx(-1.63224484, abs=1e-6)


# -- what moves though it shouldn't, and the other way round --------------------------------------

BRICARD = np.array([(1, 2, 0), (-1, -2, 0), (2, -1, 1), (-2, 1, 1), (1, 1, 3), (-1, -1, 3)])


def test_bricards_octahedron_moves() -> None:
    """Bricard 1897, his first kind: joints in pairs that half a turn about z exchanges. Twelve bars
    would hold six joints (3 * 6 - 6), and it has one freedom."""
    squares = [int(((BRICARD[a] - BRICARD[b]) ** 2).sum()) for a, b in OCTAHEDRON]
    assert squares == [11, 11, 10, 22, 11, 11, 22, 10, 9, 13, 13, 9]
    report = rp.check(framework(BRICARD.astype(float), OCTAHEDRON, (0, 2, 4)))
    assert (report.freedoms, report.freedoms_first_order, report.freedoms_counted) == (1, 1, 0)
    assert len(report.redundant) == 1
    other = BRICARD + 0.3 * np.random.default_rng(5).normal(size=(6, 3))
    assert rp.check(framework(other, OCTAHEDRON, (0, 2, 4))).freedoms == 0


def test_bricards_octahedron_can_be_led() -> None:
    """A ram across one of its free diagonals takes it along: it moves by finite amounts."""
    rig = framework(BRICARD.astype(float), OCTAHEDRON, (0, 2, 4))
    joints = {j.name: {"at": j.at, "pin": j.pin} for j in rig.joints}
    led = rp.make_rig(joints, {b.name: list(b.ends) for b in rig.bones}, dim=3,
                      rams={"across": {"ends": ["v0", "v1"]}})
    drawn = float(np.linalg.norm(BRICARD[0] - BRICARD[1]))
    for length in (drawn, drawn - 0.1, drawn + 0.1):
        found = rp.find_branches(led, {"across": length})
        assert len(found) > 0
        assert rp.judge(led, found.positions, found.size).worst()[0] < 1e-9


def banana(seed: int) -> tuple[Array, list[Edge]]:
    """Two triangles, each joined to both of two common tips, 0 and 1."""
    places = np.random.default_rng(seed).uniform(-1, 1, (8, 3))
    places[0], places[1] = (0, 0, -2), (0, 0, 2)
    edges = [(a, b) for t in ((2, 3, 4), (5, 6, 7)) for a, b in itertools.combinations(t, 2)]
    edges += [(tip, k) for tip in (0, 1) for k in range(2, 8)]
    return places, edges


@pytest.mark.parametrize("seed", range(3))
def test_the_double_banana_turns_about_its_tips(seed: int) -> None:
    """Eight joints and 18 = 3 * 8 - 6 bars, no part of which has too many, and still one half turns
    against the other (a counterexample of the textbooks on rigidity; from memory): rank 17."""
    places, edges = banana(seed)
    report = rp.check(framework(places, edges, (2, 3, 4)))
    assert (report.freedoms, report.freedoms_first_order, report.freedoms_counted) == (1, 1, 0)
    assert set(report.moving[0].joints) == {"v5", "v6", "v7"}
    assert len(report.redundant) == 1
    # One bar between the halves holds them, by counting one too many.
    held = rp.check(framework(places, [*edges, (2, 5)], (2, 3, 4)))
    assert (held.freedoms, held.freedoms_counted) == (0, -1)


# -- loops of hinges: structural choices of equations would often be singular ---------------------

def link(theta: float, length: float, twist: float) -> Array:
    """Turn about z, go along x, twist about x (Denavit and Hartenberg 1955; from memory)."""
    c, s, ca, sa = np.cos(theta), np.sin(theta), np.cos(twist), np.sin(twist)
    return np.array([[c, -s * ca, s * sa, length * c], [s, c * ca, -c * sa, length * s],
                     [0, sa, ca, 0], [0, 0, 0, 1]])


def hinged_loop(lengths: Array, twists: Array, angles: Array) -> rp.Rig:
    """Four links on four hinges from their parameters; the last link is the ground."""
    frames = [np.eye(4)]
    for theta, a, alpha in zip(angles, lengths, twists, strict=True):
        frames.append(frames[-1] @ link(theta, a, alpha))
    assert np.abs(frames[4] - np.eye(4)).max() < 1e-12
    joints = {f"p{k}": {"at": f[:3, 3], **({"pin": True} if k in (0, 3) else {})}
              for k, f in enumerate(frames[:4])}
    parts = ["ground", "link0", "link1", "link2", "ground"]
    return rp.make_rig(
        joints, {f"link{k}": [f"p{k}", f"p{k + 1}"] for k in range(3)}, dim=3,
        hinges={f"h{k}": {"parts": parts[k : k + 2], "at": f"p{k}", "axis": frames[k][:3, 2]}
                for k in range(4)},
        cranks={"first": {"turns": "link0", "about": "h0", "zero": [1, 0, 0]}})


def least_margin(rig: rp.Rig, count: int) -> float:
    """Over a full turn, in all rows; no row may pass or touch a dead centre."""
    found = rp.find_branches(rig, {"first": np.linspace(0, 360, count)})
    assert len(found) > 0
    assert not any(found.events)
    assert np.isfinite(found.positions).all()
    assert rp.judge(rig, found.positions, found.size).worst()[0] < 1e-9
    return float(found.margin.min())


@pytest.mark.parametrize("count", [121, 122])
@pytest.mark.parametrize(("short", "twist"), [
    (0.5, 30.0), (0.4, 20.0), (0.8, 50.0)])
def test_bennetts_loop_is_planned_without_a_singular_choice(short: float, twist: float,
                                                            count: int) -> None:
    """Lengths and sines of twists in one proportion (Bennett 1903): it turns fully, in one way, and
    of 64 choices of its equations that match in structure ten are singular (own calculation)."""
    alpha = np.radians(twist)
    beta = np.arcsin(np.sin(alpha) / short)
    first = np.radians(100.0)
    ratio = np.sin((beta + alpha) / 2) / np.sin((beta - alpha) / 2)
    second = 2 * np.arctan(ratio / np.tan(first / 2))
    rig = hinged_loop(np.array([short, 1, short, 1]), np.array([alpha, beta, alpha, beta]),
                      np.array([first, second, -first, -second]))
    assert rp.check(rig).freedoms == 1
    # Its hinges' axes, as six coordinates each, never have a rank below three.
    assert least_margin(rig, count) > 1e-3


def test_parallel_hinges_are_planned_without_a_singular_choice() -> None:
    """A crank and rocker on four parallel hinges (16 of 64 choices are singular, own
    calculation); its least margin over a turn is what the transmission angle leaves."""
    crank, coupler, follower, frame = 40.0, 120.0, 80.0, 100.0
    start = np.radians(40.0)
    tip = crank * np.exp(1j * start)
    d = frame - tip
    x = (coupler**2 - follower**2 + abs(d) ** 2) / (2 * abs(d))
    knee = tip + d / abs(d) * (x + 1j * np.sqrt(coupler**2 - x * x))
    # Turned over, so that the last link points along x, as the first one is counted from.
    points = -np.array([0, tip, knee, frame, 0])
    ways = np.angle(np.diff(points))
    rig = hinged_loop(np.array([crank, coupler, follower, frame]), np.zeros(4),
                      np.diff(ways, prepend=0))
    assert rp.check(rig).freedoms == 1
    # cos mu = (b^2 + c^2 - (d - a)^2) / (2 b c), at least 26.384330 degrees for these lengths.
    mu = np.degrees(np.arccos((coupler**2 + follower**2 - (frame - crank) ** 2)
                              / (2 * coupler * follower)))
    assert mu == pytest.approx(26.384330, abs=1e-6)
    assert least_margin(rig, 121) > 0.1 * np.sin(np.radians(mu))
