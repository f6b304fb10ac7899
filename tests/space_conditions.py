"""A rig's conditions in space written once more, from its parts alone, for tests to hold the
solver against: squared distances, lines, planes and turns, in units of the rig's size.

A plate is all its distances and its hand, which the solver never does; a turn between two parts is
a distance and a side. Nothing here is taken from the solver's own equations.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field
from itertools import combinations

import numpy as np
from scipy.optimize import root

import rigpose as rp
from rigpose.model.equations import Array, Ints
from rigpose.model.rig import Bone, Crank, Limit, Pair, Plate


@dataclass
class Conditions:
    """What must be zero: ``pairs (m, 2)`` at ``gaps (m,)``; ``rows (k, 3 n)`` times all coordinates
    equal to ``values (k,)``; ``slots (s, 3)`` of joints a, b, p in line, p at the way
    ``ways (s,)`` from a where that is no NaN, a and b ``spans (s,)`` apart."""

    rig: rp.Rig
    drives: Mapping[str, float]
    size: float
    free: Ints
    pinned: Array
    pairs: Ints
    gaps: Array
    rows: Array
    values: Array
    slots: Ints
    ways: Array
    spans: Array

    def pose(self, x: Array) -> Array:
        """``(n_joints, 3)``."""
        out = self.pinned.copy()
        out[self.free] = x
        return out.reshape(-1, 3)

    def residual(self, x: Array) -> Array:
        """``(m,)`` in units of the size."""
        p = self.pose(x)
        e = p[self.pairs[:, 1]] - p[self.pairs[:, 0]]
        lengths = ((e * e).sum(axis=1) - self.gaps**2) / self.size**2
        linear = (self.rows @ p.ravel() - self.values) / self.size
        a, b, q = (p[self.slots[:, k]] for k in range(3))
        across = np.cross(b - a, q - a).ravel() / self.size**2
        along = ((b - a) * (q - a)).sum(axis=1) - self.ways * self.spans
        driven = along[~np.isnan(self.ways)] / self.size**2
        return np.concatenate([lengths, linear, across, driven])

    def jacobian(self, x: Array) -> Array:
        """``(m, n)``."""
        p, n = self.pose(x), len(self.pinned)
        lengths = np.zeros((len(self.pairs), n // 3, 3))
        e = p[self.pairs[:, 1]] - p[self.pairs[:, 0]]
        k = np.arange(len(e))
        lengths[k, self.pairs[:, 1]], lengths[k, self.pairs[:, 0]] = 2 * e, -2 * e
        slopes = [lengths.reshape(-1, n) / self.size**2, self.rows / self.size]
        for (a, b, q), way in zip(self.slots, self.ways, strict=True):
            e, w = p[b] - p[a], p[q] - p[a]
            across = np.zeros((3, n // 3, 3))
            across[:, b], across[:, q] = -_skew(w), _skew(e)
            across[:, a] = _skew(w) - _skew(e)
            slopes.append(across.reshape(3, n) / self.size**2)
            if not np.isnan(way):
                along = np.zeros((1, n // 3, 3))
                along[0, b], along[0, q], along[0, a] = w, e, -w - e
                slopes.append(along.reshape(1, n) / self.size**2)
        order = self._order()
        stacked: Array = np.concatenate(slopes)[order][:, self.free]
        return stacked

    def _order(self) -> Ints:
        """Rows as `residual` has them: the driven slots' last."""
        first = len(self.pairs) + len(self.values)
        across, driven, at = list(range(first)), [], first
        for way in self.ways:
            across += [at, at + 1, at + 2]
            at += 3
            if not np.isnan(way):
                driven.append(at)
                at += 1
        return np.array(across + driven, dtype=np.intp)

    def allowed(self, pose: Array) -> bool:
        """Whether no plate is turned over, no angle is another, no range or limit is passed."""
        return (all(_right_hand(self.rig, pose, p) for p in self.rig.plates)
                and all(self._turned(pose, c) for c in self.rig.cranks if c.name in self.drives)
                and all(self._in_range(pose, m.name, m.range) for m in self.rig.rams)
                and all(_limited(self.rig, pose, m) for m in self.rig.limits))

    def _turned(self, pose: Array, crank: Crank) -> bool:
        """Degrees of a crank in a pose are those wanted, or those of any whole turn more."""
        assert crank.axis is not None
        p, q, tip = (pose[self.rig.index[j]] for j in (*crank.axis, crank.line[1]))
        start = p + np.array(crank.toward) if crank.base is None else (
            pose[self.rig.index[crank.base[1]]])
        off = turn_about(q - p, p, start, tip) - _wanted(crank, self.drives)
        return bool(abs(np.remainder(off + 180, 360) - 180) < 1e-4)

    def _in_range(self, pose: Array, name: str, span: tuple[float, float] | None) -> bool:
        if span is None:
            return True
        a, b = next(r.ends for r in self.rig.rams if r.name == name)
        long = np.linalg.norm(pose[self.rig.index[a]] - pose[self.rig.index[b]])
        return bool(span[0] - 1e-9 <= long <= span[1] + 1e-9)


def _skew(v: Array) -> Array:
    """M with ``M w = v x w``."""
    return np.array([[0, -v[2], v[1]], [v[2], 0, -v[0]], [-v[1], v[0], 0]])


def turn_about(axis: Array, start: Array, first: Array, second: Array) -> float:
    """Degrees by the right hand, from coordinates in a frame whose third direction is the axis."""
    z = axis / np.linalg.norm(axis)
    x = first - start
    x = x - (x @ z) * z
    way = second - start
    return float(np.degrees(np.arctan2(way @ np.cross(z, x / np.linalg.norm(x)),
                                       way @ x / np.linalg.norm(x))))


def _wanted(crank: Crank, drives: Mapping[str, float]) -> float:
    """From `toward`, or between two parts; from rest, `toward` is where the drawing points."""
    return drives[crank.name] + (0.0 if crank.zero == "rest" else float(crank.zero))


def _right_hand(rig: rp.Rig, pose: Array, plate: Plate) -> bool:
    shape = np.array(plate.shape)
    here = pose[[rig.index[j] for j in plate.joints]]
    volumes = {four: float(np.linalg.det(shape[list(four[1:])] - shape[four[0]]))
               for four in combinations(range(len(shape)), 4)}
    four = max(volumes, key=lambda f: abs(volumes[f]), default=None)
    if four is None or abs(volumes[four]) < 1e-9:
        return True
    return float(np.linalg.det(here[list(four[1:])] - here[four[0]])) * volumes[four] > 0


def _limited(rig: rp.Rig, pose: Array, limit: Limit) -> bool:
    at, a, b = (pose[rig.index[j]] for j in (limit.at, limit.first[1], limit.second[1]))
    low, high = limit.range
    if limit.axis is None:
        u, v = a - at, b - at
        angle = float(np.degrees(np.arccos(u @ v / np.linalg.norm(u) / np.linalg.norm(v))))
        return low - 1e-6 <= angle <= high + 1e-6
    p, q = (pose[rig.index[j]] for j in limit.axis)
    past = np.remainder(turn_about(q - p, p, a, b) - low + 1e-6, 360)
    return bool(past <= high - low + 2e-6)


@dataclass
class _Writer:
    rig: rp.Rig
    drives: Mapping[str, float]
    pairs: list[Pair] = field(default_factory=list)
    gaps: list[float] = field(default_factory=list)
    rows: list[Array] = field(default_factory=list)
    values: list[float] = field(default_factory=list)

    def distance(self, a: str, b: str, gap: float) -> None:
        self.pairs.append((a, b))
        self.gaps.append(gap)

    def linear(self, way: Array, joint: str, value: float) -> None:
        """``way`` times a joint's place is ``value``."""
        row = np.zeros((len(self.rig.joints), 3))
        row[self.rig.index[joint]] = way
        self.rows.append(row.ravel())
        self.values.append(value)

    def bodies(self) -> None:
        for bone in self.rig.bones:
            self.distance(*bone.ends, bone.length)
        for ram in self.rig.rams:
            if ram.name in self.drives:
                self.distance(*ram.ends, self.drives[ram.name])
        for plate in self.rig.plates:
            for (a, p), (b, q) in combinations(zip(plate.joints, plate.shape, strict=True), 2):
                self.distance(a, b, float(np.linalg.norm(np.array(p) - q)))

    def flat(self) -> None:
        """Planes, and rails on the ground as two planes, driven ones as three."""
        for plane in self.rig.planes:
            for joint in plane.joints:
                self._plane(joint, np.array(plane.normal), np.array(plane.through))
        for rail in self.rig.rails:
            if rail.direction is None:
                continue
            way, through = np.array(rail.direction), np.array(rail.through)
            across = np.linalg.svd(way[None])[2][1:]
            for normal in across:
                self._plane(rail.joint, normal, through)
            if rail.name in self.drives:
                self._plane(rail.joint, way, through + self.drives[rail.name] * way)

    def _plane(self, joint: str, normal: Array, through: Array) -> None:
        self.linear(normal, joint, float(normal @ through))

    def ties(self) -> None:
        """Ways along rails on the ground, added up."""
        rails = {r.name: r for r in self.rig.rails}
        for tie in self.rig.ties:
            row, value = np.zeros((len(self.rig.joints), 3)), tie.equals
            for name, factor in tie.sum:
                rail = rails[name]
                assert rail.direction is not None, "only rails on the ground are tied here"
                row[self.rig.index[rail.joint]] += factor * np.array(rail.direction)
                value += factor * float(np.array(rail.direction) @ np.array(rail.through))
            self.rows.append(row.ravel())
            self.values.append(value)

    def cranks(self) -> None:
        for crank in self.rig.cranks:
            if crank.name not in self.drives:
                continue
            assert crank.axis is not None
            turn = np.radians(_wanted(crank, self.drives))
            if crank.base is None:
                self._from_ground(crank, turn)
            else:
                self._from_part(crank, turn)

    def _from_ground(self, crank: Crank, turn: float) -> None:
        """The tip lies in the half plane of the axis; which half is for `allowed`."""
        assert crank.axis is not None
        joints = [self.rig.joints[self.rig.index[j]] for j in crank.axis]
        assert all(j.pin for j in joints)
        p, q = (np.array(j.at) for j in joints)
        z = (q - p) / np.linalg.norm(q - p)
        x = np.array(crank.toward) - (np.array(crank.toward) @ z) * z
        x /= np.linalg.norm(x)
        normal = np.cross(z, np.cos(turn) * x + np.sin(turn) * np.cross(z, x))
        self._plane(crank.line[1], normal, p)

    def _from_part(self, crank: Crank, turn: float) -> None:
        """The distance of both tips, by the law of cosines about the axis."""
        assert crank.base is not None
        one, other = (self._about(crank, part, tip) for part, tip in (
            (crank.base_part, crank.base[1]), (crank.turns, crank.line[1])))
        square = ((one[0] - other[0]) ** 2 + one[1] ** 2 + other[1] ** 2
                  - 2 * one[1] * other[1] * np.cos(turn))
        self.distance(crank.base[1], crank.line[1], float(np.sqrt(square)))

    def _about(self, crank: Crank, part: str, tip: str) -> tuple[float, float]:
        """How far along the axis, and how far beside it, a joint stands in its own plate."""
        assert crank.axis is not None
        plate = next(p for p in self.rig.plates if p.name == part)
        p, q, s = (np.array(plate.shape[plate.joints.index(j)]) for j in (*crank.axis, tip))
        z = (q - p) / np.linalg.norm(q - p)
        along = float((s - p) @ z)
        return along, float(np.linalg.norm(s - p - along * z))

    def span(self, pair: Pair) -> float:
        """The distance of two joints that one part carries, or that are pinned."""
        bodies: Sequence[Bone | Plate] = [*self.rig.bones, *self.rig.plates]
        for body in bodies:
            if isinstance(body, Bone) and set(pair) == set(body.ends):
                return body.length
            if isinstance(body, Plate) and set(pair) <= set(body.joints):
                a, b = (np.array(body.shape[body.joints.index(j)]) for j in pair)
                return float(np.linalg.norm(a - b))
        a, b = (np.array(self.rig.joints[self.rig.index[j]].at) for j in pair)
        return float(np.linalg.norm(a - b))


def conditions(rig: rp.Rig, drives: Mapping[str, float],
               targets: Mapping[str, Sequence[float | None]]) -> Conditions:
    """All conditions of a rig in space with these drives and targets."""
    w = _Writer(rig, drives)
    w.bodies()
    w.flat()
    w.ties()
    w.cranks()
    for joint, place in targets.items():
        for axis, value in enumerate(place):
            if value is not None:
                w.linear(np.eye(3)[axis], joint, value)
    slots = [(*r.along, r.joint) for r in rig.rails if r.along]
    spans = [w.span(r.along) for r in rig.rails if r.along]
    ways = [drives.get(r.name, np.nan) for r in rig.rails if r.along]
    places = np.array([j.at for j in rig.joints], dtype=float)

    def numbers(names: Sequence[Sequence[str]], width: int) -> Ints:
        return np.array([[rig.index[j] for j in some] for some in names],
                        dtype=np.intp).reshape(-1, width)

    return Conditions(
        rig, drives, float(np.ptp(places, axis=0).max()),
        np.flatnonzero(~np.repeat([j.pin for j in rig.joints], 3)), places.ravel(),
        numbers(w.pairs, 2), np.array(w.gaps), np.array(w.rows).reshape(-1, places.size),
        np.array(w.values), numbers(slots, 3), np.array(ways, dtype=float), np.array(spans))


def roots(c: Conditions, starts: Array) -> list[Array]:
    """Different poses ``(n_joints, 3)`` that SciPy finds from starts ``(k, n)``, all allowed."""
    found: list[Array] = []
    for start in starts:
        # Lengths of a plate follow from others, so least squares (Moré's, in MINPACK).
        result = root(c.residual, start, jac=c.jacobian, method="lm",
                      options={"xtol": 1e-14, "ftol": 1e-14, "maxiter": 200})
        if np.abs(c.residual(result.x)).max() > 1e-12:
            continue
        pose = c.pose(result.x)
        if c.allowed(pose) and all(np.abs(pose - old).max() > 1e-5 * c.size for old in found):
            found.append(pose)
    return found
