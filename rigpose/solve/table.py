"""Where a running plan keeps its points: arrays over branches and frames, grown by choices.

Points are arrays ``(dim, n_branches, n_frames)``. An array made before a choice keeps its size
until it is read again: it is then spread over the branches that grew from it.
"""

from __future__ import annotations

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
    maps: list[Ints] = field(default_factory=list)
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
        index = self.maps[level]
        for later in self.maps[level + 1:]:
            index = index[later]
        return array.take(index, axis=axis)

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

    def renumber(self, index: Ints) -> None:
        """Branches are now ``index`` of the earlier ones; kept tables follow at once."""
        self.maps.append(index)
        self.branches = len(index)
        if self.alive is not None and self.alive.shape[0] != 1:
            self.alive = self.alive[index]
        if self.margin is not None and self.margin.shape[0] != 1:
            self.margin = self.margin[index]
        if self.killer is not None and self.killer.shape[0] != 1:
            self.killer = self.killer[index]
        self.sines = [s[index] if len(s) != 1 else s for s in self.sines]

    def kill(self, ok: NDArray[np.bool_], step: int) -> None:
        """Cells that are not ``ok`` die at ``step``."""
        if self.killer is not None:
            dead = ~ok if self.alive is None else self.alive & ~ok
            self.killer = np.where(dead, np.int32(step), self.killer)
        self.alive = ok if self.alive is None else self.alive & ok

    def narrow(self, margin: Array) -> None:
        """The pose's margin is its blocks' least."""
        self.margin = margin if self.margin is None else np.minimum(self.margin, margin)
