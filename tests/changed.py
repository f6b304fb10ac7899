"""The same rig written differently: renamed, shuffled, scaled, turned, moved, mirrored."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, replace

import numpy as np
from scipy.spatial.transform import Rotation

from rigpose.model.equations import Array
from rigpose.model.rig import Coordinates, Crank, Limit, Pair, Rig, Tie

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
        cranks=tuple(replace(c, line=sure(c.line), base=pair(c.base), axis=pair(c.axis),
                             about=way.get(c.about or "")) for c in rig.cranks),
        limits=tuple(replace(m, first=sure(m.first), second=sure(m.second), at=way[m.at],
                             axis=pair(m.axis)) for m in rig.limits),
        planes=tuple(replace(p, joints=tuple(way[j] for j in p.joints)) for p in rig.planes),
        names={}, branches={n: {way[j]: b for j, b in bends.items()}
                            for n, bends in rig.branches.items()})


def shuffled(rig: Rig, seed: int) -> Rig:
    """Parts of every kind in another order."""
    rng = np.random.default_rng(seed)

    def mix(parts: tuple) -> tuple:  # type: ignore[type-arg]
        return tuple(parts[k] for k in rng.permutation(len(parts)))

    return replace(rig, joints=mix(rig.joints), bones=mix(rig.bones), plates=mix(rig.plates),
                   rails=mix(rig.rails), rams=mix(rig.rams), cranks=mix(rig.cranks),
                   limits=mix(rig.limits), ties=mix(rig.ties), planes=mix(rig.planes))


@dataclass(frozen=True)
class Change:
    """One way to write a rig differently: turned by degrees, scaled, mirrored in x and shifted, in
    this order. In space the turn is by the right hand about ``axis``, of any length."""

    scale: float = 1.0
    turn: float = 0.0
    shift: tuple[float, ...] = (0.0, 0.0)
    mirror: bool = False
    axis: tuple[float, float, float] = (0.0, 0.0, 1.0)

    def ways(self, ways: Array) -> Array:
        """Vectors ``(..., dim)``: turned and mirrored, as long as they were."""
        dim = ways.shape[-1]
        turned: Array = ways @ self._matrix(dim).T
        if self.mirror:
            turned = turned * np.array([-1.0, 1.0, 1.0])[:dim]
        return turned

    def _matrix(self, dim: int) -> Array:
        axis = np.array(self.axis) if dim == 3 else np.array([0.0, 0.0, 1.0])
        if not self.turn:
            return np.eye(dim)
        turn = Rotation.from_rotvec(np.radians(self.turn) * axis / np.linalg.norm(axis))
        matrix: Array = turn.as_matrix()[:dim, :dim]
        return matrix

    def places(self, places: Array) -> Array:
        """``(..., dim)``."""
        shift = np.zeros(places.shape[-1])
        shift[:len(self.shift)] = self.shift
        out: Array = self.ways(places) * self.scale + shift
        return out

    def wish(self, place: Array) -> Array | None:
        """A target ``(dim,)`` with NaN for what isn't asked for; None where one coordinate would
        become a slanted line or plane."""
        known = ~np.isnan(place)
        if known.all():
            return self.places(place)
        reached = np.abs(self.ways(np.eye(len(place)))) > 1e-12  # [from, to]
        clear = ~reached[~known].any(axis=0)
        if clear.sum() != known.sum():
            return None
        return np.where(clear, self.places(np.nan_to_num(place)), np.nan)

    def rig(self, rig: Rig) -> Rig:
        return _transformed(rig, self)

    def drives(self, rig: Rig, drives: Mapping[str, Array]) -> dict[str, Array]:
        """In the plane cranks from the ground turn with it; mirrored, all angles change their
        signs."""
        out = {}
        for name, value in drives.items():
            crank = next((c for c in rig.cranks if c.name == name), None)
            if crank is None:
                out[name] = np.asarray(value) * self.scale
                continue
            sign, shift = self.angle(rig, crank)
            out[name] = sign * np.asarray(value) + shift
        return out

    def angle(self, rig: Rig, crank: Crank) -> tuple[float, float]:
        """Sign and shift of a crank's value: what it was times the one plus the other."""
        zero = 0.0 if crank.zero == "rest" else float(crank.zero)
        from_x = rig.dim == 2 and crank.base is None and crank.zero != "rest"
        turn = self.turn if from_x else 0.0
        if not self.mirror:
            return 1.0, turn
        return -1.0, (180.0 if from_x else 0.0) - turn - 2 * zero

    def bends(self, bends: Mapping[str, str]) -> dict[str, str]:
        """Mirrored, left is right; before and after stay."""
        other = {"left": "right", "right": "left"} if self.mirror else {}
        return {joint: other.get(word, word) for joint, word in bends.items()}


def _transformed(rig: Rig, change: Change) -> Rig:
    scale = change.scale

    def place(p: Coordinates) -> Coordinates:
        return tuple(change.places(np.array(p)).tolist())

    def direction(p: Coordinates) -> Coordinates:
        return tuple(change.ways(np.array(p)).tolist())

    def point(p: Point) -> Point:
        return None if p is None else place(p)

    def way(p: Point) -> Point:
        return None if p is None else direction(p)

    def span(r: tuple[float, float] | None) -> tuple[float, float] | None:
        return None if r is None else (r[0] * scale, r[1] * scale)

    flip = np.ones(rig.dim)
    flip[0] = -1.0 if change.mirror else 1.0
    return replace(
        rig, joints=tuple(replace(j, at=point(j.at)) for j in rig.joints),
        bones=tuple(replace(b, length=b.length * scale, play=b.play * scale) for b in rig.bones),
        plates=tuple(
            replace(p, shape=tuple(map(tuple, (np.array(p.shape) * flip * scale).tolist())))
            for p in rig.plates),
        rails=tuple(replace(r, through=point(r.through), direction=way(r.direction),
                            range=span(r.range)) for r in rig.rails),
        rams=tuple(replace(r, range=span(r.range)) for r in rig.rams),
        cranks=tuple(replace(c, range=None, toward=way(c.toward)) for c in rig.cranks),
        limits=tuple(_limit(m, change.mirror) for m in rig.limits),
        planes=tuple(replace(p, through=place(p.through), normal=direction(p.normal))
                     for p in rig.planes),
        ties=tuple(_tie(t, rig, change) for t in rig.ties))


def _limit(limit: Limit, mirror: bool) -> Limit:
    low, high = limit.range
    return replace(limit, range=(-high, -low)) if mirror and not limit.either else limit


def _tie(tie: Tie, rig: Rig, change: Change) -> Tie:
    """Ways grow with the rig, so their factors shrink; angles may change their signs and count
    from another zero."""
    cranks = {c.name: c for c in rig.cranks}
    factors, equals = [], tie.equals
    for name, factor in tie.sum:
        if name not in cranks:
            factors.append((name, factor / change.scale))
            continue
        sign, shift = change.angle(rig, cranks[name])
        factors.append((name, factor * sign))
        equals += factor * sign * shift
    return replace(tie, sum=tuple(factors), equals=equals)
