"""A four-bar over a million frames, against hand-written NumPy and against SciPy's root finder."""

from __future__ import annotations

import numpy as np
from machine import Array, fourbar, timed
from numpy.typing import NDArray
from scipy.optimize import fsolve

import rigpose as rp

FRAMES, SOLVED = 1_000_000, 2_000


def by_hand(turn: Array) -> tuple[Array, NDArray[np.float32], NDArray[np.uint8]]:
    """Both branches with margins and states, written for this linkage alone."""
    a, b, c, d = 40.0, 120.0, 80.0, 100.0
    out = np.empty((2, len(turn), 4, 2))
    tip = np.stack([a * np.cos(turn), a * np.sin(turn)], axis=-1)
    way = np.array([d, 0.0]) - tip
    far = way[:, 0] ** 2 + way[:, 1] ** 2
    share = (b * b - c * c + far) / (2 * far)
    height = np.sqrt(b * b / far - share * share)
    foot = tip + share[:, None] * way
    side = np.stack([-way[:, 1], way[:, 0]], axis=-1) * height[:, None]
    out[:, :, 0], out[:, :, 1], out[:, :, 2] = 0.0, [d, 0.0], tip
    out[0, :, 3], out[1, :, 3] = foot + side, foot - side
    margin = np.empty((2, len(turn)), dtype=np.float32)
    margin[:] = height * far / (b * c)
    state = np.where(np.isfinite(margin), np.uint8(2), np.uint8(0))
    return out, margin, state


def by_root_finder(turn: Array) -> None:
    """One branch, each frame started from the one before."""
    x = np.array([143.19, 67.34])
    for t in turn:
        tip = np.array([40 * np.cos(t), 40 * np.sin(t)])

        def residual(p: Array, tip: Array = tip) -> Array:
            return np.array([(p[0] - tip[0]) ** 2 + (p[1] - tip[1]) ** 2 - 14400.0,
                             (p[0] - 100.0) ** 2 + p[1] ** 2 - 6400.0])

        def slope(p: Array, tip: Array = tip) -> Array:
            return np.array([[2 * (p[0] - tip[0]), 2 * (p[1] - tip[1])],
                             [2 * (p[0] - 100.0), 2 * p[1]]])

        x = fsolve(residual, x, fprime=slope)


def main() -> None:
    rig, turn = fourbar(), np.linspace(0.0, 3600.0, FRAMES)
    rp.find_branches(rig, {"drive": turn[:100]})
    ours = timed(lambda: rp.find_branches(rig, {"drive": turn}), 5)
    hand = timed(lambda: by_hand(np.radians(turn)), 5)
    found = rp.find_branches(rig, {"drive": turn[::1000]})
    gap = np.abs(found.positions - by_hand(np.radians(turn[::1000]))[0]).max()
    root = timed(lambda: by_root_finder(np.radians(np.linspace(40.0, 80.0, SOLVED)))) / SOLVED
    print(f"four-bar, {FRAMES:,} frames, both branches: {ours:.3f} s; by hand {hand:.3f} s; "
          f"ratio {ours / hand:.2f} (largest difference {gap:.1e})")
    print(f"four-bar, a frame: {ours / FRAMES * 1e6:.3f} µs; fsolve with Jacobian "
          f"{root * 1e6:.1f} µs; {root / (ours / FRAMES):.0f} times faster")


if __name__ == "__main__":
    main()
