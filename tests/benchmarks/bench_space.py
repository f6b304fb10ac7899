"""Long chains of points in space, all poses; and the suspension against SciPy's root finder."""

from __future__ import annotations

import time
from dataclasses import replace
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


FRAMES, SOLVED = 100_000, 300


class Corner:
    """The lamp cart's wheel by its loop equations: the turns of both wishbones and of the carrier
    are the unknowns, five in all."""

    def __init__(self, rig: rp.Rig) -> None:
        at = {j.name: np.array(j.at) for j in rig.joints}
        self.fore = [at["lower_fore"], at["upper_fore"]]
        self.axis = [(at[f"{side}_aft"] - at[f"{side}_fore"]) for side in ("lower", "upper")]
        self.axis = [a / np.linalg.norm(a) for a in self.axis]
        self.arm = [at["lower_ball"] - self.fore[0], at["upper_ball"] - self.fore[1]]
        self.own = np.array([at[j] - at["lower_ball"] for j in ("upper_ball", "steer_ball",
                                                                "wheel")])
        self.rack = at["rack_end"]
        self.rod2 = float(((at["steer_ball"] - self.rack) ** 2).sum())

    def ball(self, side: int, angle: float) -> Array:
        """Where a wishbone's ball is (Rodrigues' formula)."""
        u, v = self.axis[side], self.arm[side]
        c, s = np.cos(angle), np.sin(angle)
        out: Array = self.fore[side] + v * c + np.array(
            [u[1] * v[2] - u[2] * v[1], u[2] * v[0] - u[0] * v[2], u[0] * v[1] - u[1] * v[0]]
        ) * s + u * (u @ v) * (1 - c)
        return out

    def open(self, x: Array, rack: float, height: float) -> Array:
        """How far the loops are open."""
        low, high = self.ball(0, x[0]), self.ball(1, x[1])
        a, b, c = x[2:]
        # Cayley's form of a rotation: rational, with no functions to call.
        k = 2.0 / (1.0 + a * a + b * b + c * c)
        turn = np.array([[1 - k * (b * b + c * c), k * (a * b - c), k * (a * c + b)],
                         [k * (a * b + c), 1 - k * (a * a + c * c), k * (b * c - a)],
                         [k * (a * c - b), k * (b * c + a), 1 - k * (a * a + b * b)]])
        upper, steer, wheel = low + self.own @ turn.T
        rod = steer - self.rack
        rod[1] -= rack
        return np.array([*(upper - high), rod @ rod - self.rod2, wheel[2] - height])


def suspension() -> None:
    """The wheel over its travel; SciPy starts from the frame before."""
    rig = rp.load_rig(RIGS / "lamp_cart.toml")
    shot = rp.load_shot(RIGS / "lamp_cart.shot.toml")
    share = (FRAMES - 1) / (shot.frames[1] - 1)
    shot = replace(shot, frames=(1.0, float(FRAMES)), keys=tuple(
        replace(k, frame=1 + (k.frame - 1) * share) for k in shot.keys))
    motion = rp.bake(shot)
    assert motion.ok
    ours = timed(lambda: rp.bake(shot), 2) / FRAMES
    rack = motion.positions[:, rig.index["rack_end"], 1] - 0.33
    height = motion.positions[:, rig.index["wheel"], 2]
    corner = Corner(rig)

    def by_root_finder() -> Array:
        x = np.zeros(5)
        for k in range(SOLVED):
            x = root(corner.open, x, (rack[k], height[k])).x
        return x

    slow = timed(by_root_finder, 2) / SOLVED
    ball = corner.ball(0, by_root_finder()[0])
    off = np.abs(motion.positions[SOLVED - 1, rig.index["lower_ball"]] - ball).max()
    print(f"suspension over {FRAMES:,} frames: {ours * 1e6:.1f} µs a frame, worst length "
          f"{motion.worst:.1e} of the size; SciPy's root finder on five loop equations "
          f"{slow * 1e6:,.0f} µs: {slow / ours:,.0f} times faster; they differ by {off:.1e} m")


if __name__ == "__main__":
    chain()
    suspension()
