"""The same rig written differently: renamed, shuffled, scaled, moved, mirrored."""

from __future__ import annotations

from dataclasses import replace

import numpy as np

from rigpose.model.rig import Coordinates, Pair, Rig

Point = Coordinates | None


def renamed(rig: Rig, way: dict[str, str]) -> Rig:
    """Joints under other names."""

    def pair(p: Pair | None) -> Pair | None:
        return None if p is None else (way[p[0]], way[p[1]])

    def sure(p: Pair) -> Pair:
        return way[p[0]], way[p[1]]

    return replace(
        rig, joints=tuple(replace(j, name=way[j.name]) for j in rig.joints),
        bones=tuple(replace(b, ends=sure(b.ends)) for b in rig.bones),
        plates=tuple(replace(p, joints=tuple(way[j] for j in p.joints)) for p in rig.plates),
        rails=tuple(replace(r, joint=way[r.joint], along=pair(r.along)) for r in rig.rails),
        rams=tuple(replace(r, ends=sure(r.ends)) for r in rig.rams),
        cranks=tuple(replace(c, line=sure(c.line), base=pair(c.base),
                             about=way.get(c.about or "")) for c in rig.cranks),
        limits=tuple(replace(m, first=sure(m.first), second=sure(m.second), at=way[m.at])
                     for m in rig.limits),
        names={}, branches={n: {way[j]: b for j, b in bends.items()}
                            for n, bends in rig.branches.items()})


def shuffled(rig: Rig, seed: int) -> Rig:
    """Parts of every kind in another order."""
    rng = np.random.default_rng(seed)

    def mix(parts: tuple) -> tuple:  # type: ignore[type-arg]
        return tuple(parts[k] for k in rng.permutation(len(parts)))

    return replace(rig, joints=mix(rig.joints), bones=mix(rig.bones), plates=mix(rig.plates),
                   rails=mix(rig.rails), rams=mix(rig.rams), limits=mix(rig.limits))


def transformed(rig: Rig, scale: float = 1.0, turn: float = 0.0,
                shift: tuple[float, float] = (0.0, 0.0), mirror: bool = False) -> Rig:
    """All places turned by degrees, scaled, mirrored in x and shifted, in this order."""
    flip = -1.0 if mirror else 1.0
    c, s = np.cos(np.radians(turn)), np.sin(np.radians(turn))

    def vector(p: Coordinates) -> Coordinates:
        return (flip * scale * (c * p[0] - s * p[1]), scale * (s * p[0] + c * p[1]))

    def point(p: Point) -> Point:
        if p is None:
            return None
        v = vector(p)
        return (v[0] + shift[0], v[1] + shift[1])

    def unit(p: Point) -> Point:
        if p is None:
            return None
        v = vector(p)
        return (v[0] / scale, v[1] / scale)

    def span(r: tuple[float, float] | None) -> tuple[float, float] | None:
        return None if r is None else (r[0] * scale, r[1] * scale)

    return replace(
        rig, joints=tuple(replace(j, at=point(j.at)) for j in rig.joints),
        bones=tuple(replace(b, length=b.length * scale, play=b.play * scale) for b in rig.bones),
        plates=tuple(replace(p, shape=tuple((flip * scale * x, scale * y) for x, y in p.shape))
                     for p in rig.plates),
        rails=tuple(replace(r, through=point(r.through), direction=unit(r.direction),
                            range=span(r.range)) for r in rig.rails),
        rams=tuple(replace(r, range=span(r.range)) for r in rig.rams))
