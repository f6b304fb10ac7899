"""A rig's conditions written once more, from its parts alone, for tests to hold the solver against.

Every condition of a plane rig is a quadratic form in the free coordinates and 1: squared
distances, dot and cross products. Nothing here is taken from the solver's own equations.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from typing import Literal

import numpy as np
from scipy.optimize import root

import rigpose as rp
from rigpose.model.equations import Array, Ints
from rigpose.model.rig import Pair

Form = Array


@dataclass(frozen=True)
class Conditions:
    """Forms ``(m, n + 1, n + 1)`` that are zero, ``positive`` ones that aren't negative; ``free``
    coordinates ``(n,)`` of the flattened joints, the others fixed in ``pinned``."""

    forms: Array
    positive: Array
    free: Ints
    pinned: Array
    size: float

    def residual(self, x: Array) -> Array:
        """``(m,)`` in squared sizes."""
        h = np.append(x, 1.0)
        out: Array = self.forms @ h @ h
        return out

    def jacobian(self, x: Array) -> Array:
        """``(m, n)``."""
        slopes: Array = 2.0 * (self.forms @ np.append(x, 1.0))[:, :-1]
        return slopes

    def allowed(self, x: Array) -> bool:
        """Whether nothing points the wrong way round."""
        h = np.append(x, 1.0)
        return bool((self.positive @ h @ h > 0).all())

    def pose(self, x: Array) -> Array:
        """``(n_joints, 2)``."""
        out = self.pinned.copy()
        out[self.free] = x
        return out.reshape(-1, 2)


class _Writer:
    def __init__(self, rig: rp.Rig) -> None:
        self.rig = rig
        fixed = np.repeat([j.pin for j in rig.joints], 2)
        self.free = np.flatnonzero(~fixed)
        n = len(self.free)
        places = [j.at if j.pin and j.at else (0.0, 0.0) for j in rig.joints]
        self.pinned = np.array(places, dtype=float).ravel()
        lead = np.zeros((len(fixed), n + 1))
        lead[self.free, np.arange(n)] = 1.0
        lead[:, n] = self.pinned
        self.lead = lead
        self.one = np.zeros(n + 1)
        self.one[n] = 1.0
        self.zero: list[Form] = []
        self.positive: list[Form] = []

    def at(self, joint: str) -> Array:
        """``(2, n + 1)``: a joint's coordinates."""
        k = 2 * self.rig.index[joint]
        return self.lead[k:k + 2]

    def way(self, pair: Pair) -> Array:
        return self.at(pair[1]) - self.at(pair[0])

    def fixed(self, vector: Array) -> Array:
        """A constant vector in the same guise."""
        return np.outer(vector, self.one)

    def is_zero(self, form: Form, value: float = 0.0) -> None:
        form = form - value * np.outer(self.one, self.one)
        self.zero.append((form + form.T) / 2)


def _dot(a: Array, b: Array) -> Form:
    return a.T @ b


def _cross(a: Array, b: Array) -> Form:
    return np.outer(a[0], b[1]) - np.outer(a[1], b[0])


def _bodies(w: _Writer, drives: Mapping[str, float]) -> None:
    for bone in w.rig.bones:
        way = w.way(bone.ends)
        w.is_zero(_dot(way, way), bone.length**2)
    for ram in w.rig.rams:
        if ram.name in drives:
            way = w.way(ram.ends)
            w.is_zero(_dot(way, way), drives[ram.name] ** 2)
    for plate in w.rig.plates:
        shape = np.array(plate.shape)
        first = w.way((plate.joints[0], plate.joints[1]))
        e = shape[1] - shape[0]
        w.is_zero(_dot(first, first), float(e @ e))
        for joint, place in zip(plate.joints[2:], shape[2:] - shape[0], strict=True):
            other = w.way((plate.joints[0], joint))
            w.is_zero(_dot(first, other), float(e @ place))
            w.is_zero(_cross(first, other), float(e[0] * place[1] - e[1] * place[0]))


def _drives(w: _Writer, drives: Mapping[str, float]) -> None:
    for rail in w.rig.rails:
        assert rail.along is not None or rail.direction is not None
        line = w.way(rail.along) if rail.along else w.fixed(np.array(rail.direction))
        start = w.at(rail.along[0]) if rail.along else w.fixed(np.array(rail.through))
        w.is_zero(_cross(line, w.at(rail.joint) - start))
        if rail.name in drives:
            assert rail.along is None, "a driven slot is no quadratic"
            w.is_zero(_dot(line, w.at(rail.joint) - start), drives[rail.name])
    for crank in w.rig.cranks:
        if crank.name not in drives:
            continue
        turn = np.radians(drives[crank.name] + float(crank.zero))
        c, s = np.cos(turn), np.sin(turn)
        base = w.way(crank.base) if crank.base else w.fixed(np.array([1.0, 0.0]))
        aim = np.stack([c * base[0] - s * base[1], s * base[0] + c * base[1]])
        w.is_zero(_cross(aim, w.way(crank.line)))
        w.positive.append(_dot(aim, w.way(crank.line)))


def conditions(rig: rp.Rig, drives: Mapping[str, float],
               targets: Mapping[str, tuple[float | None, float | None]] | None = None,
               ) -> Conditions:
    """All conditions of a rig with these drives and targets, in units of its drawn size."""
    w = _Writer(rig)
    _bodies(w, drives)
    _drives(w, drives)
    for joint, place in (targets or {}).items():
        for axis, value in enumerate(place):
            if value is not None:
                w.is_zero(np.outer(w.at(joint)[axis], w.one), value)
    size = float(np.ptp(rp.find_rest(rig).positions, axis=0).max())
    n = len(w.free) + 1
    return Conditions(np.array(w.zero) / size**2, np.array(w.positive).reshape(-1, n, n),
                      w.free, w.pinned, size)


def roots(c: Conditions, starts: Array) -> list[Array]:
    """Different poses ``(n_joints, 2)`` that SciPy finds from starts ``(k, n)``."""
    found: list[Array] = []
    for start in starts:
        # Least squares where some condition follows from others.
        method: Literal["hybr", "lm"] = "hybr" if len(c.forms) == len(c.free) else "lm"
        result = root(c.residual, start, jac=c.jacobian, method=method, options={"xtol": 1e-13})
        x = result.x
        if np.abs(c.residual(x)).max() > 1e-12 or not c.allowed(x):
            continue
        pose = c.pose(x)
        if all(np.abs(pose - old).max() > 1e-5 * c.size for old in found):
            found.append(pose)
    return found
