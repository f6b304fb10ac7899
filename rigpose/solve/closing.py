"""Lengths that can never close: triangle and chain inequalities, with the amounts.

Every pair of joints that a part holds apart by at least so much must be reachable from one
another along other parts at their longest. Shortest ways over the longest lengths say whether
(the polygon inequality over every loop at once; Dijkstra 1959 through `scipy.sparse.csgraph`).
"""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass
from itertools import combinations
from math import dist
from typing import NamedTuple

import numpy as np
from scipy.sparse import csr_array
from scipy.sparse.csgraph import dijkstra

from rigpose.model.equations import Array, Ints
from rigpose.model.rig import Pair, Plate, Rail, Rig

NEVER_ZERO = 1e-300
"""Stands for a gap of zero, which a sparse graph would take for no edge."""
GROUND = "the ground"
AT_ONCE = 256
"""Shortest ways are looked for from so many joints at a time, which bounds the memory."""


@dataclass(frozen=True)
class Gap:
    """``part`` holds ``ends`` at least ``least`` apart; the ``chain`` reaches ``reach`` at most.

    Lengths in the rig's unit; ``short`` is what is missing.
    """

    part: str
    ends: Pair
    least: float
    chain: tuple[str, ...]
    reach: float

    @property
    def short(self) -> float:
        """By how much the chain is too short."""
        return self.least - self.reach


class Reach(NamedTuple):
    """One pair of joints that a part keeps between ``least`` and ``most``."""

    part: str
    a: int
    b: int
    least: float
    most: float


def open_gaps(rig: Rig, tolerance: float, pose: Array | None = None) -> tuple[Gap, ...]:
    """All that can never close by more than ``tolerance`` (rig's unit), widest first.

    pose : (n_joints, dim) where one is known that keeps all but the ranges of rams, in the rig's
    frame: if it keeps those as well, then everything can close
    """
    if pose is not None and _hold(list(_rams(rig)), pose, tolerance / (len(rig.joints) + 1)):
        return ()
    reaches = [*_parts(rig), *_on_ground(rig)]
    if not reaches:
        return ()
    best = _longest_ways(reaches)
    n = len(rig.joints)
    ends = np.array(list(best), dtype=np.intp)
    graph = csr_array(([max(r.most, NEVER_ZERO) for r in best.values()],
                       (ends[:, 0], ends[:, 1])), shape=(n, n)) if best else csr_array((n, n))
    held = [r for r in reaches if r.least > 0]
    sources = np.unique(np.array([r.a for r in held], dtype=np.intp))
    gaps: list[Gap] = []
    for start in range(0, len(sources), AT_ONCE):
        some = sources[start : start + AT_ONCE]
        far, before = dijkstra(graph, False, some, True)
        row = {int(s): k for k, s in enumerate(some)}
        for r in (r for r in held if r.a in row):
            if far[row[r.a], r.b] < r.least - tolerance:
                way = _way(before[row[r.a]], r.a, r.b)
                chain = tuple(best[min(e), max(e)].part for e in way)
                pair = (rig.joint_names[r.a], rig.joint_names[r.b])
                gaps.append(Gap(r.part, pair, r.least, chain, float(far[row[r.a], r.b])))
    return tuple(sorted(gaps, key=lambda g: -g.short))


def _hold(reaches: list[Reach], pose: Array, tolerance: float) -> bool:
    """Whether a pose has every pair of joints within its reach. Along a chain what they are off
    by adds up, so each may have but a share of what is told."""
    ends = np.array([(r.a, r.b) for r in reaches], dtype=np.intp).reshape(-1, 2)
    away = pose[ends[:, 1]] - pose[ends[:, 0]]
    gap = np.sqrt((away * away).sum(axis=1))
    least = np.array([r.least for r in reaches])
    most = np.array([r.most for r in reaches])
    return bool((gap >= least - tolerance).all() and (gap <= most + tolerance).all())


def _way(before: Ints, a: int, b: int) -> list[tuple[int, int]]:
    """The edges of the shortest way from a to b."""
    way = []
    while b != a:
        way.append((int(before[b]), b))
        b = int(before[b])
    return way[::-1]


def _longest_ways(reaches: list[Reach]) -> dict[tuple[int, int], Reach]:
    """For each pair of joints the part that keeps them closest together."""
    best: dict[tuple[int, int], Reach] = {}
    for r in reaches:
        key = (min(r.a, r.b), max(r.a, r.b))
        if np.isfinite(r.most) and (key not in best or r.most < best[key].most):
            best[key] = r
    return best


def _parts(rig: Rig) -> Iterator[Reach]:
    """Bones, rams and plates."""
    at = rig.index
    for bone in rig.bones:
        yield Reach(bone.name, at[bone.ends[0]], at[bone.ends[1]], bone.length, bone.length)
    yield from _rams(rig)
    for plate in rig.plates:
        yield from _plate(rig, plate)


def _rams(rig: Rig) -> Iterator[Reach]:
    for ram in rig.rams:
        low, high = ram.range or (0.0, np.inf)
        yield Reach(ram.name, rig.index[ram.ends[0]], rig.index[ram.ends[1]], low, high)


def _on_ground(rig: Rig) -> Iterator[Reach]:
    """Pinned joints, and pinned joints with rails."""
    at = rig.index
    pins = [j for j in rig.joints if j.pin and j.at is not None]
    for p, q in combinations(pins, 2):
        gap = float(np.linalg.norm(np.subtract(p.at, q.at)))  # type: ignore[arg-type]
        yield Reach(GROUND, at[p.name], at[q.name], gap, gap)
    for rail in rig.rails:
        if rail.through is not None and rail.direction is not None:
            for p in pins:
                if p.name != rail.joint:
                    least = _from_rail(rail, np.array(p.at))
                    yield Reach(rail.name, at[p.name], at[rail.joint], least, np.inf)


def _plate(rig: Rig, plate: Plate) -> Iterator[Reach]:
    """All pairs of a plate's joints."""
    joints = [rig.index[j] for j in plate.joints]
    for (i, p), (j, q) in combinations(zip(joints, plate.shape, strict=True), 2):
        gap = dist(p, q)
        yield Reach(plate.name, i, j, gap, gap)


def _from_rail(rail: Rail, place: Array) -> float:
    """How far a place lies from a rail on the ground, or from the stretch of its range."""
    start, way = np.array(rail.through), np.array(rail.direction)
    along = float((place - start) @ way)
    if rail.range is not None:
        along = float(np.clip(along, *rail.range))
    return float(np.linalg.norm(place - start - along * way))
