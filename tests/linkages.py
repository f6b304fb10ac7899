"""Plain linkages, drawn by their lengths alone, and how many circuits a drive runs over."""

from __future__ import annotations

import numpy as np

import rigpose as rp
from rigpose.model.equations import Array

PIN = {"pin": True}


def four_bar(frame: float, crank: float, coupler: float, follower: float) -> rp.Rig:
    """Ground joints ``left`` (the origin) and ``right``; ``tip`` on the crank, ``knee`` beyond."""
    return rp.make_rig(
        {"left": {"at": [0, 0], **PIN}, "right": {"at": [frame, 0], **PIN}, "tip": {}, "knee": {}},
        {"crank": {"ends": ["left", "tip"], "length": crank},
         "coupler": {"ends": ["tip", "knee"], "length": coupler},
         "follower": {"ends": ["right", "knee"], "length": follower}},
        cranks={"input": {"turns": "crank", "about": "left"},
                "output": {"turns": "follower", "about": "right"}})


def slider_crank(crank: float, rod: float, offset: float = 0.0) -> rp.Rig:
    """A crank about the origin, a rod, and a ``block`` on the line y = offset."""
    return rp.make_rig(
        {"hub": {"at": [0, 0], **PIN}, "tip": {}, "block": {}},
        {"crank": {"ends": ["hub", "tip"], "length": crank},
         "rod": {"ends": ["tip", "block"], "length": rod}},
        rails={"guide": {"joint": "block", "through": [0, offset], "direction": [1, 0]}},
        cranks={"input": {"turns": "crank", "about": "hub"}})


def angle(found: rp.Branches, start: str, end: str) -> Array:
    """Directions in degrees ``(n_branches, n_frames)`` of the line between two joints."""
    way = found.positions[:, :, found.joints.index(end)]
    way = way - found.positions[:, :, found.joints.index(start)]
    degrees: Array = np.degrees(np.arctan2(way[..., 1], way[..., 0]))
    return degrees


def turned(a: Array, b: Array) -> Array:
    """The unsigned difference of two directions in degrees."""
    apart: Array = np.abs(np.remainder(a - b + 180.0, 360.0) - 180.0)
    return apart


def circuits(found: rp.Branches) -> int:
    """How many pieces the rows of a drive over one full turn hang together in.

    The drive's first and last frame are one pose. Rows join where they end side by side, and
    where one begins at the first frame as another ends at the last.
    """
    arcs = _arcs(found)
    owner = list(range(len(arcs)))

    def root(k: int) -> int:
        while owner[k] != k:
            k = owner[k]
        return k

    last = len(found.frames) - 1
    for i, (row, start, stop) in enumerate(arcs):
        for j, (other, begin, end) in enumerate(arcs):
            away = np.inf
            if stop == last and begin == 0:
                away = _apart(found, row, stop, other, begin) / 1e-3
            elif i < j and start == begin and start > 0:
                away = _apart(found, row, start, other, begin)
            elif i < j and stop == end and stop < last:
                away = _apart(found, row, stop, other, end)
            if away < 0.1 * found.size:
                owner[root(i)] = root(j)
            if i < j and stop == end < last and start == begin > 0:
                assert _apart(found, row, start, other, begin) < 0.1 * found.size
    return len({root(k) for k in range(len(arcs))})


def _arcs(found: rp.Branches) -> list[tuple[int, int, int]]:
    """Row, first and last frame of every stretch that lives."""
    out = []
    for row, state in enumerate(found.state):
        alive = np.concatenate([[False], state > rp.State.NONE, [False]])
        edges = np.flatnonzero(np.diff(alive.astype(int)))
        out += [(row, int(a), int(b) - 1) for a, b in edges.reshape(-1, 2)]
    return out


def _apart(found: rp.Branches, row: int, frame: int, other: int, at: int) -> float:
    away = found.positions[row, frame] - found.positions[other, at]
    return float(np.abs(away).max())
