"""The rows of a block as those of a small rig, without the calls that bring nothing."""

from __future__ import annotations

from collections.abc import Iterator
from functools import cached_property

import numpy as np

from rigpose.model.equations import GROUND, Array, Ints
from rigpose.model.spacerows import (
    by_frame_rows,
    fixed_line_rows,
    moving_line_rows,
    on_line_rows,
    plane_rows,
)
from rigpose.model.system import Family, System


class BlockSystem(System):
    """A system of few rows: kinds of which it has none are left out, since with so few rows the
    calls themselves are what takes the time."""

    @cached_property
    def _lines_on(self) -> tuple[Ints, Ints]:
        """Lines that are fixed, and lines that are carried."""
        fixed = self.eqs.lines.along[:, 0] == GROUND
        return np.flatnonzero(fixed), np.flatnonzero(~fixed)

    def families(self, x: Array, values: Array, goal: Array | None) -> Iterator[Family]:
        """As those of the whole, less the empty ones."""
        if len(self.dist_rows):
            yield self._distance_rows(x, values, self.dist_rows)
        if len(self._bases[0]):
            yield self._base_rows(x)
        yield from self._space_rows(x) if self.eqs.dim == 3 else self._plane_rows(x)
        if self._known_rails:
            yield self._rail_values(x, values)
        if self._known_cranks:
            yield self._angle_rows(x, values)
        if self.targets:
            yield self._target_rows(x, goal)
        if self._open_ties:
            yield self._tie_rows(x, values)

    def _space_rows(self, x: Array) -> Iterator[Family]:
        lines, planes, (fixed, moving) = self.eqs.lines, self.eqs.planes, self._lines_on
        if len(self.space.share):
            yield on_line_rows(x, self.space)
        if len(self.space.weights):
            yield by_frame_rows(x, self.space)
        if len(fixed):
            yield fixed_line_rows(x, lines.joint[fixed], lines.through[fixed],
                                  lines.direction[fixed])
        if len(moving):
            yield moving_line_rows(x, np.column_stack([lines.along[moving], lines.joint[moving]]))
        if len(planes.joint):
            yield plane_rows(x, planes.joint, planes.through, planes.normal)
