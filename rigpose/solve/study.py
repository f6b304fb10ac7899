"""A rig at rest, its pieces and their motions: worked out once, on demand, for all of `check`."""

from __future__ import annotations

from dataclasses import dataclass
from functools import cached_property

import numpy as np

from rigpose.model.system import System
from rigpose.solve.mobility import Motions, motions
from rigpose.solve.moving import Mover, movers
from rigpose.solve.pieces import Cut, Piece, cut
from rigpose.solve.rest import Rest
from rigpose.solve.sparse import large_motions
from rigpose.solve.structure import Order, groups_of, order_of

DENSE = 600
"""Unknowns of one piece up to which its motions are tried by steps."""


@dataclass(frozen=True)
class Study:
    """A rig at rest, looked at piece by piece."""

    rest: Rest

    @cached_property
    def system(self) -> System:
        """All rows that hold while nothing is driven."""
        return System(self.rest.equations)

    @cached_property
    def cut(self) -> Cut:
        """The pieces at rest."""
        return cut(self.system, self.rest.scaled)

    @cached_property
    def zero(self) -> float:
        """Below this a singular value counts as zero; more where the rig doesn't assemble."""
        zero = self.rest.tolerances.zero
        return zero if self.rest.assembles else max(zero, 10 * self.rest.misfit)

    @cached_property
    def motions(self) -> tuple[Motions, ...]:
        """What each piece can do."""
        return tuple(self._motions(p) for p in self.cut.pieces)

    @cached_property
    def groups(self) -> tuple[Mover, ...]:
        """All groups that move, in the joints' order."""
        few = (g for m in self.motions if len(m.piece.columns) <= DENSE for g in movers(m))
        return tuple(sorted((*few, *self._large), key=lambda g: int(g.joints[0])))

    @cached_property
    def order(self) -> Order:
        """The order in which all joints are placed with nothing known; for large pieces."""
        return order_of(self.rest)

    @property
    def _large(self) -> list[Mover]:
        """The groups of large pieces that move; their motions themselves are not worked out."""
        large = [m for m in self.motions if len(m.piece.columns) > DENSE and m.finite]
        if not large:
            return []
        mine = np.zeros(self.rest.equations.n, dtype=bool)
        mine[np.concatenate([m.piece.joints for m in large])] = True
        none = np.zeros((0, 0))
        return [Mover(np.array(joints), sum(s.free for s in starts), self.rest.scaled, none)
                for joints, starts in groups_of(self.order) if mine[joints[0]]]

    def _motions(self, piece: Piece) -> Motions:
        if len(piece.columns) <= DENSE:
            return motions(piece, self.rest.scaled, self.zero, self.rest.reach)
        return large_motions(piece, self.rest.scaled, self.order)
