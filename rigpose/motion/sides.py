"""Bends of many branches of one frame, from the tree that they grew in."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from functools import cached_property

import numpy as np
from numpy.typing import NDArray

from rigpose.model.bends import Bend, Signs, bends_of, joints_of, measure_bends, side_of
from rigpose.model.equations import Array, Equations, Ints
from rigpose.solve.flow import has_choice
from rigpose.solve.plan import Circle, Group, Meet, Step
from rigpose.solve.table import spread_by
from rigpose.solve.tree import Tree, taken_by, up

NODES = 1 << 13
"""Nodes whose bends are measured in one go: what is made on the way stays in the cache."""
BENT = 1e-6
"""Sines above this are well clear of what counts as straight."""


@dataclass(eq=False)
class Sides:
    """Bends of the branches of one group.

    base : places ``(dim, 1)`` of joints that hang on what is known; poses (n_branches, n_joints,
    dim) in the order of ``index (n_branches,)``, the last nodes; margin : the least of all
    """

    eqs: Equations
    group: Group
    tree: Tree
    base: Mapping[int, Array]
    poses: Array
    index: Ints
    margin: float

    @cached_property
    def bends(self) -> tuple[Bend, ...]:
        """All that the rig has."""
        return bends_of(self.eqs.rig)

    @cached_property
    def levels(self) -> list[list[tuple[int, Signs]]]:
        """For each level the bends that are settled there, with their signs at its nodes."""
        tree = self.tree
        own = {j: p[:, :, 0] for j, p in zip(self.group.joints, tree.nodes, strict=True)}
        level_of = dict(zip(own, tree.levels, strict=True))
        out: list[list[tuple[int, Signs]]] = [[] for _ in range(tree.last + 1)]
        for number, bend in enumerate(self.bends):
            joints = joints_of(self.eqs.rig, bend)
            level = max((level_of.get(j, 0) for j in joints), default=0)
            sources = {j: (own[j], tree.between(level_of[j], level)) if j in own
                       else (self.base[j], None) for j in joints}
            sign = np.empty(tree.size(level), dtype=np.int8)
            for start in range(0, len(sign), NODES):
                part = slice(start, min(start + NODES, len(sign)))
                places = {j: _part(*source, part) for j, source in sources.items()}
                sign[part] = side_of(self.eqs.rig, places, bend)
            out[level].append((number, sign))
        return out

    def all(self) -> Signs:
        """``(n_branches, n_bends)``."""
        out = np.empty((len(self.bends), len(self.index)), dtype=np.int8)
        index = self.index
        for level in range(self.tree.last, -1, -1):
            for number, sign in self.levels[level]:
                taken_by(sign, index, out[number])
            if level:
                index = up(self.tree.maps[level - 1], index)
        return out.T

    def of(self, row: int) -> Signs:
        """``(n_bends,)`` of one branch."""
        found: Signs = measure_bends(self.eqs.rig, self.poses[row:row + 1])[0]
        return found

    def told(self) -> list[int] | None:
        """The bends that tell the branches apart where every combination of them is there just
        once, else None."""
        if self._made_by_choices():
            return list(range(len(self.bends)))
        coded = self._codes()
        if coded is None:
            return None
        varies, code = coded
        if 2 ** len(varies) != len(code) or not (
                np.bincount(code, minlength=len(code)) == 1).all():
            return None
        return sorted(varies)

    def _made_by_choices(self) -> bool:
        """Whether each bend is the side on which one of the choices has put its joint, of two
        circles about the very joints that it is measured against; all choices went both ways."""
        choices = [s for s in self.group.steps if has_choice(s)]
        by_joint = {b.joint: b for b in self.bends}
        return (len(choices) == len(self.bends) == len(self.tree.maps)
                and all(isinstance(m, int) for m in self.tree.maps)
                and all(_is_choice(s, by_joint, self.margin) for s in choices))

    def _codes(self) -> tuple[list[int], NDArray[np.int64]] | None:
        """The bends that vary, and a number for each branch ``(n_branches,)`` that is made of
        these; None where some are straight."""
        varies: list[int] = []
        code = np.zeros(1, dtype=np.int64)
        for level, settled in enumerate(self.levels):
            if level and len(code) > 1:
                code = spread_by(code, self.tree.maps[level - 1], self.tree.size(level), 0)
            for number, sign in settled:
                least = int(sign.min())
                if least < -1 or not sign.all():
                    return None
                if least < int(sign.max()):
                    varies.append(number)
                    code = 2 * code + (sign > 0)
        return varies, code.take(self.index) if len(code) > 1 else np.repeat(code, len(self.index))


def _is_choice(step: Step, bends: Mapping[int, Bend], margin: float) -> bool:
    if not isinstance(step, Meet) or step.dst not in bends:
        return False
    one, two, bend = step.first, step.second, bends[step.dst]
    if not isinstance(one, Circle) or not isinstance(two, Circle) or bend.rail >= 0:
        return False
    r1, r2 = one.radius.constant, two.radius.constant
    # Seen from either centre, the sine is the other radius over the centres' distance times that
    # at which the circles cross.
    clear = min(r1, r2) > 0 and min(r1, r2) / (r1 + r2) * margin > BENT
    return clear and {one.centre, two.centre} == {bend.first, bend.second}


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
