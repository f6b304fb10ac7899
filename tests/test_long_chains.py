"""Long chains: searched one branch at a time in plain numbers, as the arrays would find them."""

from __future__ import annotations

from functools import partial

import numpy as np
import pytest
import random_rigs
import random_space
from numpy.typing import NDArray
from random_rigs import random_case
from random_space import random_space_case
from scipy.optimize import least_squares
from scipy.spatial import cKDTree

import rigpose as rp
from rigpose.kernels import meet, plain, space
from rigpose.solve import alone

Array = NDArray[np.float64]


@pytest.mark.parametrize("seed", range(20))
def test_plain_formulas_are_those_of_the_arrays(seed: int) -> None:
    rng = np.random.default_rng(seed)
    c, common = rng.normal(size=(3, 3)), rng.normal(size=3)
    flat_r = [float(x) for x in np.linalg.norm((c - common)[:, :2], axis=1)]
    r = [float(x) for x in np.linalg.norm(c - common, axis=1)]

    def same(mine: plain.Crossing | None, theirs: meet.Crossing) -> None:
        assert mine is not None
        for a, b in zip(mine, theirs, strict=True):
            assert np.atleast_1d(np.array(a)) == pytest.approx(b.ravel(), rel=1e-12, abs=1e-13)

    flat = [tuple(map(float, p[:2])) for p in c]
    same(plain.circle_circle(flat[0], flat_r[0], flat[1], flat_r[1]),
         meet.circle_circle(c[0, :2, None], flat_r[0], c[1, :2, None], flat_r[1]))
    way = c[2, :2] / np.linalg.norm(c[2, :2])
    same(plain.line_circle(flat[0], tuple(map(float, way)), flat[1], 9.0),
         meet.line_circle(c[0, :2, None], way[:, None], c[1, :2, None], 9.0))
    high = [tuple(map(float, p)) for p in c]
    made = plain.three_spheres(high[0], r[0], high[1], r[1], high[2], r[2])
    assert made is not None
    same(made[0], space.three_spheres(c[0, :, None], r[0], c[1, :, None], r[1],
                                        c[2, :, None], r[2]))


def test_a_point_is_fitted_onto_spheres_as_least_squares_do() -> None:
    rng = np.random.default_rng(7)
    centres, place = rng.normal(size=(6, 3)), rng.normal(size=3)
    radii = np.linalg.norm(centres - place, axis=1)
    moved = plain.fitted(tuple(map(float, place + 1e-7)),
                         [(tuple(map(float, c)), float(x)) for c, x in
                          zip(centres, radii, strict=True)])
    assert moved is not None

    def off(x: Array) -> Array:
        gaps: Array = np.linalg.norm(centres - x, axis=1) - radii
        return gaps

    best = least_squares(off, place + 1e-3, xtol=1e-15, ftol=1e-15, gtol=1e-15).x
    assert np.array(moved[0]) == pytest.approx(best, abs=1e-12)


PLANE = [pytest.param(partial(random_case, seed, 5, getattr(random_rigs, kinds)),
                      id=f"plane-{kinds}-{seed}")
         for kinds in ("ONE_BY_ONE", "PRUNED") for seed in range(15)]
SPACE = [pytest.param(partial(random_space_case, seed, 4, getattr(random_space, kinds)),
                      id=f"space-{kinds}-{seed}")
         for kinds in ("ONE_BY_ONE", "HINGED", "PRUNED") for seed in range(10)]


@pytest.mark.parametrize("case", [*PLANE, *SPACE])
def test_one_by_one_finds_the_branches_that_the_arrays_find(
        case: object, monkeypatch: pytest.MonkeyPatch) -> None:
    drawn = case()  # type: ignore[operator]
    rig, drives, targets = drawn.rig, drawn.drives, drawn.wishes
    want = rp.find_branches(rig, drives, targets)
    tried: list[bool] = []
    search = alone.search_alone

    def counted(*given: object) -> object:
        cells = search(*given)  # type: ignore[arg-type]
        tried.append(cells is not None)
        return cells

    monkeypatch.setattr(alone, "LONG", -1)
    monkeypatch.setattr("rigpose.solve.stream.search_alone", counted)
    found = rp.find_branches(rig, drives, targets)
    assert list(found.names) == list(want.names)
    assert found.positions == pytest.approx(want.positions, abs=1e-9 * want.size)
    assert found.margin == pytest.approx(want.margin, abs=1e-6)
    assert found.found == want.found
    assert tried


def coil(points: int) -> tuple[rp.Rig, Array]:
    """A chain of points along a coil, each tied to all of those before it that are near."""
    k = np.arange(points)
    rng = np.random.default_rng(1)
    x = np.column_stack([2.3 * np.cos(1.75 * k), 2.3 * np.sin(1.75 * k), 0.5 * k])
    x += rng.normal(scale=0.1, size=x.shape)
    joints = {f"v{i}": {"at": p.tolist(), "pin": i < 3} for i, p in enumerate(x)}
    bones = {f"b{i}_{j}": [f"v{i}", f"v{j}"] for i, j in sorted(cKDTree(x).query_pairs(5.0))
             if j > 2}
    return rp.make_rig(joints, bones, dim=3), x


@pytest.mark.parametrize("points", [100, 1500])
def test_a_coil_of_a_thousand_points_has_two_poses(points: int) -> None:
    """Each point hangs on more than three before it, so only the whole may be turned over
    (Lavor, Liberti, Maculan and Mucherino 2012, on the discretizable problem; from memory)."""
    rig, x = coil(points)
    found = rp.find_branches(rig)
    assert (len(found), found.found) == (2, rp.Found.COMPLETE)
    assert rp.judge(rig, found.positions, found.size).worst()[0] < 1e-12
    assert np.abs(found.positions[0, 0] - x).max() < 1e-9 * found.size
    assert found.mirror_of == (1, 0)
