"""Branches of one frame as the tree that they grew in: a joint has one place a node.

Of 2^18 branches the first crossing has two places and the tenth a thousand: what is measured node
by node costs as much as the last two crossings alone.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass, field
from typing import TypeVar, overload

import numpy as np
from numpy.typing import NDArray

from rigpose.model.equations import Array, Ints
from rigpose.solve.table import Table, around, composed, spread_by

Number = TypeVar("Number", bound=np.generic)


@dataclass(frozen=True, eq=False)
class Tree(Sequence[Array]):
    """Places of some joints; as a sequence, those of each joint spread over the branches.

    nodes : per joint ``(dim, nodes of its level or 1, 1)``; levels : the level of each
    maps : for each level but the last ``(nodes of the next,)`` the node that each grew from, or
    how many nodes it has where all of them doubled
    signs : of every choice ``(nodes,)``, with its level; branches : nodes of the last level
    """

    nodes: list[Array]
    levels: list[int]
    maps: list[Ints | int]
    signs: list[tuple[NDArray[np.int16], int]]
    branches: int
    _wide: dict[int, Array] = field(default_factory=dict)

    @property
    def last(self) -> int:
        """The branches' own level."""
        return len(self.maps)

    def size(self, level: int) -> int:
        """How many nodes a level has."""
        return grown(self.maps[level - 1]) if level else 1

    def __len__(self) -> int:
        return len(self.nodes)

    @overload
    def __getitem__(self, k: int) -> Array: ...
    @overload
    def __getitem__(self, k: slice) -> list[Array]: ...
    def __getitem__(self, k: int | slice) -> Array | list[Array]:
        if isinstance(k, slice):
            return [self[i] for i in range(*k.indices(len(self)))]
        if k not in self._wide:
            self._wide[k] = self.spread(self.nodes[k], self.levels[k], self.last, 1)
        return self._wide[k]

    def between(self, low: int, high: int) -> Ints | int | None:
        """For each node of the level ``high`` the one of ``low`` that it grew from; a number n for
        0 … n-1 over and over."""
        return composed(self.maps[low:high]) if low < high else None

    def spread(self, array: NDArray[Number], low: int, high: int, axis: int) -> NDArray[Number]:
        """An array over the nodes of one level, over those of a later one."""
        index = None if array.shape[axis] == 1 else self.between(low, high)
        return array if index is None else spread_by(array, index, self.size(high), axis)

    def codes(self) -> NDArray[np.int16]:
        """The signs of every choice ``(branches, choices)``."""
        out = np.empty((len(self.signs), self.branches), dtype=np.int16)
        index = np.arange(self.branches)
        for level in range(self.last, -1, -1):
            for k, (sign, mine) in enumerate(self.signs):
                if mine == level:
                    out[k] = sign.take(index)
            if level:
                index = up(self.maps[level - 1], index)
        return out.T

    def total(self, each: Callable[[int, Array], Array]) -> Array:
        """Sums over the joints ``(branches,)``: ``each`` gives those of one joint from its number
        in the sequence and its places ``(dim, nodes)``."""
        out = np.zeros(1)
        for level in range(self.last + 1):
            if level and len(out) > 1:
                out = spread_by(out, self.maps[level - 1], self.size(level), 0)
            for k, mine in enumerate(self.levels):
                if mine == level:
                    out = out + each(k, self.nodes[k][:, :, 0])
        return np.broadcast_to(out, (self.branches,))


def grown(before: Ints | int) -> int:
    """How many nodes have grown."""
    return 2 * before if isinstance(before, int) else len(before)


def up(before: Ints | int, index: Ints, owned: bool = False) -> Ints:
    """From nodes of a level to those that they grew from; in place where ``owned`` and possible."""
    if not isinstance(before, int):
        return before.take(index)
    if owned and before & (before - 1) == 0:
        index &= before - 1
        return index
    return around(index, before)


def taken_by(values: NDArray[np.generic], index: Ints, out: NDArray[np.generic]) -> None:
    """Values of nodes ``(nodes, ...)``, or one of all, in the order of an index."""
    if len(values) == 1:
        out[:] = values[0]
    else:
        np.take(values, index, axis=0, out=out, mode="clip")


def tree_of(table: Table, joints: Sequence[int]) -> Tree:
    """The tree that a table of one frame has grown."""
    made = [table.made[j] for j in joints]
    return Tree([array for array, _ in made], [level for _, level in made],
                list(table.maps), list(table.codes), table.branches)
