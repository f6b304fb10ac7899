"""What is known at whole frames and between them, in the equations' frame."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass, field

import numpy as np

from rigpose.model.equations import Array, Equations, Ints
from rigpose.solve.knowns import Knowns
from rigpose.solve.table import Inputs


@dataclass(frozen=True)
class Clock:
    """Known values along a motion. Times count frames from 0, whatever the frames' numbers are.

    count : n_frames; ``between`` gives the knowns at any times ``(m,)``.
    """

    eqs: Equations
    count: int
    knowns: Knowns
    between: Callable[[Array], Knowns]
    _kept: dict[tuple[int, int], Inputs] = field(default_factory=dict, compare=False)

    def whole(self, which: slice) -> Inputs:
        """At some of the frames; the same value each time, for the groups to share."""
        start, stop, _ = which.indices(self.count)
        if (start, stop) not in self._kept:
            self._kept[start, stop] = self.knowns.part(which).inputs(self.eqs)
        return self._kept[start, stop]

    def at(self, times: Array) -> Inputs:
        """At any times ``(m,)``."""
        return self.between(times).inputs(self.eqs)


def part_of_clock(clock: Clock, low: int, high: int) -> Clock:
    """Frames ``low`` … ``high`` (not included) as a clock of their own."""
    return Clock(clock.eqs, high - low, clock.knowns.part(slice(low, high)),
                 lambda times: clock.between(times + low))


def sampled(eqs: Equations, knowns: Knowns) -> Clock:
    """A clock for values that are only known at frames: cubics through four of them between."""

    def between(times: Array) -> Knowns:
        low, weights = _cubic(times, knowns.frames)
        drives = {k: _mixed(v, low, weights) for k, v in knowns.drives.items()}
        targets = {k: _mixed(v, low, weights) for k, v in knowns.targets.items()}
        return Knowns(len(times), drives, targets)

    return Clock(eqs, knowns.frames, knowns, between)


def _cubic(times: Array, frames: int) -> tuple[Ints, Array]:
    """First of four samples ``(m,)`` and Lagrange's weights ``(m, 4)``, fewer for short motions."""
    points = min(4, frames)
    low = np.clip(np.floor(times).astype(np.intp) - 1, 0, max(frames - points, 0))
    u = (times - low)[:, None]
    weights = np.ones((len(times), points))
    for k in range(points):
        for other in range(points):
            if other != k:
                weights[:, k] *= (u[:, 0] - other) / (k - other)
    return low, weights


def _mixed(samples: Array, low: Ints, weights: Array) -> Array:
    take = samples[low[:, None] + np.arange(weights.shape[1])]
    mixed: Array = np.einsum("mk,mk...->m...", weights, take)
    return mixed
