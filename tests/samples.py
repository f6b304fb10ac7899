"""One pose's drives and targets of a rig, with its branches: what contracts are tried on."""

from __future__ import annotations

from collections.abc import Mapping

import numpy as np
from numpy.typing import NDArray

import rigpose as rp

Array = NDArray[np.float64]
MOST = rp.Budget(poses=512)


class Sample:
    """A rig with the drives and targets of one pose, and its branches."""

    def __init__(self, rig: rp.Rig, drives: Mapping[str, Array],
                 targets: Mapping[str, Array]) -> None:
        self.rig, self.drives, self.targets = rig, drives, targets
        self.found = rp.find_branches(rig, drives, targets, budget=MOST)

    @property
    def poses(self) -> Array:
        """``(n_branches, n_joints, dim)``."""
        return self.found.positions[:, 0]

    @property
    def room(self) -> float:
        """How far a place may be off when the numbers were rounded once: more near dead centres."""
        margin = float(self.found.margin.min(initial=1.0))
        return self.found.size * (1e-12 / margin if margin > 1e-6 else 1e-5)
