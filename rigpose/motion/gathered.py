"""Whole poses of one frame from the rows of groups.

Each joint has its places side by side, taken from the nodes of its own level in the order of the
branches; bends are measured once a node and taken along in the same way.
"""

from __future__ import annotations

from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from rigpose.model.bends import Bend, Signs, bends_of, joints_of, side_of
from rigpose.model.equations import Array, Equations, Ints
from rigpose.motion.product import Picks, Sorted
from rigpose.solve.rest import Rest
from rigpose.solve.table import spread_by
from rigpose.solve.tree import Tree, grown, up

BLOCK = 1 << 18
"""Poses gathered in one go."""
NODES = 1 << 13
"""Nodes whose bends are measured in one go: what is made on the way stays in the cache."""
FEW = 1 << 12
"""Poses up to which the coordinates of each are laid side by side."""


@dataclass(frozen=True)
class Level:
    """What is settled at one level of a group's tree: ``joints`` with their places ``(nodes,
    dim)`` in the rig's frame, or several with theirs ``(k, nodes, dim)``, and ``bends`` with their
    signs ``(nodes,)``, all by number; ``before``: for each node the one it grew from."""

    joints: list[tuple[int | Ints, Array]]
    bends: list[tuple[int, Signs]]
    before: Ints | int | None


@dataclass(frozen=True, eq=False)
class Sides:
    """Bends of many branches, kept at the nodes of the tree that they grew in.

    levels : from the last to the first; index (n_branches,) the last level's nodes in the order of
    the branches; count : how many bends there are
    """

    levels: Sequence[Level]
    index: Ints
    count: int

    def all(self) -> Signs:
        """``(n_branches, n_bends)``."""
        out = np.empty((self.count, len(self.index)), dtype=np.int8)
        index = self.index
        for level in self.levels:
            for bend, sides in level.bends:
                _take(sides, index, out[bend])
            if level.before is not None:
                index = up(level.before, index)
        return out.T

    def of(self, row: int) -> Signs:
        """``(n_bends,)`` of one branch."""
        out = np.empty(self.count, dtype=np.int8)
        node = self.index[row:row + 1]
        for level in self.levels:
            for bend, sides in level.bends:
                out[bend] = sides[node[0] if len(sides) > 1 else 0]
            if level.before is not None:
                node = up(level.before, node)
        return out

    def codes(self) -> tuple[list[int], NDArray[np.int64]] | None:
        """The bends that vary, and a number for each branch ``(n_branches,)`` that is made of
        these; None where some are straight."""
        varies: list[int] = []
        code = np.zeros(1, dtype=np.int64)
        for level in reversed(self.levels):
            if level.before is not None and len(code) > 1:
                code = spread_by(code, level.before, grown(level.before), 0)
            for bend, sides in level.bends:
                least = int(sides.min())
                if least < -1 or not sides.all():
                    return None
                if least < int(sides.max()):
                    varies.append(bend)
                    code = 2 * code + (sides > 0)
        return varies, code.take(self.index) if len(code) > 1 else np.repeat(code, len(self.index))


class Gathering:
    """Poses of one frame by the rows that they are made of. ``base`` are places ``(dim, 1, 1)`` of
    joints that hang on what is known."""

    def __init__(self, rest: Rest, picks: Sequence[Sorted], base: Mapping[int, Array]) -> None:
        self.eqs = eqs = rest.equations
        self.base = {j: place[:, :, 0] for j, place in base.items() if j < eqs.n}
        inside = {j for p in picks for j in p.rows.group.joints}
        self.others = sorted(set(range(eqs.n)) - inside)
        tree = picks[0].rows.places if len(picks) == 1 else None
        self.bends = bends_of(eqs.rig) if isinstance(tree, Tree) else ()
        self.levels = [list(_levels(eqs, p, self.base, self.bends)) for p in picks]

    def poses(self, mixed: Picks) -> Array:
        """``(n_branches, 1, n_joints, dim)`` in the rig's frame."""
        eqs, count = self.eqs, len(mixed.index)
        out = np.empty((eqs.n, count, eqs.dim))
        for j in self.others:
            place = self.base.get(j)
            out[j] = np.nan if place is None else _outward(eqs, place)
        for start in range(0, count, BLOCK):
            part = slice(start, start + BLOCK)
            for g, levels in enumerate(self.levels):
                _fill(out[:, part], levels, mixed.index[part, g])
        if not mixed.alive.all():
            out[:, ~mixed.alive[:, 0]] = np.nan
        poses = out.transpose(1, 0, 2)[:, None]
        return np.ascontiguousarray(poses) if count <= FEW else poses

    def sides(self, mixed: Picks) -> Sides | None:
        """The bends of the same branches, None where they come no cheaper than from the poses."""
        if not self.bends or not mixed.alive.all():
            return None
        return Sides(self.levels[0], np.ascontiguousarray(mixed.index[:, 0]), len(self.bends))


def _fill(out: Array, levels: Sequence[Level], index: Ints) -> None:
    """A block of poses, from the level placed last to the first."""
    for level in levels:
        for joint, places in level.joints:
            if isinstance(joint, int):
                _take(places, index, out[joint])
            else:
                out[joint] = places.take(index, axis=1)
        if level.before is not None:
            index = up(level.before, index)


def _take(values: NDArray[np.generic], index: Ints, out: NDArray[np.generic]) -> None:
    if len(values) == 1:
        out[:] = values[0]
    else:
        np.take(values, index, axis=0, out=out, mode="clip")


def _outward(eqs: Equations, place: Array) -> Array:
    """Places ``(nodes, dim)`` in the rig's frame, from ``(dim, nodes)`` in the equations'."""
    out = np.empty(place.shape[::-1])
    np.multiply(place.T, eqs.scale, out=out)
    if eqs.origin.any():
        out += eqs.origin
    return out


def _levels(eqs: Equations, pick: Sorted, base: Mapping[int, Array],
            bends: Sequence[Bend]) -> Iterator[Level]:
    """From the level placed last down to the first."""
    joints, places = pick.rows.group.joints, pick.rows.places
    if not isinstance(places, Tree):
        together = np.empty((len(joints), len(pick.rows.alive), eqs.dim))
        for k, place in enumerate(places):
            together[k] = place[:, :, 0].T
        together *= eqs.scale
        together += eqs.origin
        yield Level([(np.array(joints, dtype=np.intp), together)], [], None)
        return
    own = [p[:, :, 0] for p in places.nodes]
    sides = _sides(eqs, places, dict(zip(joints, own, strict=True)), base, bends)
    for level in range(places.last, -1, -1):
        mine = [k for k, settled in enumerate(places.levels) if settled == level]
        yield Level([(joints[k], _outward(eqs, own[k])) for k in mine],
                    [(k, sign) for k, (settled, sign) in enumerate(sides) if settled == level],
                    places.maps[level - 1] if level else None)


def _sides(eqs: Equations, tree: Tree, own: Mapping[int, Array], base: Mapping[int, Array],
           bends: Sequence[Bend]) -> list[tuple[int, Signs]]:
    """For each bend the level from which on it is settled, and its sign at the nodes there."""
    level_of = dict(zip(own, tree.levels, strict=True))
    out = []
    for bend in bends:
        joints = joints_of(eqs.rig, bend)
        level = max((level_of.get(j, 0) for j in joints), default=0)
        sources = {j: (own[j], tree.between(level_of[j], level)) if j in own else (base[j], None)
                   for j in joints}
        sign = np.empty(tree.size(level), dtype=np.int8)
        for start in range(0, len(sign), NODES):
            part = slice(start, min(start + NODES, len(sign)))
            sign[part] = side_of(eqs.rig, {j: _part(*source, part)
                                           for j, source in sources.items()}, bend)
        out.append((level, sign))
    return out


def _part(places: Array, index: Ints | int | None, part: slice) -> Array:
    """Some nodes' places ``(dim, m)``, or ``(dim, 1)`` where all have the same."""
    if places.shape[1] == 1:
        return places
    if index is None:
        return places[:, part]
    if not isinstance(index, int):
        return places.take(index[part], axis=1)
    count = part.stop - part.start
    start = part.start % index
    if start + count <= index:
        return places[:, start:start + count]
    return places.take(np.arange(start, start + count) % index, axis=1)
