"""What could be made known so that a moving group stands still: drives, targets, extra lengths.

A candidate is judged by its slope along the real motions. Its margin is one over the largest
movement of a joint of the group per unit change of it (a driven angle counts as arc at the end
of the driven line), cut at 1.
"""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass
from itertools import combinations
from math import comb

import numpy as np

from rigpose.model.equations import Array, Equations
from rigpose.model.gauges import gauge_gradients
from rigpose.model.rig import Pair
from rigpose.solve.moving import Mover

HOLDS = 1e-4
"""A set whose least singular value along the motions is below this does not hold them."""
MOST_SETS = 4000


@dataclass(frozen=True)
class Candidate:
    """One drive, one coordinate of a joint, or one extra length; ``slope (freedoms,)``."""

    kind: str
    drive: str = ""
    target: tuple[str, int] = ("", 0)
    ends: Pair = ("", "")
    slope: tuple[float, ...] = ()


@dataclass(frozen=True)
class Choice:
    """Candidates that hold a group together, with the margin that they give."""

    members: tuple[Candidate, ...]
    margin: float

    @property
    def kinds(self) -> frozenset[str]:
        """The kinds that occur."""
        return frozenset(c.kind for c in self.members)


def candidates(eqs: Equations, group: Mover) -> list[Candidate]:
    """All candidates that move with a group: drives, then targets, then lengths."""
    motion = np.zeros((eqs.n * eqs.dim, group.freedoms))
    columns = (group.joints[:, None] * eqs.dim + np.arange(eqs.dim)).ravel()
    motion[columns] = group.tangents
    found = [*_drives(eqs, group, motion), *_targets(eqs, group), *_lengths(eqs, group, motion)]
    return [c for c in found if np.linalg.norm(c.slope) > HOLDS]


def _drives(eqs: Equations, group: Mover, motion: Array) -> Iterator[Candidate]:
    numbers = np.arange(len(eqs.values))
    with np.errstate(invalid="ignore", divide="ignore"):
        _, cols, slopes = gauge_gradients(eqs, group.pose[None], numbers)
    angle = {int(v): k for k, v in enumerate(eqs.angles.value)}
    for v, name in enumerate(eqs.values):
        slope = slopes[0, v] @ motion[cols[v]]
        if v in angle:
            a, b = eqs.angles.line[angle[v]]
            slope = slope * np.linalg.norm(group.pose[b] - group.pose[a])
        if np.isfinite(slope).all():
            yield Candidate("drive", drive=name, slope=tuple(map(float, slope)))


def _targets(eqs: Equations, group: Mover) -> Iterator[Candidate]:
    for k, j in enumerate(group.joints):
        for axis in range(eqs.dim):
            slope = group.tangents[k * eqs.dim + axis]
            yield Candidate("target", target=(eqs.rig.joint_names[j], axis),
                            slope=tuple(map(float, slope)))


def _lengths(eqs: Equations, group: Mover, motion: Array) -> Iterator[Candidate]:
    """Lengths between joints two parts apart: the braces that a person would draw."""
    held = _neighbours(eqs)
    moving = {int(j) for j in group.joints}
    near = moving.union(*(held[j] for j in moving))
    pairs = {(a, b) for via in near for a, b in combinations(sorted(held[via] & near), 2)
             if b not in held[a] and (a in moving or b in moving)}
    names = eqs.rig.joint_names
    for a, b in sorted(pairs):
        gap = group.pose[b] - group.pose[a]
        long = float(np.linalg.norm(gap))
        # A length that is zero at rest could not be written into the rig.
        if min(long, float(np.linalg.norm(eqs.at[b] - eqs.at[a]))) > 1e-6:
            rows = motion.reshape(eqs.n, eqs.dim, -1)
            slope = (gap / long) @ (rows[b] - rows[a])
            yield Candidate("length", ends=(names[a], names[b]), slope=tuple(map(float, slope)))


def _neighbours(eqs: Equations) -> list[set[int]]:
    """For each joint those that a length, a body or the ground holds at a fixed distance."""
    held: list[set[int]] = [set() for _ in range(eqs.n)]
    groups = [eqs.distances.ends[k] for k in np.flatnonzero(eqs.distances.value < 0)]
    for some in (*groups, *(b.joints for b in eqs.bodies)):
        for j in map(int, some):
            held[j] |= {int(i) for i in some} - {j}
    pins = {int(j) for j in np.flatnonzero(eqs.pinned)}
    for j in pins:
        held[j] |= pins - {j}
    return held


def choices(group: Mover, pool: list[Candidate], dim: int) -> list[Choice]:
    """Sets that hold a group, as many candidates as it has freedoms, in the pool's order."""
    k = group.freedoms
    sure = _greedy(pool, k)
    if len(sure) < k:
        return []
    some = _thinned(pool, sure, k)
    picks = np.array(list(combinations(range(len(some)), k)), dtype=np.intp)
    margin = _margins(group, np.array([c.slope for c in some])[picks], dim)
    return [Choice(tuple(some[i] for i in picks[n]), float(margin[n]))
            for n in np.flatnonzero(margin > 0)]


def _greedy(pool: list[Candidate], k: int) -> list[Candidate]:
    """One set: each candidate in turn that adds to those before it."""
    chosen: list[Candidate] = []
    basis = np.zeros((0, k))
    for c in pool:
        left = np.array(c.slope)
        for _ in range(2):
            left = left - basis.T @ (basis @ left)
        long = float(np.linalg.norm(left))
        if long > 10 * HOLDS and len(chosen) < k:
            chosen.append(c)
            basis = np.vstack([basis, left / long])
    return chosen


def _thinned(pool: list[Candidate], sure: list[Candidate], k: int) -> list[Candidate]:
    """The pool, less the weakest of each kind where it has too many sets to try."""
    size = np.round(np.linalg.norm(np.array([c.slope for c in pool]), axis=1), 6)
    order = np.argsort(-size, kind="stable")
    kinds = [np.array([n for n in order if pool[n].kind == kind], dtype=np.intp)
             for kind in ("drive", "target", "length")]
    always = [n for n, c in enumerate(pool) if any(c is s for s in sure)]
    for most in (len(pool), 64, 32, 16, 8, 6, 4, 3, 2, 0):
        keep = sorted({*always, *(int(n) for kind in kinds for n in kind[:most])})
        if comb(len(keep), k) <= MOST_SETS:
            return [pool[n] for n in keep]
    return sure


def _margins(group: Mover, slopes: Array, dim: int) -> Array:
    """Margins ``(N,)`` of sets ``slopes (N, k, k)``; zero where the set does not hold."""
    u, s, vt = np.linalg.svd(slopes)
    good = s[:, -1] > HOLDS
    inverse = np.einsum("nki,nk,njk->nij", vt, 1 / np.maximum(s, HOLDS), u)
    move = (group.tangents @ inverse).reshape(len(slopes), -1, dim, slopes.shape[2])
    far = np.linalg.norm(move, axis=2).max(axis=(1, 2))
    out: Array = np.where(good, np.minimum(1.0, 1.0 / far), 0.0)
    return out
