"""`Rig` to `Equations`: every kind of part becomes rows of a few kinds of equation."""

from __future__ import annotations

from functools import lru_cache

import numpy as np
from numpy.typing import NDArray

from rigpose.model.alike import bodies_of
from rigpose.model.equations import (
    GROUND,
    Angles,
    Array,
    Distances,
    Equations,
    Fences,
    Ints,
    Lines,
    Planes,
)
from rigpose.model.rig import Bone, Drive, Limit, Ram, Rig


def _frame(rig: Rig) -> tuple[float, Array, Array]:
    """Scale, origin and the scaled places (NaN where unknown)."""
    nowhere = (np.nan,) * rig.dim
    at = np.array([nowhere if j.at is None else j.at for j in rig.joints],
                  dtype=np.float64).reshape(len(rig.joints), rig.dim)
    known = at[~np.isnan(at[:, 0])]
    lengths = [b.length for b in rig.bones] or [1.0]
    extent = float(np.linalg.norm(np.ptp(known, axis=0))) if len(known) else 0.0
    scale = max(extent, *lengths)
    pins = np.array([j.at for j in rig.joints if j.pin and j.at is not None])
    middle = pins if len(pins) else known
    origin = (middle.min(axis=0) + middle.max(axis=0)) / 2 if len(middle) else np.zeros(rig.dim)
    # A power of two keeps every digit of the file's numbers; the origin is only taken off where
    # it lies far away, so that ordinary rigs come back to the last bit.
    scale = float(2.0 ** np.round(np.log2(scale)))
    if np.abs(origin).max(initial=0.0) < 8 * scale:
        origin = np.zeros(rig.dim)
    return scale, origin, (at - origin) / scale


def _ints(rows: list[tuple[int, ...]], width: int) -> Ints:
    return np.array(rows, dtype=np.intp).reshape(len(rows), width)


def _distances(rig: Rig, scale: float, value: dict[str, int]) -> Distances:
    at = rig.index
    parts: tuple[Bone | Ram, ...] = (*rig.bones, *rig.rams)
    nb = len(rig.bones)
    return Distances(
        names=tuple(p.name for p in parts),
        ends=np.fromiter((at[j] for p in parts for j in p.ends), np.intp,
                         2 * len(parts)).reshape(-1, 2),
        length=np.array([b.length / scale for b in rig.bones] + [np.nan] * len(rig.rams)),
        value=np.array([-1] * nb + [value[r.name] for r in rig.rams], dtype=np.intp),
        play=np.array([b.play / scale for b in rig.bones] + [0.0] * len(rig.rams)),
    )


def _lines(rig: Rig, scale: float, origin: Array, value: dict[str, int]) -> Lines:
    at, nan = rig.index, (np.nan,) * rig.dim
    through = np.array([r.through or nan for r in rig.rails]).reshape(-1, rig.dim)
    return Lines(
        names=tuple(r.name for r in rig.rails),
        joint=np.array([at[r.joint] for r in rig.rails], dtype=np.intp),
        through=(through - origin) / scale,
        direction=np.array([r.direction or nan for r in rig.rails]).reshape(-1, rig.dim),
        along=_ints(
            [(at[r.along[0]], at[r.along[1]]) if r.along else (GROUND, GROUND) for r in rig.rails],
            2,
        ),
        value=np.array([value[r.name] for r in rig.rails], dtype=np.intp),
    )


def _angles(rig: Rig, value: dict[str, int]) -> Angles:
    at = rig.index

    def pair(p: tuple[str, str] | None) -> tuple[int, int]:
        return (at[p[0]], at[p[1]]) if p else (GROUND, GROUND)

    zero = [np.nan if isinstance(c.zero, str) else np.radians(c.zero) for c in rig.cranks]
    return Angles(
        names=tuple(c.name for c in rig.cranks),
        line=_ints([pair(c.line) for c in rig.cranks], 2),
        base=_ints([pair(c.base) for c in rig.cranks], 2),
        zero=np.array(zero, dtype=float),
        value=np.array([value[c.name] for c in rig.cranks], dtype=np.intp),
        axis=_ints([pair(c.axis) for c in rig.cranks], 2),
        toward=np.array([c.toward or (np.nan,) * 3 for c in rig.cranks]).reshape(-1, 3),
    )


def _planes(rig: Rig, scale: float, origin: Array) -> Planes:
    each = [(p, j) for p in rig.planes for j in p.joints]
    through = np.array([p.through for p, _ in each]).reshape(-1, rig.dim)
    return Planes(
        names=tuple(p.name for p, _ in each),
        joint=np.array([rig.index[j] for _, j in each], dtype=np.intp),
        through=(through - origin) / scale,
        normal=np.array([p.normal for p, _ in each]).reshape(-1, rig.dim),
    )


def _fences(limits: tuple[Limit, ...], at: dict[str, int]) -> Fences:
    low = np.radians([x.range[0] for x in limits])
    return Fences(
        names=tuple(x.name for x in limits),
        first=_ints([(at[x.first[0]], at[x.first[1]]) for x in limits], 2),
        second=_ints([(at[x.second[0]], at[x.second[1]]) for x in limits], 2),
        low=low,
        width=np.radians([x.range[1] for x in limits]) - low,
        either=np.array([x.either for x in limits], dtype=bool),
        axis=_ints([(at[x.axis[0]], at[x.axis[1]]) if x.axis else (GROUND, GROUND)
                    for x in limits], 2),
    )


def _spans(rig: Rig, scale: float) -> tuple[Array, Array]:
    """Allowed ranges ``(v, 2)`` and the factor ``(v,)`` that takes file values to scaled ones."""
    span, unit = [], []
    drives: tuple[Drive, ...] = (*rig.cranks, *rig.rams, *rig.rails)
    for part in drives:
        factor = np.pi / 180 if part in rig.cranks else 1 / scale
        low, high = part.range or (-np.inf, np.inf)
        unit.append(factor)
        span.append((low * factor, high * factor))
    return np.array(span).reshape(-1, 2), np.array(unit)


def _hands(rig: Rig, at: Array) -> tuple[tuple[str, tuple[int, int, int], float], ...]:
    """Orientation signs of frozen groups: every triangle of joints that the bones pass through."""
    found = []
    bones = {b.name: b for b in rig.bones}
    for group in rig.frozen:
        seen: list[int] = []
        for name in group.bones:
            for end in bones[name].ends:
                k = rig.index[end]
                if k not in seen:
                    seen.append(k)
        triples = {(seen[0], seen[1], c) for c in seen[2:]}
        triples |= {(seen[k - 2], seen[k - 1], seen[k]) for k in range(3, len(seen))}
        for a, b, c in sorted(triples):
            u, v = at[b] - at[a], at[c] - at[a]
            area = float(u[0] * v[1] - u[1] * v[0])
            if np.isfinite(area) and abs(area) > 1e-9:
                found.append((group.name, (a, b, c), float(np.sign(area))))
    return tuple(found)


@lru_cache(maxsize=64)
def lower(rig: Rig) -> Equations:
    """The equations of a rig (kept for the rigs used last)."""
    scale, origin, at = _frame(rig)
    values = rig.drive_names
    number = {name: k for k, name in enumerate(values)}
    span, unit = _spans(rig, scale)
    ties: NDArray[np.float64] = np.zeros((len(rig.ties), len(values)))
    for row, tie in enumerate(rig.ties):
        for name, factor in tie.sum:
            ties[row, number[name]] += factor / unit[number[name]]
    return Equations(
        rig=rig, scale=scale, origin=origin, at=at,
        pinned=np.array([j.pin for j in rig.joints], dtype=bool),
        distances=_distances(rig, scale, number),
        bodies=bodies_of(rig.plates, dict(rig.index), scale),
        lines=_lines(rig, scale, origin, number),
        angles=_angles(rig, number),
        fences=_fences(rig.limits, dict(rig.index)),
        planes=_planes(rig, scale, origin),
        values=values, span=span, unit=unit,
        tie_names=tuple(t.name for t in rig.ties),
        ties=ties, tie_equals=np.array([t.equals for t in rig.ties], dtype=float),
        hands=_hands(rig, at) if rig.dim == 2 else (),
    )
