"""What a piece can still do: to first order, and by a finite amount.

Rank at one pose is not mobility. Each motion that exists to first order is tried by a step, the
piece is assembled again, and only what is still there counts. Rows and columns are split once
into a regular square and the rest (pivoted QR); Newton then runs on the small Schur complement,
whose singular values below ``zero`` are left out (truncated least squares). A motion of first
order only falls back: at a double root each Newton step halves it (Decker, Keller and Kelley
1983, SIAM J. Numer. Anal. 20(2), from memory).
"""

from __future__ import annotations

from dataclasses import dataclass, field
from functools import cached_property

import numpy as np
from scipy.linalg import qr

from rigpose.model.equations import Array, Ints
from rigpose.solve.pieces import Piece

STEP = 1e-3
"""A trial step as a fraction of the size, or of four typical lengths where the rig is longer;
a larger fraction where slack would hide what it shows, a smaller one where a bone is short."""
ROUNDS = 30
STILL = 1e-5
"""Newton has ended when it moves less than this fraction of the trial step."""
KEPT = 0.1
"""A motion is real when at least this fraction of its step is left after assembling."""
SAME_WAY = 0.95
"""Cosine above which two steps go the same way; a curved way and its way back differ a little."""
SEED = 23


@dataclass(frozen=True)
class Motions:
    """What one piece can do.

    first : motions to first order at rest; finite : real ones; ways : how many motions meet at
    rest; pose (n, dim) : a pose close to rest, moved along a real motion (rest if there is none)
    tangents (c, finite) : the real motions there; lame (c, ...) : those of first order only
    stresses (m, ...) : combinations of rows that are redundant there
    exact : whether ``tangents`` hold to rounding; structural : counted by structure, redundant
    rows not looked for; singular : singular values at rest, rising
    unknown : structure doesn't tell how many motions there are
    """

    piece: Piece
    first: int
    finite: int
    ways: int
    pose: Array
    tangents: Array
    lame: Array
    stresses: Array
    exact: bool = True
    structural: bool = False
    singular: Array = field(default_factory=lambda: np.zeros(0))
    unknown: bool = False


@dataclass(frozen=True)
class Reduced:
    """Newton's matrices at poses, split: ``lift (N, r, k)`` moves the led columns with the
    leading ones, ``fall (N, r)`` closes the held rows, ``schur (N, s, k)`` and ``gap (N, s)``
    are the spare rows once the held ones hold, ``carry (N, s, r)`` their stress on held rows."""

    lift: Array
    fall: Array
    schur: Array
    gap: Array
    carry: Array
    residual: Array


@dataclass(frozen=True)
class Split:
    """A piece at rest with a regular square of ``held`` rows by ``led`` columns chosen."""

    piece: Piece
    rest: Array
    zero: float
    step: float
    singular: Array
    held: Ints
    spare: Ints
    led: Ints
    lead: Ints

    @cached_property
    def free(self) -> int:
        """Motions to first order."""
        return len(self.lead)

    def reduced(self, x: Array) -> Reduced:
        """Newton's matrices at poses ``(N, n, dim)``."""
        residual, jac = self.piece.both(x)
        top, low = jac[:, self.held], jac[:, self.spare]
        square = top[:, :, self.led]
        right = np.concatenate([top[:, :, self.lead], residual[:, self.held, None]], axis=2)
        solved = -_solve(square, right)
        lift, fall = solved[:, :, :-1], solved[:, :, -1]
        under = low[:, :, self.led]
        carry = -np.swapaxes(_solve(np.swapaxes(square, 1, 2), np.swapaxes(under, 1, 2)), 1, 2)
        return Reduced(
            lift, fall, low[:, :, self.lead] + under @ lift,
            residual[:, self.spare] + np.einsum("nsr,nr->ns", under, fall), carry,
            np.abs(residual).max(axis=1, initial=0.0))

    def whole(self, led: Array, lead: Array) -> Array:
        """Led and leading parts ``(N, r)``, ``(N, k)`` put together to moves ``(N, c)``."""
        out = np.zeros((len(lead), len(self.led) + len(self.lead)))
        out[:, self.led], out[:, self.lead] = led, lead
        return out

    def tangent(self, reduced: Reduced, k: int, basis: Array) -> Array:
        """Orthonormal moves ``(c, b)`` of pose ``k`` whose leading parts span ``basis (k, b)``."""
        moves = self.whole((reduced.lift[k] @ basis).T, basis.T).T
        return np.asarray(np.linalg.qr(moves)[0])

    def settle(self, x: Array) -> tuple[Array, Reduced]:
        """Newton from poses ``(N, n, dim)``; singular values below ``zero`` are left out."""
        for _ in range(ROUNDS):
            r = self.reduced(x)
            lead = -_truncated(r.schur, r.gap, self.zero)
            long = np.linalg.norm(lead, axis=1, keepdims=True)
            lead *= np.minimum(1.0, self.step / np.maximum(long, 1e-300))
            led = r.fall + np.einsum("nrk,nk->nr", r.lift, lead)
            x = self.piece.shifted(x, self.whole(led, lead))
            moved = max(np.abs(led).max(initial=0.0), np.abs(lead).max(initial=0.0))
            if moved < STILL * self.step:
                break
        return x, self.reduced(x)


def _solve(square: Array, right: Array) -> Array:
    if square.shape[-1] == 0:
        return np.zeros_like(right)
    try:
        return np.asarray(np.linalg.solve(square, right), dtype=np.float64)
    except np.linalg.LinAlgError:
        return np.asarray(np.linalg.pinv(square) @ right)


def _truncated(matrix: Array, right: Array, zero: float) -> Array:
    """Shortest least-squares solutions ``(N, k)``, singular values below ``zero`` left out."""
    if 0 in matrix.shape[1:]:
        return np.zeros((len(matrix), matrix.shape[2]))
    u, s, vt = np.linalg.svd(matrix, full_matrices=False)
    inverse = np.where(s > zero, 1 / np.where(s > zero, s, 1.0), 0.0)
    along = inverse * np.einsum("nsj,ns->nj", u, right)
    return np.asarray(np.einsum("njk,nj->nk", vt, along))


def rank_split(piece: Piece, rest: Array, zero: float, reach: float) -> Split:
    """Split a piece at rest ``(n, dim)``; ``reach`` is the rig's size in the scaled frame."""
    jac = piece.both(rest[None])[1][0]
    m, c = jac.shape
    s = np.linalg.svd(jac, compute_uv=False) if min(m, c) else np.zeros(0)
    rank = int((s > zero).sum())
    columns = qr(jac, mode="r", pivoting=True)[1] if min(m, c) else np.arange(c)
    led, lead = np.sort(columns[:rank]), np.sort(columns[rank:])
    rows = qr(jac[:, led].T, mode="r", pivoting=True)[1] if rank else np.arange(m)
    held, spare = np.sort(rows[:rank]), np.sort(rows[rank:])
    typical, shortest = piece.lengths(reach)
    step = max(STEP, 3 * np.sqrt(zero)) * typical
    step = min(step, max(0.3 * shortest, 30 * zero * typical))
    return Split(piece, rest, zero, step, s[::-1], held, spare, led, lead)


def motions(piece: Piece, rest: Array, zero: float, reach: float) -> Motions:
    """First-order and finite motions of a piece at ``rest (n, dim)`` of size ``reach``."""
    split = rank_split(piece, rest, zero, reach)
    at_rest = split.reduced(rest[None])
    if not split.free:
        return _local(split, rest, at_rest, 0, 1)
    moved, reduced = _moved(split, at_rest)
    left = split.free - _ranks(reduced.schur, zero)
    best: Motions | None = None
    for k in sorted(_distinct(split, moved), key=lambda k: -int(left[k]))[:8]:
        if best is not None and best.finite >= left[k]:
            break
        found = _local(split, moved[k], reduced, k, 1)
        if best is None or found.finite > best.finite:
            best = found
    if best is None or not best.finite:
        # Without a spare row every motion goes on (implicit function theorem).
        return _local(split, rest, at_rest, 0, 0 if len(split.spare) else 1)
    return _with_ways(split, best, moved)


def _ranks(schur: Array, zero: float) -> Ints:
    if 0 in schur.shape:
        return np.zeros(len(schur), dtype=np.intp)
    return np.asarray((np.linalg.svd(schur, compute_uv=False) > zero).sum(axis=1), dtype=np.intp)


def _pushes(n: int, k: int) -> Array:
    """Directions ``(N, k)``: each motion both ways where there are few, and random ones."""
    rng = np.random.default_rng(SEED)
    some = rng.normal(size=(n, k))
    few = np.concatenate([np.eye(k), -np.eye(k)]) if k <= 4 else np.zeros((0, k))
    return np.concatenate([few, some])


def _moved(split: Split, at_rest: Reduced) -> tuple[Array, Reduced]:
    """Poses that are still away from rest after a step and assembling, ``(N, n, dim)``."""
    basis = split.tangent(at_rest, 0, np.eye(split.free))
    move = _pushes(8 + min(split.free, 12), split.free) @ basis.T
    move *= split.step / split.piece.per_joint(move).max(axis=1, keepdims=True)
    start = split.piece.shifted(np.repeat(split.rest[None], len(move), axis=0), move)
    x, reduced = split.settle(start)
    left = _away(split, x, split.rest)
    allowed = max(2 * float(at_rest.residual[0]), split.zero / 10, 1e-10)
    good = (left >= KEPT * split.step) & (reduced.residual <= allowed)
    return x[good], _select(reduced, np.flatnonzero(good))


def _select(r: Reduced, which: Ints) -> Reduced:
    return Reduced(r.lift[which], r.fall[which], r.schur[which], r.gap[which], r.carry[which],
                   r.residual[which])


def _moves(split: Split, x: Array, origin: Array) -> Array:
    flat: Array = (x - origin).reshape(len(x), split.rest.size)[:, split.piece.columns]
    return flat


def _away(split: Split, x: Array, origin: Array) -> Array:
    far: Array = split.piece.per_joint(_moves(split, x, origin)).max(axis=1, initial=0.0)
    return far


def _directions(split: Split, x: Array) -> Array:
    move = _moves(split, x, split.rest)
    out: Array = move / np.maximum(np.linalg.norm(move, axis=1, keepdims=True), 1e-300)
    return out


def _distinct(split: Split, x: Array) -> list[int]:
    """Which poses lie in different directions from rest, a motion and its way back being one."""
    way = _directions(split, x)
    chosen: list[int] = []
    for k in range(len(x)):
        if all(abs(way[k] @ way[c]) < SAME_WAY for c in chosen):
            chosen.append(k)
    return chosen


def _with_ways(split: Split, best: Motions, moved: Array) -> Motions:
    """Counts the motions that meet at rest; more than one only says much of single motions."""
    ways = len(_distinct(split, moved)) if best.finite == 1 and len(split.spare) else 1
    return Motions(best.piece, best.first, best.finite, ways, best.pose, best.tangents, best.lame,
                   best.stresses, best.exact, False, best.singular)


def _local(split: Split, pose: Array, reduced: Reduced, k: int, ways: int) -> Motions:
    """Motions at one assembled pose, where ``reduced`` has them as number ``k``."""
    schur = reduced.schur[k]
    if 0 in schur.shape:
        rank, right, left = 0, np.eye(schur.shape[1]), np.eye(schur.shape[0])
    else:
        u, s, vt = np.linalg.svd(schur)
        rank = int((s > split.zero).sum())
        right, left = vt[rank:].T, u[:, rank:]
    span = split.tangent(reduced, k, right)
    if left.shape[1] and span.shape[1] and ways:
        real, lame = _tried(split, pose, span)
    else:
        real, lame = (span, span[:, :0]) if ways else (span[:, :0], span)
    stress = _lasting(split, pose, left, lame)
    rows = np.zeros((len(split.piece.rows), stress.shape[1]))
    rows[split.spare] = stress
    rows[split.held] = reduced.carry[k].T @ stress
    return Motions(split.piece, split.free, real.shape[1], ways, pose, real, lame,
                   rows * split.piece.weight[:, None], not lame.shape[1], False, split.singular)


def _tried(split: Split, pose: Array, span: Array) -> tuple[Array, Array]:
    """Parts ``span (c, b)`` into real motions and those that fall back, by trial steps."""
    b = span.shape[1]
    push = np.random.default_rng(SEED).normal(size=(b + min(b, 8) + 3, b))
    push *= split.step / np.linalg.norm(push, axis=1, keepdims=True)
    start = split.piece.shifted(np.repeat(pose[None], len(push), axis=0), push @ span.T)
    x, _ = split.settle(start)
    left = _moves(split, x, pose) @ span / split.step
    _, s, vt = np.linalg.svd(left)
    real = int((s > KEPT).sum())
    return span @ vt[:real].T, span @ vt[real:].T


def _lasting(split: Split, pose: Array, left: Array, lame: Array) -> Array:
    """Stresses on spare rows ``(s, ...)`` that stay when first-order motions move: redundancy.

    A stress that such a motion ends is what holds it, so none of its lengths may go.
    """
    if not lame.shape[1] or not left.shape[1]:
        return left
    h = 0.1 * split.step
    x = split.piece.shifted(np.repeat(pose[None], lame.shape[1], axis=0), h * lame.T)
    ended = np.concatenate(list(left.T @ split.reduced(x).schur / h), axis=1)
    u, s, _ = np.linalg.svd(ended)
    return np.asarray(left @ u[:, int((s > 1e-3).sum()) :])
