"""The backbone of a protein from its short distances, up to its mirror image.

The structure is that of ubiquitin, entry 1UBQ of the Protein Data Bank (S. Vijay-Kumar, C. E. Bugg,
W. J. Cook, J. Mol. Biol. 194, 531-544, 1987), as the package vermouth ships it.
"""

from __future__ import annotations

from functools import cache
from importlib.util import find_spec
from pathlib import Path
from typing import Any

import numpy as np
import pytest
from numpy.typing import NDArray
from scipy.spatial import cKDTree

import rigpose as rp

Array = NDArray[np.float64]


@cache
def atoms() -> Array:
    """Places of N, CA and C in the order of the chain, ``(n, 3)`` in ångström."""
    spec = find_spec("vermouth")
    assert spec is not None and spec.origin is not None
    text = (Path(spec.origin).parent / "tests" / "data" / "1UBQ.pdb").read_text("ascii")
    rows = [line for line in text.splitlines() if line.startswith("ATOM")
            and line[12:16].strip() in ("N", "CA", "C") and line[16] in " A"]
    return np.array([[float(line[k:k + 8]) for k in (30, 38, 46)] for line in rows])


def pairs_of(x: Array, near: float) -> list[tuple[int, int]]:
    return sorted(cKDTree(x).query_pairs(near))


def chain(x: Array, pairs: list[tuple[int, int]]) -> rp.Rig:
    joints: dict[str, Any] = {f"v{k}": {"at": p.tolist(), "pin": k < 3} for k, p in enumerate(x)}
    bones = {f"e{a}_{b}": [f"v{a}", f"v{b}"] for a, b in pairs if b > 2}
    return rp.make_rig(joints, bones, dim=3, slack=1e-9)


def symmetric(count: int, pairs: list[tuple[int, int]]) -> list[int]:
    """The vertices, counted from 1, at which what follows may be turned over: those that no
    distance reaches across (L. Liberti, B. Masson, J. Lee, C. Lavor, A. Mucherino, Discrete
    Applied Mathematics 165, 2014). There are two to the power of their number solutions."""
    return [v for v in range(4, count + 1) if not any(u + 1 + 3 < v <= w + 1 for u, w in pairs)]


def test_the_structure_has_bonds_as_a_backbone_has() -> None:
    """Bonds of 1.46, 1.52 and 1.33 ångström within a few hundredths (from memory)."""
    x = atoms()
    assert len(x) == 228
    bonds = np.linalg.norm(np.diff(x, axis=0), axis=1)
    for k, length in enumerate((1.46, 1.52, 1.33)):
        assert bonds[k::3].mean() == pytest.approx(length, abs=0.02)


@pytest.mark.parametrize("near", [5.0, 6.0])
def test_the_whole_backbone_is_recovered_up_to_its_mirror_image(near: float) -> None:
    x = atoms()
    pairs = pairs_of(x, near)
    found = rp.find_branches(chain(x, pairs))
    assert len(found) == 2 ** len(symmetric(len(x), pairs)) == 2
    assert found.found is rp.Found.COMPLETE
    assert np.abs(found.positions[0, 0] - x).max() < 1e-9
    assert found.mirror_of == (1, 0)
    assert rp.judge(found.rig, found.positions, found.size).worst()[0] < 1e-12


@pytest.mark.parametrize(("first", "count", "near"), [
    (0, 30, 5.0), (60, 45, 4.6), (90, 45, 4.6), (0, 16, 4.2), (60, 40, 4.2),
    (120, 60, 5.0), (150, 78, 6.0)])
def test_parts_of_it_have_as_many_poses_as_their_symmetries_say(first: int, count: int,
                                                                near: float) -> None:
    """Distances to the three atoms before are always given, longer ones as far as ``near``."""
    x = atoms()[first:first + count]
    before = [(a, b) for b in range(count) for a in range(max(0, b - 3), b)]
    pairs = sorted({*before, *pairs_of(x, near)})
    want = 2 ** len(symmetric(count, pairs))
    found = rp.find_branches(chain(x, pairs), budget=rp.Budget(poses=1 << 14))
    assert (len(found), found.found) == (want, rp.Found.COMPLETE)
    assert np.abs(found.positions[:, 0] - x).max(axis=(1, 2)).min() < 1e-9
