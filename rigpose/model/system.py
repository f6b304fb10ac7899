"""Residuals and Jacobians of the equations for a set of known values, batched over poses.

Each family of rows gives its residual ``(N, m)``, the columns it touches ``(m, w)`` and its
derivatives ``(N, m, w)``; dense and sparse Jacobians are made from these triplets. Distances
are written as ``(|d|**2 - L**2) / 2L``, so that every row has the size of a length.
"""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass, field
from functools import cached_property

import numpy as np
from numpy.typing import NDArray

from rigpose.model.alike import affine_rows, base_ends
from rigpose.model.equations import GROUND, Array, Equations, Ints
from rigpose.model.gauges import gauge_gradients, measure
from rigpose.model.spacerows import (
    BodyRows,
    body_rows,
    by_frame_rows,
    fixed_line_rows,
    moving_line_rows,
    on_line_rows,
    plane_rows,
)

Family = tuple[Array, Ints, Array]


def _columns(joints: Ints, dim: int) -> Ints:
    """Columns ``(m, w * dim)`` of the coordinates of joints ``(m, w)``."""
    wide = joints[..., None] * dim + np.arange(dim)
    return wide.reshape(len(joints), joints.shape[1] * dim)


@dataclass(frozen=True)
class System:
    """The rows that hold once ``drives`` (value numbers) and ``targets`` (joint, axis) are known.

    ``ties`` says whether linear ties between unknown values are rows too.
    """

    eqs: Equations
    drives: frozenset[int] = frozenset()
    targets: tuple[tuple[int, int], ...] = ()
    ties: bool = True
    without: frozenset[str] = field(default=frozenset())

    @cached_property
    def dist_rows(self) -> Ints:
        """Distance rows in force: all bones, and the rams whose length is known."""
        d = self.eqs.distances
        held = d.value < 0
        if self.drives:
            held |= np.isin(d.value, np.array(sorted(self.drives)))
        if self.without:
            held &= np.array([name not in self.without for name in d.names], dtype=bool)
        return np.flatnonzero(held)

    @cached_property
    def _affine(self) -> tuple[Ints, Array, tuple[str, ...]]:
        """Joints (a, b, c) and weights (u, v) with c = a + u (b - a) + v perp(b - a)."""
        joints, weights = affine_rows(self.eqs.bodies)
        names = tuple(b.name for b in self.eqs.bodies for _ in range(len(b.joints) - 2))
        return joints, weights, names

    @cached_property
    def space(self) -> BodyRows:
        """Rows of bodies in space."""
        return body_rows(self.eqs.bodies)

    @cached_property
    def _bases(self) -> tuple[Ints, Array, tuple[str, ...]]:
        if self.eqs.dim == 3:
            return self.space.ends, self.space.length, self.space.names[0]

        ends, length = base_ends(self.eqs.bodies)
        return ends, length, tuple(b.name for b in self.eqs.bodies)

    @cached_property
    def _known_rails(self) -> list[int]:
        return [k for k, v in enumerate(self.eqs.lines.value) if int(v) in self.drives]

    @cached_property
    def _known_cranks(self) -> list[int]:
        return [k for k, v in enumerate(self.eqs.angles.value) if int(v) in self.drives]

    @cached_property
    def _open_ties(self) -> list[int]:
        """Ties that are not settled by drives alone."""
        if not self.ties:
            return []
        return [k for k, row in enumerate(self.eqs.ties)
                if not set(np.flatnonzero(row).tolist()) <= self.drives]

    @cached_property
    def row_names(self) -> tuple[str, ...]:
        """The part behind each row."""
        e = self.eqs
        fixed = e.lines.along[:, 0] == GROUND
        names = [e.distances.names[k] for k in self.dist_rows]
        names += self._bases[2]
        kinds = self.space.names[1:] if e.dim == 3 else (self._affine[2],)
        names += [n for kind in kinds for n in kind for _ in range(e.dim)]
        on_fixed, on_moving = (2, 3) if e.dim == 3 else (1, 1)
        names += [n for n, f in zip(e.lines.names, fixed, strict=True) if f
                  for _ in range(on_fixed)]
        names += [n for n, f in zip(e.lines.names, fixed, strict=True) if not f
                  for _ in range(on_moving)]
        names += e.planes.names
        names += [e.lines.names[k] for k in self._known_rails]
        names += [e.angles.names[k] for k in self._known_cranks]
        names += [e.rig.joint_names[j] for j, _ in self.targets]
        names += [e.tie_names[k] for k in self._open_ties]
        return tuple(names)

    @cached_property
    def touched(self) -> NDArray[np.bool_]:
        """Which joints a row touches, ``(M, n)``."""
        e = self.eqs
        rows: list[NDArray[np.bool_]] = []
        x = np.where(np.isnan(e.at), 0.5, e.at)[None]
        values = np.ones((1, len(e.values)))
        with np.errstate(invalid="ignore", divide="ignore"):
            for residual, cols, slopes in self.families(x, values, None):
                mask = np.zeros((residual.shape[1], e.n), dtype=bool)
                row, slot = np.nonzero((slopes[0] != 0) | (cols.shape[1] <= 3 * e.dim))
                mask[row, cols[row, slot] // e.dim] = True
                rows.append(mask)
        return np.concatenate(rows)

    @cached_property
    def free(self) -> Ints:
        """Columns of coordinates that are not pinned."""
        return np.flatnonzero(np.repeat(~self.eqs.pinned, self.eqs.dim))

    def families(self, x: Array, values: Array, goal: Array | None) -> Iterator[Family]:
        """All rows at poses ``x (N, n, dim)``; ``values (N, v)``, ``goal (N, n, dim)``."""
        yield self._distance_rows(x, values, self.dist_rows)
        yield self._base_rows(x)
        yield from self._space_rows(x) if self.eqs.dim == 3 else self._plane_rows(x)
        yield self._rail_values(x, values)
        yield self._angle_rows(x, values)
        yield self._target_rows(x, goal)
        yield self._tie_rows(x, values)

    def residual(self, x: Array, values: Array, goal: Array | None = None) -> Array:
        """Row residuals ``(N, M)`` at poses ``(N, n, dim)``."""
        return np.concatenate([f[0] for f in self.families(x, values, goal)], axis=1)

    def both(self, x: Array, values: Array, goal: Array | None = None) -> tuple[Array, Array]:
        """Residual ``(N, M)`` and dense Jacobian ``(N, M, n * dim)``."""
        n, width = len(x), self.eqs.n * self.eqs.dim
        families = list(self.families(x, values, goal))
        residual = np.concatenate([f[0] for f in families], axis=1)
        jacobian = np.zeros((n, residual.shape[1], width))
        row = 0
        for r, cols, slopes in families:
            m = r.shape[1]
            rows = np.arange(row, row + m)
            for k in range(cols.shape[1]):
                jacobian[:, rows, cols[:, k]] += slopes[:, :, k]
            row += m
        return residual, jacobian

    def triplets(self, x: Array, values: Array) -> tuple[Ints, Ints, Array]:
        """The Jacobian of one pose ``(n, dim)`` as rows, columns and entries."""
        rows: list[Ints] = []
        cols: list[Ints] = []
        entries: list[Array] = []
        start = 0
        for r, c, s in self.families(x[None], values[None], None):
            m, w = c.shape
            rows.append(np.repeat(np.arange(start, start + m), w))
            cols.append(c.ravel())
            entries.append(s[0].ravel())
            start += r.shape[1]
        return np.concatenate(rows), np.concatenate(cols), np.concatenate(entries)

    def _distance_rows(self, x: Array, values: Array, which: Ints) -> Family:
        d = self.eqs.distances
        ends, value = d.ends[which], d.value[which]
        length = np.broadcast_to(d.length[which], (len(x), len(which))).copy()
        rams = np.flatnonzero(value >= 0)
        length[:, rams] = values[:, value[rams]]
        return self._squared(x, ends, length)

    def _squared(self, x: Array, ends: Ints, length: Array) -> Family:
        gap = x[:, ends[:, 1]] - x[:, ends[:, 0]]
        long = np.sqrt(np.einsum("nmd,nmd->nm", gap, gap))
        residual = (long - length) * (long + length) / (2 * length)
        slope = gap / length[..., None]
        return residual, _columns(ends, self.eqs.dim), np.concatenate([-slope, slope], axis=2)

    def _base_rows(self, x: Array) -> Family:
        ends, length, _ = self._bases
        return self._squared(x, ends, np.broadcast_to(length, (len(x), len(length))))

    def _space_rows(self, x: Array) -> Iterator[Family]:
        lines = self.eqs.lines
        yield on_line_rows(x, self.space)
        yield by_frame_rows(x, self.space)
        fixed = np.flatnonzero(lines.along[:, 0] == GROUND)
        yield fixed_line_rows(x, lines.joint[fixed], lines.through[fixed], lines.direction[fixed])
        moving = np.flatnonzero(lines.along[:, 0] != GROUND)
        yield moving_line_rows(x, np.column_stack([lines.along[moving], lines.joint[moving]]))
        planes = self.eqs.planes
        yield plane_rows(x, planes.joint, planes.through, planes.normal)

    def _plane_rows(self, x: Array) -> Iterator[Family]:
        yield self._affine_rows(x)
        yield from self._line_rows(x)
        planes = self.eqs.planes
        yield plane_rows(x, planes.joint, planes.through, planes.normal)

    def _affine_rows(self, x: Array) -> Family:
        joints, weights, _ = self._affine
        a, b, c = (x[:, joints[:, k]] for k in range(3))
        u, v = weights[:, 0], weights[:, 1]
        e = b - a
        turned = np.stack([-e[..., 1], e[..., 0]], axis=-1)
        residual = c - a - u[:, None] * e - v[:, None] * turned
        m = len(joints)
        slopes = np.zeros((m, 2, 3, 2))
        eye, quarter = np.eye(2), np.array([[0.0, -1.0], [1.0, 0.0]])
        lever = u[:, None, None] * eye + v[:, None, None] * quarter
        slopes[:, :, 0], slopes[:, :, 1], slopes[:, :, 2] = lever - eye, -lever, eye
        cols = np.repeat(_columns(joints, 2), 2, axis=0)
        flat = np.broadcast_to(slopes.reshape(1, 2 * m, 6), (len(x), 2 * m, 6))
        return residual.reshape(len(x), 2 * m), cols, flat

    def _line_rows(self, x: Array) -> Iterator[Family]:
        lines = self.eqs.lines
        fixed = np.flatnonzero(lines.along[:, 0] == GROUND)
        d = lines.direction[fixed]
        normal = np.stack([-d[:, 1], d[:, 0]], axis=1)
        joint = lines.joint[fixed]
        residual = np.einsum("nmd,md->nm", x[:, joint] - lines.through[fixed], normal)
        yield (residual, _columns(joint[:, None], 2),
               np.broadcast_to(normal, (len(x), *normal.shape)))
        moving = np.flatnonzero(lines.along[:, 0] != GROUND)
        a, b, p = (x[:, lines.along[moving, 0]], x[:, lines.along[moving, 1]],
                   x[:, lines.joint[moving]])
        yield self._incidence(a, b, p, np.column_stack([lines.along[moving], lines.joint[moving]]))

    @staticmethod
    def _incidence(a: Array, b: Array, p: Array, joints: Ints) -> Family:
        """Distance of p from the line through a and b, and its derivatives."""
        e = b - a
        long = np.sqrt(np.einsum("nmd,nmd->nm", e, e))
        w = p - a
        off = (e[..., 0] * w[..., 1] - e[..., 1] * w[..., 0]) / long
        normal = np.stack([-e[..., 1], e[..., 0]], axis=-1) / long[..., None]
        share = np.einsum("nmd,nmd->nm", w, e) / (long * long)
        at_b = -share[..., None] * normal
        return off, _columns(joints, 2), np.concatenate([-normal - at_b, at_b, normal], axis=2)

    def _rail_values(self, x: Array, values: Array) -> Family:
        lines, known = self.eqs.lines, np.array(self._known_rails, dtype=np.intp)
        numbers = lines.value[known]
        measured, cols, slopes = gauge_gradients(self.eqs, x, numbers)
        return measured - values[:, numbers], cols, slopes

    def _angle_rows(self, x: Array, values: Array) -> Family:
        known = np.array(self._known_cranks, dtype=np.intp)
        numbers = self.eqs.angles.value[known]
        measured, cols, slopes = gauge_gradients(self.eqs, x, numbers)
        off = measured - values[:, numbers]
        # Multiplied by the turned line's length, so that the row has the size of a length.
        line = self.eqs.angles.line[known]
        arm = np.linalg.norm(x[:, line[:, 1]] - x[:, line[:, 0]], axis=2)
        off = np.remainder(off + np.pi, 2 * np.pi) - np.pi
        return off * arm, cols, slopes * arm[..., None]

    def _target_rows(self, x: Array, goal: Array | None) -> Family:
        pairs = np.array(self.targets, dtype=np.intp).reshape(-1, 2)
        aim = x if goal is None else goal
        residual = x[:, pairs[:, 0], pairs[:, 1]] - aim[:, pairs[:, 0], pairs[:, 1]]
        cols = (pairs[:, 0] * self.eqs.dim + pairs[:, 1])[:, None]
        return residual, cols, np.ones((len(x), len(pairs), 1))

    def _tie_rows(self, x: Array, values: Array) -> Family:
        e, rows = self.eqs, self._open_ties
        width = e.n * e.dim
        if not rows:
            return np.zeros((len(x), 0)), np.zeros((0, 1), dtype=np.intp), np.zeros((len(x), 0, 1))
        used = np.flatnonzero(np.any(e.ties[rows] != 0, axis=0))
        mine = measure(e, x, used)
        known = np.array([int(k) in self.drives for k in used])
        mine[:, known] = values[:, used[known]]
        factor = e.ties[rows][:, used]
        residual = mine @ factor.T - e.tie_equals[rows]
        gradient = np.zeros((len(x), len(used), width))
        _, cols, slopes = gauge_gradients(e, x, used)
        for k in range(cols.shape[1]):
            gradient[:, np.arange(len(used)), cols[:, k]] += slopes[:, :, k]
        gradient[:, known] = 0.0
        dense = np.einsum("tu,nuw->ntw", factor, gradient)
        everything = np.broadcast_to(np.arange(width), (len(rows), width))
        return residual, everything, dense
