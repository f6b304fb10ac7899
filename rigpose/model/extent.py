"""How large a rig is, from the numbers of its file alone."""

from __future__ import annotations

from collections.abc import Iterable, Sequence

import numpy as np
from numpy.typing import NDArray

from rigpose.model.rig import Coordinates

FEW = 500
_DIRECTIONS = 64


def extent(points: Sequence[Coordinates], lengths: Iterable[float]) -> float:
    """The largest distance between two given places, else the largest length, else 1.

    Of more than 500 places only those are compared that lie farthest out in one of 64
    directions; what is found may then fall short by up to a few parts in a thousand, which no
    tolerance can tell.

    >>> extent([(0.0, 0.0), (3.0, 4.0)], [9.0])
    5.0
    >>> extent([], [2.0, 9.0])
    9.0
    """
    largest = 0.0
    if len(points) > 1:
        far = np.array(points)
        far = _outermost(far) if len(far) > FEW else far
        largest = float(np.sqrt(((far[:, None] - far[None]) ** 2).sum(-1)).max())
    return largest or max(lengths, default=0.0) or 1.0


def _outermost(points: NDArray[np.float64]) -> NDArray[np.float64]:
    dim = points.shape[1]
    turns = np.arange(_DIRECTIONS) * (np.pi / _DIRECTIONS)
    flat = np.stack([np.cos(turns), np.sin(turns)], axis=-1)
    axes = flat if dim == 2 else _in_space(flat)
    chosen: set[int] = set()
    for start in range(0, len(axes), _DIRECTIONS):
        ways = axes[start:start + _DIRECTIONS] @ points.T
        chosen.update(ways.argmin(1).tolist(), ways.argmax(1).tolist())
    return np.asarray(points[sorted(chosen)])


def _in_space(flat: NDArray[np.float64]) -> NDArray[np.float64]:
    """The same directions in each of several planes through the z axis, and in xy itself."""
    tilts = np.arange(8) * (np.pi / 8)
    ring = np.stack([np.cos(tilts), np.sin(tilts)], axis=-1)
    upright = np.concatenate([ring[:, None] * flat[None, :, :1],
                              np.broadcast_to(flat[None, :, 1:], (8, len(flat), 1))], axis=-1)
    level = np.concatenate([flat, np.zeros((len(flat), 1))], axis=-1)
    return np.concatenate([upright.reshape(-1, 3), level])
