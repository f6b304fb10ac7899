"""The judge: measures lengths, plates, rails, ranges, limits and misses of given poses.

It works from the rig's own numbers, shares no formula with the solver, and every solver's
answers go through it before they are called right.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from rigpose.model.equations import Array
from rigpose.model.rig import Limit, Pair, Rig


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
        excess = np.maximum(self.broken[..., keep] - room, 0.0)
        flat = excess.reshape(-1, int(keep.sum()))
        with np.errstate(invalid="ignore"):
            per_part = np.nanmax(np.where(np.isnan(flat), 0.0, flat), axis=0)
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
    at = rig.index
    names: list[str] = []
    columns: list[Array] = []
    for bone in rig.bones:
        a, b = at[bone.ends[0]], at[bone.ends[1]]
        gap = positions[..., a, :] - positions[..., b, :]
        names.append(bone.name)
        columns.append(np.abs(np.linalg.norm(gap, axis=-1) - bone.length))
    for plate in rig.plates:
        names.append(plate.name)
        columns.append(_plate(positions, [at[j] for j in plate.joints], np.array(plate.shape)))
    for rail in rig.rails:
        names.append(rail.name)
        through, direction, _ = _rail_line(rig, positions, rail.name)
        w = positions[..., at[rail.joint], :] - through
        way = (w * direction).sum(-1, keepdims=True)
        columns.append(np.linalg.norm(w - way * direction, axis=-1))
    over_names, over = _ranges(rig, positions)
    lead = positions.shape[:-2]
    largest = np.abs(positions).max(axis=(-1, -2), initial=0.0)
    return Verdict(
        tuple(names), np.stack(columns, axis=-1) if columns else np.zeros((*lead, 0)),
        over_names, np.stack(over, axis=-1) if over else np.zeros((*lead, 0)),
        size, 4 * np.spacing(largest),
    )


def _plate(positions: Array, joints: list[int], shape: Array) -> Array:
    """Largest departure of any pair's distance, and of the hand (a mirrored plate is far off)."""
    p = positions[..., joints, :]
    worst = np.zeros(p.shape[:-2])
    for i in range(len(joints)):
        gap = np.linalg.norm(p[..., i + 1 :, :] - p[..., i : i + 1, :], axis=-1)
        want = np.linalg.norm(shape[i + 1 :] - shape[i], axis=-1)
        if len(want):
            worst = np.maximum(worst, np.abs(gap - want).max(axis=-1))
    if shape.shape[1] == 2:
        c = shape - shape.mean(axis=0)
        q = p - p.mean(axis=-2, keepdims=True)
        turn = np.arctan2(
            (c[:, 0] * q[..., 1] - c[:, 1] * q[..., 0]).sum(-1), (c * q).sum((-1, -2))
        )[..., None]
        cos, sin = np.cos(turn), np.sin(turn)
        fitted = np.stack([cos * c[:, 0] - sin * c[:, 1], sin * c[:, 0] + cos * c[:, 1]], axis=-1)
        worst = np.maximum(worst, np.linalg.norm(q - fitted, axis=-1).max(axis=-1))
    return worst


def _rail_line(rig: Rig, positions: Array, name: str) -> tuple[Array, Array, str]:
    rail = next(r for r in rig.rails if r.name == name)
    if rail.along:
        a = positions[..., rig.index[rail.along[0]], :]
        e = positions[..., rig.index[rail.along[1]], :] - a
        return a, e / np.linalg.norm(e, axis=-1, keepdims=True), rail.joint
    return np.array(rail.through), np.array(rail.direction), rail.joint


def _outside(value: Array, low: float, high: float) -> Array:
    return np.maximum(np.maximum(low - value, value - high), 0.0)


def _ranges(rig: Rig, positions: Array) -> tuple[tuple[str, ...], list[Array]]:
    names: list[str] = []
    over: list[Array] = []
    for ram in rig.rams:
        if ram.range:
            a, b = (positions[..., rig.index[e], :] for e in ram.ends)
            names.append(ram.name)
            over.append(_outside(np.linalg.norm(a - b, axis=-1), *ram.range))
    for rail in rig.rails:
        if rail.range:
            through, direction, joint = _rail_line(rig, positions, rail.name)
            way = ((positions[..., rig.index[joint], :] - through) * direction).sum(-1)
            names.append(rail.name)
            over.append(_outside(way, *rail.range))
    for limit in rig.limits:
        names.append(limit.name)
        over.append(_limit(rig, positions, limit))
    return tuple(names), over


def direction_of(rig: Rig, positions: Array, pair: Pair | None) -> Array:
    """Direction of a line in degrees ``(...)``, 0 for the ground."""
    if pair is None:
        return np.zeros(positions.shape[:-2])
    e = positions[..., rig.index[pair[1]], :] - positions[..., rig.index[pair[0]], :]
    angle: Array = np.degrees(np.arctan2(e[..., 1], e[..., 0]))
    return angle


def _limit(rig: Rig, positions: Array, limit: Limit) -> Array:
    angle = direction_of(rig, positions, limit.second) - direction_of(rig, positions, limit.first)
    low, high = limit.range
    if limit.either:
        return _outside(np.abs(np.remainder(angle + 180, 360) - 180), low, high)
    past = np.remainder(angle - low, 360.0)
    width = high - low
    return np.where(past <= width, 0.0, np.minimum(past - width, 360.0 - past))
