"""The rigs of the benchmarks, and what a user would use instead: SciPy on all lengths."""

from __future__ import annotations

import time
from collections.abc import Callable
from itertools import combinations
from pathlib import Path

import numpy as np
from numpy.typing import NDArray

import rigpose as rp

Array = NDArray[np.float64]
RIGS = Path(__file__).resolve().parents[2] / "rigs"


def fourbar() -> rp.Rig:
    """Crank 40, coupler 120, rocker 80, frame 100; the crank turns fully."""
    return rp.make_rig(
        {"o": {"at": [0, 0], "pin": True}, "q": {"at": [100, 0], "pin": True},
         "a": [30.64, 25.71], "b": [143.19, 67.34]},
        {"crank": {"ends": ["o", "a"], "length": 40},
         "coupler": {"ends": ["a", "b"], "length": 120},
         "rocker": {"ends": ["q", "b"], "length": 80}},
        cranks={"drive": {"turns": "crank", "from": "ground", "about": "o"}})


def ladder(joints: int) -> rp.Rig:
    """Two pins and joints each tied to the two before: 2 ** (joints - 2) branches."""
    rng = np.random.default_rng(0)
    places = {"p": {"at": [0, 0], "pin": True}, "q": {"at": [1, 0], "pin": True}}
    bones: dict[str, list[str]] = {}
    names = ["p", "q"]
    for k in range(joints - 2):
        side = 1 if k % 2 else -1
        name = f"j{k}"
        places[name] = {"at": [0.5 * (k + 1) + 0.1 * rng.random(),
                               side * (0.6 + 0.2 * rng.random())]}
        for end, letter in zip(names[-2:], "ab", strict=True):
            bones[f"b{k}{letter}"] = [end, name]
        names.append(name)
    return rp.make_rig(places, bones)


def drag_rig() -> rp.Rig:
    """30 joints on plates, six two-way placings: up to 64 branches."""
    joints = {"p": {"at": [0, 0], "pin": True}, "q": {"at": [3, 0], "pin": True}, "a": [0.5, 0.5]}
    bones, plates, before = {"crank": ["p", "a"]}, {}, "a"
    for k in range(6):
        x = 0.5 + 0.4 * k
        joints |= {f"b{k}": [x + 0.9, 1.2 + 0.2 * k], f"c{k}": [x + 0.3, 1.5 + 0.3 * k],
                   f"d{k}": [x - 0.2, 2 + 0.2 * k]}
        plates[f"plate{k}"] = [before, f"b{k}", f"c{k}", f"d{k}"]
        bones[f"rod{k}"] = ["q", f"b{k}"]
        before = f"c{k}"
    for k in range(9):
        joints[f"e{k}"] = [1 + 0.4 * k, 3 + 0.3 * k]
        plates[f"plate{k % 6}"].append(f"e{k}")
    return rp.make_rig(joints, bones, plates=plates,
                       cranks={"turn": {"turns": "crank", "from": "ground", "about": "p"}})


class Lengths:
    """All lengths of a rig with one driven joint, as residuals with their analytic Jacobian.

    Plates are distances between all pairs of their joints. ``known`` maps joints to their places.
    """

    def __init__(self, rig: rp.Rig, known: list[str]) -> None:
        pairs = [(b.ends, b.length) for b in rig.bones]
        for plate in rig.plates:
            shape = dict(zip(plate.joints, np.array(plate.shape), strict=True))
            pairs += [((a, b), float(np.linalg.norm(shape[a] - shape[b])))
                      for a, b in combinations(plate.joints, 2)]
        index = rig.index
        fixed = {index[j] for j in known}
        pairs = [(e, n) for e, n in pairs if not {index[e[0]], index[e[1]]} <= fixed]
        self.ends = np.array([[index[a], index[b]] for (a, b), _ in pairs])
        self.length = np.array([n for _, n in pairs])
        self.free = np.array([k for k in range(len(rig.joints)) if k not in fixed])
        self.column = np.full(len(rig.joints), -1)
        self.column[self.free] = np.arange(len(self.free))
        self.rows = np.arange(len(self.length))
        self.pose = np.zeros((len(rig.joints), 2))

    def set(self, pose: Array) -> Array:
        """Known joints from a pose ``(n_joints, 2)``; the others as unknowns."""
        self.pose[:] = pose
        unknowns: Array = self.pose[self.free].ravel()
        return unknowns

    def residual(self, x: Array) -> Array:
        self.pose[self.free] = x.reshape(-1, 2)
        e = self.pose[self.ends[:, 1]] - self.pose[self.ends[:, 0]]
        off: Array = (e * e).sum(axis=1) - self.length**2
        return off

    def jacobian(self, x: Array) -> Array:
        self.pose[self.free] = x.reshape(-1, 2)
        e = 2.0 * (self.pose[self.ends[:, 1]] - self.pose[self.ends[:, 0]])
        out = np.zeros((len(self.rows), len(self.free), 2))
        for side, sign in ((0, -1.0), (1, 1.0)):
            column = self.column[self.ends[:, side]]
            inside = column >= 0
            out[self.rows[inside], column[inside]] += sign * e[inside]
        return out.reshape(len(self.rows), -1)

    def square(self, x: Array) -> None:
        """Keep an independent choice of rows, as many as there are unknowns."""
        jac = self.jacobian(x)
        kept: list[int] = []
        basis = np.zeros((0, jac.shape[1]))
        for k, row in enumerate(jac):
            left = row / np.linalg.norm(row)
            left = left - basis.T @ (basis @ left)
            left = left - basis.T @ (basis @ left)
            if np.linalg.norm(left) > 1e-8:
                kept.append(k)
                basis = np.vstack([basis, left / np.linalg.norm(left)])
        self.ends, self.length = self.ends[kept], self.length[kept]
        self.rows = np.arange(len(kept))


def timed(work: Callable[[], object], times: int = 3) -> float:
    """The least wall time of some runs, in seconds."""
    best = np.inf
    for _ in range(times):
        start = time.perf_counter()
        work()
        best = min(best, time.perf_counter() - start)
    return float(best)
