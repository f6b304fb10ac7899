"""Rows of bodies, lines and angles in space, with their derivatives.

A plate is never a set of distances: its other joints are affine in three of its joints and their
unit normal, so that it keeps its hand; a plate whose joints lie in one line is affine in two.
"""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import dataclass

import numpy as np

from rigpose.model.equations import Array, Body, Ints

Family = tuple[Array, Ints, Array]
FLAT = 1e-9
"""Joints nearer to a line than this part of a body's length lie on it."""


@dataclass(frozen=True)
class BodyRows:
    """What bodies need: base distances ``ends (m, 2)``, ``length (m,)``; joints on lines
    ``on_line (k, 3)`` with their ``share (k,)``; joints by frames ``by_frame (k, 4)`` with
    ``weights (k, 3)`` along two edges and the unit normal. ``names`` of each kind's bodies."""

    ends: Ints
    length: Array
    on_line: Ints
    share: Array
    by_frame: Ints
    weights: Array
    names: tuple[tuple[str, ...], tuple[str, ...], tuple[str, ...]]


def third_of(shape: Array, a: int, b: int) -> int | None:
    """The joint farthest off the line through two joints, or None where all lie on it."""
    e = shape[b] - shape[a]
    long = float(np.linalg.norm(e))
    off = np.linalg.norm(np.cross(shape - shape[a], e), axis=1) / long
    k = int(np.argmax(off))
    return k if off[k] > FLAT * long else None


def body_rows(bodies: Iterable[Body]) -> BodyRows:
    """The rows of bodies in space."""
    ends, lengths, lines, shares, frames, weights = [], [], [], [], [], []
    names: tuple[list[str], list[str], list[str]] = ([], [], [])
    for body in bodies:
        a, b = body.base
        c = third_of(body.shape, a, b)
        base = [(a, b)] if c is None else [(a, b), (a, c), (b, c)]
        for i, j in base:
            ends.append((body.joints[i], body.joints[j]))
            lengths.append(float(np.linalg.norm(body.shape[i] - body.shape[j])))
            names[0].append(body.name)
        for k in range(len(body.joints)):
            if k in (a, b, c):
                continue
            if c is None:
                e, w = body.shape[b] - body.shape[a], body.shape[k] - body.shape[a]
                lines.append((body.joints[a], body.joints[b], body.joints[k]))
                shares.append(float(w @ e) / float(e @ e))
                names[1].append(body.name)
            else:
                frames.append(tuple(body.joints[j] for j in (a, b, c, k)))
                weights.append(_weights(body.shape, a, b, c, k))
                names[2].append(body.name)
    return BodyRows(
        np.array(ends, dtype=np.intp).reshape(-1, 2), np.array(lengths),
        np.array(lines, dtype=np.intp).reshape(-1, 3), np.array(shares),
        np.array(frames, dtype=np.intp).reshape(-1, 4), np.array(weights).reshape(-1, 3),
        (tuple(names[0]), tuple(names[1]), tuple(names[2])))


def _weights(shape: Array, a: int, b: int, c: int, k: int) -> Array:
    e, f = shape[b] - shape[a], shape[c] - shape[a]
    n = np.cross(e, f)
    weights: Array = np.linalg.solve(np.column_stack([e, f, n / np.linalg.norm(n)]),
                                     shape[k] - shape[a])
    return weights


def columns(joints: Ints) -> Ints:
    """Columns ``(m, 3 w)`` of the coordinates of joints ``(m, w)``."""
    return (joints[..., None] * 3 + np.arange(3)).reshape(len(joints), joints.shape[1] * 3)


def on_line_rows(x: Array, rows: BodyRows) -> Family:
    """``c - a - share (b - a)`` for joints on a body's line, three rows each."""
    a, b, c = (x[:, rows.on_line[:, k]] for k in range(3))
    share = rows.share[:, None]
    residual = c - a - share * (b - a)
    m = len(rows.share)
    slopes = np.zeros((m, 3, 3, 3))
    eye = np.eye(3)
    slopes[:, :, 0] = (rows.share - 1.0)[:, None, None] * eye
    slopes[:, :, 1] = -rows.share[:, None, None] * eye
    slopes[:, :, 2] = eye
    cols = np.repeat(columns(rows.on_line), 3, axis=0)
    flat = np.broadcast_to(slopes.reshape(1, 3 * m, 9), (len(x), 3 * m, 9))
    return residual.reshape(len(x), 3 * m), cols, flat


def by_frame_rows(x: Array, rows: BodyRows) -> Family:
    """``d - a - u (b - a) - v (c - a) - w n`` with the unit normal n, three rows each."""
    a, b, c, d = (x[:, rows.by_frame[:, k]] for k in range(4))
    u, v, w = (rows.weights[:, k][:, None] for k in range(3))
    e, f = b - a, c - a
    normal = _cross(e, f)
    long = np.sqrt((normal * normal).sum(axis=-1, keepdims=True))
    n = normal / long
    residual = d - a - u * e - v * f - w * n
    m, eye = len(rows.weights), np.eye(3)
    # The normal's slopes are (1 - n n') / long times a cross product's: n n' [v]x = n (n x v)'.
    by_e, by_f = _across(n, f, -long), _across(n, e, long)
    slopes = np.zeros((len(x), m, 3, 4, 3))
    at_b = -u[..., None] * eye - w[..., None] * by_e
    at_c = -v[..., None] * eye - w[..., None] * by_f
    slopes[:, :, :, 1], slopes[:, :, :, 2], slopes[:, :, :, 3] = at_b, at_c, eye
    slopes[:, :, :, 0] = -eye - at_b - at_c
    cols = np.repeat(columns(rows.by_frame), 3, axis=0)
    return residual.reshape(len(x), 3 * m), cols, slopes.reshape(len(x), 3 * m, 12)


def _across(n: Array, v: Array, long: Array) -> Array:
    """Matrices ``(..., 3, 3)`` of what the cross product with v leaves square to n, over long."""
    out = _cross_matrix(v)
    out -= n[..., :, None] * _cross(n, v)[..., None, :]
    out /= long[..., None]
    return out


def _cross(a: Array, b: Array) -> Array:
    """Vector products ``(..., 3)``."""
    out = np.empty(np.broadcast_shapes(a.shape, b.shape))
    for k in range(3):
        i, j = (k + 1) % 3, (k + 2) % 3
        out[..., k] = a[..., i] * b[..., j] - a[..., j] * b[..., i]
    return out


def _cross_matrix(v: Array) -> Array:
    """Matrices ``(..., 3, 3)`` M with ``M w = v x w``."""
    out = np.zeros((*v.shape, 3))
    out[..., 0, 1], out[..., 0, 2] = -v[..., 2], v[..., 1]
    out[..., 1, 0], out[..., 1, 2] = v[..., 2], -v[..., 0]
    out[..., 2, 0], out[..., 2, 1] = -v[..., 1], v[..., 0]
    return out


def normals_of(direction: Array) -> Array:
    """Two unit normals ``(r, 2, 3)`` to each of some directions ``(r, 3)``."""
    least = np.argmin(np.abs(direction), axis=1)
    start = np.eye(3)[least]
    first = np.cross(direction, start)
    first /= np.linalg.norm(first, axis=1, keepdims=True)
    return np.stack([first, np.cross(direction, first)], axis=1)


def fixed_line_rows(x: Array, joint: Ints, through: Array, direction: Array) -> Family:
    """Two rows for each joint on a fixed line."""
    normals = normals_of(direction)
    away = x[:, joint] - through
    residual = np.einsum("nrd,rkd->nrk", away, normals).reshape(len(x), -1)
    cols = np.repeat(columns(joint[:, None]), 2, axis=0)
    flat = normals.reshape(1, -1, 3)
    return residual, cols, np.broadcast_to(flat, (len(x), *flat.shape[1:]))


def plane_rows(x: Array, joint: Ints, through: Array, normal: Array) -> Family:
    """One row for each joint in a fixed plane."""
    residual = np.einsum("nrd,rd->nr", x[:, joint] - through, normal)
    dim = x.shape[2]
    cols = joint[:, None] * dim + np.arange(dim)
    return residual, cols, np.broadcast_to(normal, (len(x), *normal.shape))


def moving_line_rows(x: Array, joints: Ints) -> Family:
    """``(p - a) x (b - a) / |b - a|`` for joints p on lines through a and b ``(r, 3)`` (a, b, p):
    three rows each, of which two are independent."""
    a, b, p = (x[:, joints[:, k]] for k in range(3))
    e, w = b - a, p - a
    long = np.linalg.norm(e, axis=-1, keepdims=True)
    unit = e / long
    off = np.cross(w, unit)
    by_p = -_cross_matrix(unit)
    # d(unit) = (1 - unit unit^T) de / |e|, and w x d(unit) = [w]x d(unit).
    turn = (np.eye(3) - unit[..., :, None] * unit[..., None, :]) / long[..., None]
    by_b = _cross_matrix(w) @ turn
    slopes = np.zeros((len(x), len(joints), 3, 3, 3))
    slopes[:, :, :, 0] = -by_p - by_b
    slopes[:, :, :, 1], slopes[:, :, :, 2] = by_b, by_p
    cols = np.repeat(columns(joints), 3, axis=0)
    return off.reshape(len(x), -1), cols, slopes.reshape(len(x), 3 * len(joints), 9)
