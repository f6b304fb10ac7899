"""The same rig written differently: renamed, shuffled, scaled, moved, mirrored."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, replace

import numpy as np

from rigpose.model.equations import Array
from rigpose.model.rig import Coordinates, Limit, Pair, Rig, Tie

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
                   rails=mix(rig.rails), rams=mix(rig.rams), cranks=mix(rig.cranks),
                   limits=mix(rig.limits), ties=mix(rig.ties))


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
        rams=tuple(replace(r, range=span(r.range)) for r in rig.rams),
        cranks=tuple(replace(c, range=None) for c in rig.cranks),
        limits=tuple(_limit(m, mirror) for m in rig.limits),
        ties=tuple(_tie(t, rig, scale) for t in rig.ties))


def _limit(limit: Limit, mirror: bool) -> Limit:
    low, high = limit.range
    return replace(limit, range=(-high, -low)) if mirror and not limit.either else limit


def _tie(tie: Tie, rig: Rig, scale: float) -> Tie:
    """Ways grow with the rig, so their factors shrink."""
    ways = {p.name for p in (*rig.rams, *rig.rails)}
    return replace(tie, sum=tuple((n, f / scale if n in ways else f) for n, f in tie.sum))


@dataclass(frozen=True)
class Change:
    """One way to write a rig differently; `changed_drives` and the rest do the same to values."""

    scale: float = 1.0
    turn: float = 0.0
    shift: tuple[float, float] = (0.0, 0.0)
    mirror: bool = False

    def rig(self, rig: Rig) -> Rig:
        return transformed(rig, self.scale, self.turn, self.shift, self.mirror)

    def places(self, places: Array) -> Array:
        """``(..., 2)``."""
        c, s = np.cos(np.radians(self.turn)), np.sin(np.radians(self.turn))
        turned = places @ np.array([[c, s], [-s, c]]) * self.scale
        if self.mirror:
            turned = turned * (-1.0, 1.0)
        out: Array = turned + self.shift
        return out

    def drives(self, rig: Rig, drives: Mapping[str, Array]) -> dict[str, Array]:
        """Cranks from the ground turn with it; mirrored, all angles change their signs."""
        out = {}
        for name, value in drives.items():
            crank = next((c for c in rig.cranks if c.name == name), None)
            if crank is None:
                out[name] = np.asarray(value) * self.scale
                continue
            ground = crank.base is None and crank.zero != "rest"
            zero = 0.0 if crank.zero == "rest" else float(crank.zero)
            angle = np.asarray(value) + zero + (self.turn if ground else 0.0)
            if self.mirror:
                angle = (180.0 if ground else 0.0) - angle
            out[name] = angle - zero
        return out

    def bends(self, bends: Mapping[str, str]) -> dict[str, str]:
        """Mirrored, left is right; before and after stay."""
        other = {"left": "right", "right": "left"} if self.mirror else {}
        return {joint: other.get(word, word) for joint, word in bends.items()}
