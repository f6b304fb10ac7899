"""Long chains of points in space, all poses; and the suspension against SciPy's root finder."""

from __future__ import annotations

import time
from typing import Any

import numpy as np
from machine import RIGS, Array, timed
from scipy.optimize import root
from scipy.spatial import cKDTree

import rigpose as rp
from rigpose.solve.planner import plan_for

POINTS, NEAR = 4096, 5.0


def backbone(points: int) -> Array:
    """An invented chain with the bond lengths and angles of a protein's backbone (from memory, in
    ångström and degrees): helices of twelve residues joined by loose turns."""
    rng = np.random.default_rng(4)
    bonds, angles = (1.46, 1.52, 1.33), (111.0, 117.0, 122.0)
    x = [np.zeros(3), np.array([1.46, 0.0, 0.0]), np.array([2.0, 1.42, 0.0])]
    for k in range(3, points):
        residue, kind = divmod(k, 3)
        loose = residue % 15 >= 12
        helix = (-47.0, 180.0, -57.0)[kind]
        torsion = np.radians(helix + (rng.normal(0.0, 45.0) if loose and kind != 1
                                      else rng.normal(0.0, 4.0)))
        angle = np.radians(180.0 - angles[(kind + 2) % 3])
        u = x[-1] - x[-2]
        u = u / np.linalg.norm(u)
        n = np.cross(x[-2] - x[-3], u)
        n = n / np.linalg.norm(n)
        local = bonds[(kind + 2) % 3] * np.array(
            [np.cos(angle), np.sin(angle) * np.cos(torsion), np.sin(angle) * np.sin(torsion)])
        x.append(x[-1] + local @ np.array([u, np.cross(n, u), n]))
    return np.array(x)


def chain() -> None:
    """All poses of a chain from its distances; planning is told apart."""
    x = backbone(POINTS)
    pairs = sorted(cKDTree(x).query_pairs(NEAR))
    joints: dict[str, Any] = {f"v{k}": {"at": p.tolist()} for k, p in enumerate(x)}
    for k in range(3):
        joints[f"v{k}"]["pin"] = True
    rig = rp.make_rig(joints, {f"e{a}_{b}": [f"v{a}", f"v{b}"] for a, b in pairs if b > 2}, dim=3,
                      slack=1e-9)
    start = time.perf_counter()
    plan_for(rig, frozenset(), frozenset())
    planned = time.perf_counter() - start
    found = rp.find_branches(rig)
    posed = timed(lambda: rp.find_branches(rig))
    off = np.abs(found.positions[:, 0] - x).max(axis=(1, 2)).min()
    worst = rp.judge(rig, found.positions, found.size).worst()[0]
    print(f"chain of {POINTS:,} points with {len(pairs):,} distances: planned in {planned:.2f} s, "
          f"all {len(found)} poses in {posed:.2f} s, {found.found.value}; off by {off:.1e}, "
          f"lengths by {worst:.1e} of the size")


if __name__ == "__main__":
    chain()
