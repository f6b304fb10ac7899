"""Whole poses of one frame from the rows of groups.

Each joint has its places side by side, taken from the nodes of its own level in the order of the
branches.
"""

from __future__ import annotations

from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass

import numpy as np

from rigpose.model.equations import Array, Equations, Ints
from rigpose.motion.product import Picks, Sorted
from rigpose.motion.sides import Sides
from rigpose.solve.rest import Rest
from rigpose.solve.tree import Tree, taken_by, up

BLOCK = 1 << 18
"""Poses gathered in one go."""
FEW = 1 << 12
"""Poses up to which the coordinates of each are laid side by side."""


@dataclass(frozen=True)
class Level:
    """What is settled at one level of a group's tree: ``joints`` by number with their places
    ``(nodes, dim)`` in the rig's frame, or several with theirs ``(k, nodes, dim)``; ``before``:
    for each node the one it grew from."""

    joints: list[tuple[int | Ints, Array]]
    before: Ints | int | None


class Gathering:
    """Poses of one frame by the rows that they are made of. ``base`` are places ``(dim, 1, 1)`` of
    joints that hang on what is known."""

    def __init__(self, rest: Rest, picks: Sequence[Sorted], base: Mapping[int, Array]) -> None:
        self.eqs, self.picks = rest.equations, picks
        eqs = self.eqs
        self.base = {j: place[:, :, 0] for j, place in base.items() if j < eqs.n}
        inside = {j for p in picks for j in p.rows.group.joints}
        self.others = sorted(set(range(eqs.n)) - inside)
        self.levels = [list(_levels(eqs, p)) for p in picks]

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

    def sides(self, mixed: Picks, positions: Array) -> Sides | None:
        """The bends of the same branches, None where they come no cheaper than from the poses."""
        tree = self.picks[0].rows.places if len(self.picks) == 1 else None
        if not isinstance(tree, Tree) or not mixed.alive.all():
            return None
        return Sides(self.eqs, self.picks[0].rows.group, tree, self.base, positions[:, 0],
                     np.ascontiguousarray(mixed.index[:, 0]),
                     float(mixed.margin.min(initial=1.0)))


def _fill(out: Array, levels: Sequence[Level], index: Ints) -> None:
    """A block of poses, from the level placed last to the first."""
    index = np.array(index)
    for level in levels:
        for joint, places in level.joints:
            if isinstance(joint, int):
                taken_by(places, index, out[joint])
            else:
                out[joint] = places.take(index, axis=1)
        if level.before is not None:
            index = up(level.before, index, True)


def _outward(eqs: Equations, place: Array) -> Array:
    """Places ``(nodes, dim)`` in the rig's frame, from ``(dim, nodes)`` in the equations'."""
    out = np.empty(place.shape[::-1])
    np.multiply(place.T, eqs.scale, out=out)
    if eqs.origin.any():
        out += eqs.origin
    return out


def _levels(eqs: Equations, pick: Sorted) -> Iterator[Level]:
    """From the level placed last down to the first."""
    joints, places = pick.rows.group.joints, pick.rows.places
    if not isinstance(places, Tree):
        together = np.empty((len(joints), len(pick.rows.alive), eqs.dim))
        for k, place in enumerate(places):
            together[k] = place[:, :, 0].T
        together *= eqs.scale
        together += eqs.origin
        yield Level([(np.array(joints, dtype=np.intp), together)], None)
        return
    own = [p[:, :, 0] for p in places.nodes]
    for level in range(places.last, -1, -1):
        mine = [k for k, settled in enumerate(places.levels) if settled == level]
        yield Level([(joints[k], _outward(eqs, own[k])) for k in mine],
                    places.maps[level - 1] if level else None)
