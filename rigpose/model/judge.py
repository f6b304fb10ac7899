"""The judge: measures lengths, plates, rails, ranges, limits and misses of given poses.

It works from the rig's own numbers, shares no formula with the solver, and every solver's
answers go through it before they are called right.
"""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from dataclasses import dataclass
from functools import lru_cache
from itertools import combinations

import numpy as np

from rigpose.model.equations import Array, Ints
from rigpose.model.rig import Limit, Pair, Plane, Plate, Rail, Ram, Rig
from rigpose.model.torsion import torsion

POSES = 1 << 11
"""Poses measured in one go: few enough to stay in the cache."""
CELLS = 1 << 15
"""Parts times poses measured in one go."""


@dataclass(frozen=True)
class Verdict:
    """Departures by part, each ``(..., parts)``, in the rig's unit (angles in degrees).

    ``broken`` holds bones, plates and rails; ``over`` by how much ranges and limits are passed
    (zero inside). ``names`` and ``over_names`` say which part a column is.
    """

    names: tuple[str, ...]
    broken: Array
    over_names: tuple[str, ...]
    over: Array
    size: float
    floor: Array

    def worst(self, without: frozenset[str] = frozenset(),
              beyond_floats: bool = False) -> tuple[float, str]:
        """The largest departure as a fraction of the size, and the part; redundant ones left out.

        ``beyond_floats`` takes off what float64 cannot hold so far from the origin.
        """
        keep = np.array([n not in without for n in self.names], dtype=bool)
        if not keep.any() or not self.broken.size:
            return 0.0, ""
        room = self.floor[..., None] if beyond_floats else 0.0
        excess = self.broken - room
        flat = excess.reshape(-1, len(self.names))
        per_part = np.fmax.reduce(flat, axis=0, initial=0.0)[keep]
        k = int(np.argmax(per_part))
        names = [n for n, keep_it in zip(self.names, keep, strict=True) if keep_it]
        return float(per_part[k] / self.size), names[k]

    def passed(self) -> tuple[float, str]:
        """The largest passing of a range or limit, and its part."""
        if not self.over.size:
            return 0.0, ""
        flat = np.nan_to_num(self.over.reshape(-1, len(self.over_names))).max(axis=0)
        k = int(np.argmax(flat))
        return float(flat[k]), self.over_names[k]


def size_of(positions: Array) -> float:
    """The largest distance between two joints of one pose ``(n, dim)``."""
    p = positions[~np.isnan(positions).any(axis=1)]
    if len(p) < 2:
        return 1.0
    if len(p) > 2000:
        # The diagonal of the box is at most sqrt(dim) too large; tolerances do not mind.
        return float(np.linalg.norm(np.ptp(p, axis=0)))
    gap = p[:, None] - p[None]
    return float(np.sqrt((gap * gap).sum(axis=-1).max()))


def judge(rig: Rig, positions: Array, size: float) -> Verdict:
    """Measure poses ``(..., n, dim)`` in the rig's frame; NaN poses give NaN columns."""
    lead = positions.shape[:-2]
    flat = positions.reshape(-1, *positions.shape[-2:])
    flat_plates = rig.plates if rig.dim == 2 else ()
    others: list[Plate | Rail | Plane] = [*rig.plates[len(flat_plates):], *rig.rails, *rig.planes]
    names = tuple(p.name for p in (*rig.bones, *flat_plates, *others))
    over_names = tuple(p.name for p in _ranged(rig))
    broken, over = np.empty((len(names), len(flat))), np.empty((len(over_names), len(flat)))
    largest = np.zeros(len(flat))
    for start in range(0, len(flat), POSES):
        which = slice(start, start + POSES)
        # Joints and coordinates lead, so that every measure runs along the poses without gaps.
        x = np.ascontiguousarray(flat[which].transpose(1, 2, 0))
        _bones(rig, x, broken[:len(rig.bones), which])
        if flat_plates:
            _plates(rig, x, broken[len(rig.bones):len(names) - len(others), which])
        for k, part in enumerate(others, len(names) - len(others)):
            broken[k, which] = _departure(rig, x, part)
        for k, limited in enumerate(_ranged(rig)):
            over[k, which] = _passing(rig, x, limited)
        largest[which] = np.abs(x).max(axis=(0, 1), initial=0.0)
    return Verdict(names, broken.T.reshape(*lead, len(names)), over_names,
                   over.T.reshape(*lead, len(over_names)), size,
                   4 * np.spacing(largest).reshape(lead))


def _ranged(rig: Rig) -> list[Ram | Rail | Limit]:
    """Parts with a range."""
    ranged: list[Ram | Rail | Limit] = [r for r in rig.rams if r.range]
    ranged += [r for r in rig.rails if r.range]
    return [*ranged, *rig.limits]


def _blocks(parts: int, poses: int) -> Iterator[slice]:
    """Parts cut so that a block has about `CELLS` cells."""
    step = max(1, CELLS // max(poses, 1))
    return (slice(start, start + step) for start in range(0, parts, step))


def _bones(rig: Rig, x: Array, out: Array) -> None:
    """How far all bones are off ``(bones, m)``, in places ``(n, dim, m)``."""
    ends, length = _bone_table(rig)
    for some in _blocks(len(ends), x.shape[2]):
        gap = x[ends[some, 1]] - x[ends[some, 0]]
        out[some] = np.abs(_long(gap.transpose(1, 0, 2)) - length[some, None])


@lru_cache(maxsize=8)
def _bone_table(rig: Rig) -> tuple[Ints, Array]:
    """All bones' joints ``(bones, 2)`` and lengths."""
    ends = np.array([rig.index[j] for b in rig.bones for j in b.ends], dtype=np.intp)
    return ends.reshape(-1, 2), np.array([b.length for b in rig.bones])


def _plates(rig: Rig, x: Array, out: Array) -> None:
    """How far all plates of the plane are off ``(plates, m)``: the largest distance of a joint
    from where the plate's two farthest joints carry it, and of these two from their own distance;
    a mirrored plate is far off."""
    for kind in _plate_table(rig):
        for some in _blocks(len(kind.rows), x.shape[2]):
            start = x[kind.joints[some, 0]].transpose(1, 0, 2)
            e = x[kind.joints[some, 1]].transpose(1, 0, 2) - start
            worst = np.abs(_long(e) - kind.long[some, None])
            for k in range(2, kind.joints.shape[1]):
                gap = x[kind.joints[some, k]].transpose(1, 0, 2) - start
                a, b = kind.along[some, k, None], kind.across[some, k, None]
                gap[0] -= a * e[0] - b * e[1]
                gap[1] -= b * e[0] + a * e[1]
                np.maximum(worst, _long(gap), out=worst)
            out[kind.rows[some]] = worst


@dataclass(frozen=True)
class _Kind:
    """Plates with equally many joints: which they are ``(m,)``, their joints ``(m, k)`` with the
    two farthest apart first, how far these are, and by what shares of their way ``along`` it and
    ``across`` it the others lie ``(m, k)``."""

    rows: Ints
    joints: Ints
    long: Array
    along: Array
    across: Array


@lru_cache(maxsize=8)
def _plate_table(rig: Rig) -> list[_Kind]:
    """All plates by how many joints they have."""
    counts = np.array([len(p.joints) for p in rig.plates], dtype=np.intp)
    return [_kind(rig, np.flatnonzero(counts == k)) for k in np.unique(counts)]


def _kind(rig: Rig, rows: Ints) -> _Kind:
    some = [rig.plates[r] for r in rows]
    joints = np.array([[rig.index[j] for j in p.joints] for p in some], dtype=np.intp)
    shape = np.array([p.shape for p in some])
    longest, far = np.full(len(rows), -1.0), np.zeros((len(rows), 2), dtype=np.intp)
    for i in range(shape.shape[1]):
        gap = np.linalg.norm(shape - shape[:, i:i + 1], axis=2)
        more = np.flatnonzero(gap.max(axis=1) > longest)
        longest[more] = gap[more].max(axis=1)
        far[more] = np.column_stack([np.full(len(more), i), gap[more].argmax(axis=1)])
    # The farthest two come first, the others as they are.
    rank = np.tile(np.arange(shape.shape[1]), (len(rows), 1))
    np.put_along_axis(rank, far[:, :1], -2, axis=1)
    np.put_along_axis(rank, far[:, 1:], -1, axis=1)
    order = np.argsort(rank, axis=1)
    joints = np.take_along_axis(joints, order, axis=1)
    shape = np.take_along_axis(shape, order[..., None], axis=1)
    v, w = shape - shape[:, :1], shape[:, 1] - shape[:, 0]
    long = np.hypot(w[:, 0], w[:, 1])
    v = v / (long**2)[:, None, None]
    return _Kind(rows, joints, long, (v * w[:, None]).sum(axis=2),
                 w[:, None, 0] * v[..., 1] - w[:, None, 1] * v[..., 0])


def _departure(rig: Rig, x: Array, part: Plate | Rail | Plane) -> Array:
    """How far one part is off, ``(m,)``, in places ``(n, dim, m)``; a plate in space."""
    if isinstance(part, Plane):
        normal, through = np.array(part.normal), np.array(part.through)
        gaps = [np.abs(normal @ (x[rig.index[j]] - through[:, None])) for j in part.joints]
        worst: Array = np.max(gaps, axis=0)
        return worst
    if isinstance(part, Plate):
        return _pairs([x[rig.index[j]] for j in part.joints], np.array(part.shape))
    through, direction = _rail_line(rig, x, part)
    w = x[rig.index[part.joint]] - through
    off = _long(w - (w * direction).sum(axis=0) * direction)
    if part.along is None:
        return off
    # Far beyond a short slot the joint is off by many times what the slot's own end is off: the
    # least that any of the three joints would have to move is what counts.
    a, b = (x[rig.index[j]] for j in part.along)
    lever: Array = np.maximum(_long(w) / _long(b - a), 1.0)
    return off / lever


def _long(v: Array) -> Array:
    """Lengths ``(m,)`` of vectors ``(dim, m)``."""
    long: Array = v[0] * v[0]
    for more in v[1:]:
        long += more * more
    return np.sqrt(long, out=long)


def _pairs(p: Sequence[Array], shape: Array) -> Array:
    """The largest departure ``(m,)`` of the distance of any two joints."""
    worst = np.zeros(p[0].shape[1])
    for i in range(len(p)):
        for j in range(i):
            want = float(np.linalg.norm(shape[i] - shape[j]))
            worst = np.maximum(worst, np.abs(_long(p[i] - p[j]) - want))
    return np.maximum(worst, _turned_over(p, shape))


def _turned_over(p: Sequence[Array], shape: Array) -> Array:
    """In space: how far a mirrored body's joints are from where they belong, ``(m,)``.

    It is seen from the four joints that span the largest volume; a flat body has no hand.
    """
    worst = np.zeros(p[0].shape[1])
    four = _widest(shape)
    if four is None:
        return worst
    a, b, c, d = four
    own = float(np.linalg.det(shape[[b, c, d]] - shape[a]))
    u, v, w = (p[k] - p[a] for k in (b, c, d))
    # A determinant written out, so that poses that don't exist pass through as NaN.
    volume = (u[0] * (v[1] * w[2] - v[2] * w[1]) + u[1] * (v[2] * w[0] - v[0] * w[2])
              + u[2] * (v[0] * w[1] - v[1] * w[0]))
    size = float(np.linalg.norm(np.ptp(shape, axis=0)))
    mirrored: Array = np.where(volume * own < 0, size, worst)
    return mirrored


def _widest(shape: Array) -> tuple[int, ...] | None:
    """Four joints of a body that don't lie in one plane, or None."""
    size = float(np.linalg.norm(np.ptp(shape, axis=0)))
    best, found = 1e-6 * size**3, None
    for four in combinations(range(min(len(shape), 12)), 4):
        volume = abs(float(np.linalg.det(shape[list(four[1:])] - shape[four[0]])))
        if volume > best:
            best, found = volume, four
    return found


def _rail_line(rig: Rig, x: Array, rail: Rail) -> tuple[Array, Array]:
    if rail.along:
        a = x[rig.index[rail.along[0]]]
        e = x[rig.index[rail.along[1]]] - a
        return a, e / _long(e)
    return np.array(rail.through)[:, None], np.array(rail.direction)[:, None]


def _outside(value: Array, low: float, high: float) -> Array:
    return np.maximum(np.maximum(low - value, value - high), 0.0)


def _passing(rig: Rig, x: Array, part: Ram | Rail | Limit) -> Array:
    """By how much a range or limit is passed, ``(m,)``, zero inside."""
    if isinstance(part, Limit):
        return _limit(rig, x, part)
    assert part.range is not None  # only such parts are asked for
    if isinstance(part, Ram):
        a, b = (x[rig.index[j]] for j in part.ends)
        return _outside(_long(b - a), *part.range)
    through, direction = _rail_line(rig, x, part)
    way = ((x[rig.index[part.joint]] - through) * direction).sum(axis=0)
    return _outside(way, *part.range)


def direction_of(rig: Rig, positions: Array, pair: Pair | None) -> Array:
    """Direction of a line in degrees ``(...)`` for poses ``(..., n, dim)``, 0 for the ground."""
    if pair is None:
        return np.zeros(positions.shape[:-2])
    e = positions[..., rig.index[pair[1]], :] - positions[..., rig.index[pair[0]], :]
    angle: Array = np.degrees(np.arctan2(e[..., 1], e[..., 0]))
    return angle


def _limit(rig: Rig, x: Array, limit: Limit) -> Array:
    poses = x.transpose(2, 0, 1)
    angle = (limit_angle(rig, poses, limit) if rig.dim == 3 else
             direction_of(rig, poses, limit.second) - direction_of(rig, poses, limit.first))
    low, high = limit.range
    if limit.either:
        return _outside(np.abs(np.remainder(angle + 180, 360) - 180), low, high)
    past = np.remainder(angle - low, 360.0)
    width = high - low
    return np.where(past <= width, 0.0, np.minimum(past - width, 360.0 - past))


def limit_angle(rig: Rig, poses: Array, limit: Limit) -> Array:
    """Degrees ``(...)`` from the first line to the second, about the limit's axis if it has one."""
    u, v = (poses[..., rig.index[b], :] - poses[..., rig.index[a], :]
            for a, b in (limit.first, limit.second))
    if limit.axis is not None:
        p, q = (poses[..., rig.index[j], :] for j in limit.axis)
        about: Array = np.degrees(torsion(p + u, p, q, p + v))
        return about
    sine = np.linalg.norm(np.cross(u, v), axis=-1)
    angle: Array = np.degrees(np.arctan2(sine, (u * v).sum(axis=-1)))
    return angle
