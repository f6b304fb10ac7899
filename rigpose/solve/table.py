"""Where a running plan keeps its points: arrays over branches and frames, grown by choices.

Points are arrays ``(dim, n_branches, n_frames)``. An array made before a choice keeps its size
until it is read again: it is then spread over the branches that grew from it.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, field
from typing import TypeVar

import numpy as np
from numpy.typing import NDArray

from rigpose.ground.budget import Budget
from rigpose.ground.words import Found
from rigpose.model.equations import Array, Equations, Ints
from rigpose.solve.plan import Point

Number = TypeVar("Number", bound=np.generic)
SURE = 1e-11


def composed(maps: Sequence[Ints | int]) -> Ints | int:
    """One map for several after one another, the earliest first."""
    index = maps[0]
    for later in maps[1:]:
        if isinstance(later, int):
            # Of what doubled later both halves have grown from the same.
            index = index if isinstance(index, int) else np.concatenate([index, index])
        else:
            index = around(later, index) if isinstance(index, int) else index[later]
    return index


def around(index: Ints, count: int) -> Ints:
    """Numbers counted 0 … count-1 over and over."""
    return index & (count - 1) if count & (count - 1) == 0 else index % count


def spread_by(array: NDArray[Number], index: Ints | int, branches: int, axis: int) -> (
        NDArray[Number]):
    """An array of an earlier level over ``branches`` later ones."""
    if not isinstance(index, int):
        return array.take(index, axis=axis)
    return np.concatenate([array] * (branches // index), axis=axis)


@dataclass
class Inputs:
    """Known numbers in the equations' frame: values ``{number: (F,) or (B, F)}``, targets
    ``{(joint, axis): (F,)}``, and ``frames``, how many. ``base`` keeps the run of what hangs on
    them alone, for the groups of a plan to share."""

    frames: int
    values: dict[int, Array]
    targets: dict[tuple[int, int], Array]
    base: Table | None = None

    def part(self, which: slice | NDArray[np.intp]) -> Inputs:
        """Some of the frames."""
        values = {k: v[..., which] for k, v in self.values.items()}
        targets = {k: v[..., which] for k, v in self.targets.items()}
        frames = len(range(*which.indices(self.frames))) if isinstance(which, slice) else len(which)
        return Inputs(frames, values, targets)


@dataclass
class Table:
    """State of one run.

    ``maps`` tell for each level but the last from which branch each of the next has grown; a
    number n tells that all of n branches have doubled: 0 … n-1 and again.
    ``codes`` are the signs of every choice with the level at which it was made. ``turning`` holds
    joints, with the parts behind them, that turn freely in some cells: two equal circles about one
    point are free motion, and no pose is listed there.
    """

    eqs: Equations
    inputs: Inputs
    careful: bool
    slack: float
    reach: float
    rounding: float
    points: dict[Point, Array] = field(default_factory=dict)
    values: dict[int, Array] = field(default_factory=dict)
    level_of: dict[Point | tuple[str, int], int] = field(default_factory=dict)
    made: dict[Point, tuple[Array, int]] = field(default_factory=dict)
    bounds: dict[Point, Array | float] = field(default_factory=dict)
    bound_level: dict[Point, int] = field(default_factory=dict)
    maps: list[Ints | int] = field(default_factory=list)
    branches: int = 1
    alive: NDArray[np.bool_] | None = None
    margin: Array | None = None
    codes: list[tuple[NDArray[np.int16], int]] = field(default_factory=list)
    sines: list[Array] = field(default_factory=list)
    sine_bounds: list[Array | float] = field(default_factory=list)
    flagged: NDArray[np.bool_] | None = None
    killer: NDArray[np.int32] | None = None
    close: float = 1e-6
    hints: dict[int, Array] = field(default_factory=dict)
    consecutive: bool = False
    guess: Array | None = None
    found: Found = Found.COMPLETE
    heights_wanted: bool = True
    turning: set[tuple[int, tuple[str, ...]]] = field(default_factory=set)
    budget: Budget = field(default_factory=Budget)

    @property
    def sure(self) -> float:
        """The most that an error bound may say of what touches or coincides: along a chain bounds
        grow by one over every margin, as rounding itself hardly ever does."""
        return max(SURE * self.reach, 64.0 * self.rounding)

    @property
    def level(self) -> int:
        """How many times the branches have been renumbered."""
        return len(self.maps)

    def spread(self, array: NDArray[Number], level: int, axis: int) -> NDArray[Number]:
        """An array of an earlier level over today's branches."""
        if array.shape[axis] == 1 or level == self.level:
            return array
        return spread_by(array, composed(self.maps[level:]), self.branches, axis)

    def point(self, p: Point) -> Array:
        """A point over today's branches (or with a branch axis of one)."""
        array = self.points[p]
        if array.shape[1] != 1 and self.level_of[p] != self.level:
            # Some frames of reference are read often: keep what was spread.
            array = self.spread(array, self.level_of[p], 1)
            self.points[p] = array
        self.level_of[p] = self.level
        return array

    def put(self, p: Point, array: Array, bound: Array | float = 0.0) -> None:
        """Store a point made at today's level."""
        self.points[p] = array
        self.level_of[p] = self.level
        if self.inputs.frames == 1:
            self.made[p] = array, self.level
        if self.careful:
            self.bounds[p] = bound
            self.bound_level[p] = self.level

    def bound(self, p: Point) -> Array | float:
        """The error bound of a point."""
        b = self.bounds.get(p, 0.0)
        if isinstance(b, np.ndarray) and b.ndim == 2 and b.shape[0] != 1:
            return self.spread(b, self.bound_level[p], 0)
        return b

    def value(self, number: int) -> Array:
        """A value ``(B or 1, F)``."""
        if number in self.values:
            return self.spread(self.values[number], self.level_of["v", number], 0)
        array = self.inputs.values[number]
        return array if array.ndim == 2 else array[None]

    def put_value(self, number: int, array: Array) -> None:
        """Store a value made at today's level."""
        self.values[number] = array
        self.level_of["v", number] = self.level

    def renumber(self, index: Ints | int) -> None:
        """Branches are now ``index`` of the earlier ones; kept tables follow at once. A number
        tells that all of so many have doubled."""
        self.branches = 2 * index if isinstance(index, int) else len(index)
        self.maps.append(index)

        def grown(array: NDArray[Number]) -> NDArray[Number]:
            return array if len(array) == 1 else spread_by(array, index, self.branches, 0)

        if self.alive is not None:
            self.alive = grown(self.alive)
        if self.margin is not None:
            self.margin = grown(self.margin)
        if self.killer is not None:
            self.killer = grown(self.killer)
        self.sines = [grown(s) for s in self.sines]

    def kill(self, ok: NDArray[np.bool_], step: int) -> None:
        """Cells that are not ``ok`` die at ``step``."""
        if self.killer is not None:
            dead = ~ok if self.alive is None else self.alive & ~ok
            self.killer = np.where(dead, np.int32(step), self.killer)
        self.alive = ok if self.alive is None else self.alive & ok

    def narrow(self, margin: Array) -> None:
        """The pose's margin is its blocks' least."""
        self.margin = margin if self.margin is None else np.minimum(self.margin, margin)
