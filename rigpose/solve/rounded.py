"""Rigs whose numbers are rounded: they would move if a few lengths were a little different.

A singular value that is small but not zero, far below the next, is the trace of a motion that
rounding has stopped. Each length of the redundant set is left out in turn, the rig is moved with
all others exact, and the length is measured on the way: the one that varies least is the one to
mend, and what it departs from its number is the slack with which the rig would move as it is.
"""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np

from rigpose.model.equations import Array
from rigpose.model.system import System
from rigpose.solve.mobility import Motions, motions
from rigpose.solve.pieces import Piece, unknown
from rigpose.solve.redundant import ABSENT, circuits
from rigpose.solve.rest import assemble

SMALL = 3e-3
LARGEST_SLACK = 1e-3
"""Above these a singular value, or the slack that is needed, is no trace of rounding but of a
dead centre close by; numbers rounded to three decimals stay below."""
APART = 12.0
"""How much larger the next singular value must be at least."""
LOOSER = (1.05, 1.4, 2.0, 3.0, 5.0)
"""Fractions of a small singular value that are tried as zero: it grows a little on the way."""
WALK = 0.02
STEPS = 12
MOST_TRIED = 16
MOST_UNKNOWNS = 300
"""Coordinates of a piece above which this is not looked into."""


@dataclass(frozen=True)
class Mend:
    """A length that stops a motion: ``part`` is ``length`` long, ``better`` would let it move."""

    part: str
    length: float
    better: float


@dataclass(frozen=True)
class Rounding:
    """A rig that would have ``freedoms`` with ``slack`` (a fraction of the size) at least.

    mends : lengths to change (rig's unit); left : the slack still needed then
    """

    freedoms: int
    slack: float
    mends: tuple[Mend, ...]
    left: float


def rounding_of(motion: Motions, rest: Array, zero: float, reach: float) -> Rounding | None:
    """Whether a piece would move more if small singular values counted as zero."""
    piece = motion.piece
    if motion.structural or len(piece.columns) > MOST_UNKNOWNS:
        return None
    for edge in _edges(motion.singular, zero):
        for more in LOOSER:
            looser = motions(piece, rest, more * edge, reach)
            if looser.finite > motion.finite:
                found = _measured(looser, motion, rest, more * edge, reach)
                return found if found.slack <= LARGEST_SLACK else None
    return None


def _edges(rising: Array, zero: float) -> list[float]:
    """Small singular values with a gap above them."""
    following = np.append(rising[1:], 1.0)
    small = (rising > zero) & (rising < SMALL) & (following > APART * rising)
    return [float(s) for s in rising[small]]


def _measured(
    looser: Motions, now: Motions, rest: Array, edge: float, reach: float
) -> Rounding:
    piece = looser.piece
    best: tuple[float, float, tuple[Mend, ...]] | None = None
    for rows in _choices(looser, now):
        found = _walked(piece, rows, _added(looser, now), rest)
        if found is None:
            continue
        low, high = found.min(axis=0), found.max(axis=0)
        eqs, length = piece.system.eqs, _lengths(piece, rows)
        worst = float(np.abs(found - length).max())
        left = float((high - low).max() / 2)
        if best is None or left < best[0] * (1 - 1e-6):
            names = [piece.names[r] for r in rows]
            mends = tuple(Mend(n, float(a * eqs.scale), float(b * eqs.scale))
                          for n, a, b in zip(names, length, (low + high) / 2, strict=True))
            best = (left, worst, mends)
    if best is None:
        return Rounding(looser.finite, edge / 10, (), edge / 10)
    return Rounding(looser.finite, max(best[1] / reach, edge / 10), best[2],
                    best[0] / reach)


def _lengths(piece: Piece, rows: tuple[int, ...]) -> Array:
    d = piece.system.eqs.distances
    out: Array = d.length[piece.system.dist_rows[piece.rows[list(rows)]]]
    return out


def _choices(looser: Motions, now: Motions) -> list[tuple[int, ...]]:
    """Which bones to leave out, as rows of the piece: one for each condition that is lost.

    Where it is only one, every bone of its set is a choice.
    """
    piece = looser.piece
    bones = len(piece.system.dist_rows)
    every = circuits(piece.system, piece.rows, looser.stresses)
    held = {e for e, _ in circuits(piece.system, piece.rows, now.stresses)}
    new = [(e, c) for e, c in every if e not in held]
    if any(piece.rows[e] >= bones for e, _ in new) or not new:
        return []
    if len(new) > 1:
        return [tuple(e for e, _ in new)]
    share = np.abs(new[0][1])
    members = np.flatnonzero((share > ABSENT * share.max()) & (piece.rows < bones))
    return [(int(k),) for k in members[:MOST_TRIED]]


def _added(looser: Motions, now: Motions) -> Array:
    """The motion ``(c,)`` that rounding has stopped: the one farthest from those that go on."""
    more = looser.tangents - now.tangents @ (now.tangents.T @ looser.tangents)
    return np.asarray(np.linalg.svd(more, full_matrices=False)[0][:, 0])


def _walked(piece: Piece, rows: tuple[int, ...], added: Array, rest: Array) -> Array | None:
    """The lengths of bones ``rows`` on a walk both ways with all others exact, ``(w, r)``."""
    names = frozenset(piece.names[r] for r in rows)
    system = replace(piece.system, without=piece.system.without | names)
    ends = piece.system.eqs.distances.ends[
        piece.system.dist_rows[piece.rows[list(rows)]]]
    start = np.zeros(rest.size)
    start[piece.columns] = added
    poses = [rest]
    for sign in (1.0, -1.0):
        walk = _walk(system, rest, sign * start)
        if walk is None:
            return None
        poses += walk
    x = np.array(poses)
    return np.asarray(np.linalg.norm(x[:, ends[:, 1]] - x[:, ends[:, 0]], axis=2))


def _walk(system: System, rest: Array, way: Array) -> list[Array] | None:
    """Poses on a walk from rest, the first step in the direction ``way (n * dim,)``."""
    x, poses = rest, []
    values = unknown(system, 1)
    for _ in range(STEPS):
        moved = x + WALK * (way / np.abs(way).max()).reshape(x.shape)
        done, size = assemble(system, moved[None], values, steps=20)
        if size[0] > 1e-11:
            return None
        way = (done[0] - x).ravel()
        if np.abs(way).max() < WALK / 4:
            return None
        x = done[0]
        poses.append(x)
    return poses
