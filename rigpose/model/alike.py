"""Bodies with equally many joints as one array, so that a rig of very many is measured at once."""

from __future__ import annotations

from collections.abc import Iterator, Sequence

import numpy as np

from rigpose.model.equations import Array, Body, Ints
from rigpose.model.rig import Plate

MOST = 1 << 20
"""Pairs of joints looked at in one go."""


def by_count(counts: Sequence[int]) -> Iterator[tuple[int, Ints]]:
    """Each number that occurs and where it does."""
    all_counts = np.array(counts, dtype=np.intp)
    for k in np.unique(all_counts):
        yield int(k), np.flatnonzero(all_counts == k)


def bodies_of(plates: Sequence[Plate], index: dict[str, int], scale: float) -> tuple[Body, ...]:
    """Bodies of plates, each with its base; their arrays are parts of larger ones."""
    made: list[Body | None] = [None] * len(plates)
    for k, which in by_count([len(p.joints) for p in plates]):
        some = [plates[i] for i in which]
        flat = np.fromiter((index[j] for p in some for j in p.joints), np.intp, k * len(some))
        joints = flat.reshape(len(some), k)
        shapes = np.array([p.shape for p in some], dtype=np.float64) / scale
        first, second = farthest(shapes)
        for i, plate, mine, shape, a, b in zip(which.tolist(), some, joints, shapes,
                                               first.tolist(), second.tolist(), strict=True):
            body = Body(plate.name, mine, shape)
            body.__dict__["base"] = (a, b)
            made[i] = body
    return tuple(b for b in made if b is not None)


def farthest(shapes: Array) -> tuple[Ints, Ints]:
    """For each shape ``(m, k, dim)`` the two places farthest apart, the first of equals."""
    m, k = shapes.shape[:2]
    first, second = np.empty(m, dtype=np.intp), np.empty(m, dtype=np.intp)
    step = max(1, MOST // (k * k))
    for start in range(0, m, step):
        some = shapes[start:start + step]
        gap = np.linalg.norm(some[:, :, None] - some[:, None], axis=-1)
        best = np.argmax(np.triu(gap).reshape(len(some), -1), axis=1)
        first[start:start + step], second[start:start + step] = np.divmod(best, k)
    return first, second


def base_ends(bodies: Sequence[Body]) -> tuple[Ints, Array]:
    """The two base joints of every body ``(m, 2)`` and how far apart they are ``(m,)``."""
    ends, length = np.empty((len(bodies), 2), dtype=np.intp), np.empty(len(bodies))
    for _, which in by_count([len(b.joints) for b in bodies]):
        some = [bodies[i] for i in which]
        joints, shapes, base = _stacked(some)
        row = np.arange(len(some))[:, None]
        ends[which] = joints[row, base]
        gap = shapes[row[:, 0], base[:, 0]] - shapes[row[:, 0], base[:, 1]]
        length[which] = np.linalg.norm(gap, axis=1)
    return ends, length


def affine_rows(bodies: Sequence[Body]) -> tuple[Ints, Array]:
    """In the plane, each further joint c of a body by its base: joints (a, b, c) ``(m, 3)`` and
    weights (u, v) ``(m, 2)`` with ``c = a + u (b - a) + v perp(b - a)``, body after body."""
    counts = np.array([len(b.joints) for b in bodies], dtype=np.intp)
    starts = np.concatenate([[0], np.cumsum(counts - 2)])
    joints = np.empty((int(starts[-1]), 3), dtype=np.intp)
    weights = np.empty((int(starts[-1]), 2))
    for k, which in by_count(counts.tolist()):
        own, shapes, base = _stacked([bodies[i] for i in which])
        row = np.arange(len(which))[:, None]
        inside = np.ones(own.shape, dtype=bool)
        inside[row, base] = False
        others = np.nonzero(inside)[1].reshape(len(which), k - 2)
        at = (starts[which][:, None] + np.arange(k - 2)).ravel()
        a, b = shapes[row, base[:, :1]], shapes[row, base[:, 1:]]
        e, w = b - a, shapes[row, others] - a
        square = (e * e).sum(axis=-1)
        joints[at, 0] = np.repeat(own[row[:, 0], base[:, 0]], k - 2)
        joints[at, 1] = np.repeat(own[row[:, 0], base[:, 1]], k - 2)
        joints[at, 2] = own[row, others].ravel()
        weights[at, 0] = ((w * e).sum(axis=-1) / square).ravel()
        weights[at, 1] = ((e[..., 0] * w[..., 1] - e[..., 1] * w[..., 0]) / square).ravel()
    return joints, weights


def _stacked(bodies: Sequence[Body]) -> tuple[Ints, Array, Ints]:
    """Joints ``(m, k)``, shapes ``(m, k, dim)`` and bases ``(m, 2)``."""
    return (np.array([b.joints for b in bodies]), np.array([b.shape for b in bodies]),
            np.array([b.base for b in bodies], dtype=np.intp))
