"""Solutions of a block that are no pose apart from its neighbours, but points of a curve of them.

Where the rows lose their rank a block either moves freely or stands at a dead centre. A step along
what the rows leave open, solved again, tells: on a curve it ends as far away, at a dead centre it
comes back or ends nowhere.
"""

from __future__ import annotations

from collections.abc import Callable

import numpy as np
from numpy.typing import NDArray

from rigpose.model.equations import Array, Ints
from rigpose.solve.descent import null_vectors
from rigpose.solve.ownrows import OwnRows

STEP = 1e-3
"""Of the reach: far enough from a dead centre, near enough to stay on a curve."""

Settle = Callable[[Array, Ints], tuple[Array, NDArray[np.bool_]]]
"""Brings poses ``(N, k, dim)`` of some numbers ``(N,)`` onto the rows; tells which it could."""


def free_poses(own: OwnRows, x: Array, values: Array, goal: Array, reach: float,
               settle: Settle) -> dict[int, int]:
    """Which of some solutions ``(N, k, dim)`` move freely, and the joint that moves most there
    (its place among the block's joints)."""
    _, a = own.both(x, values, goal, own.agreed)
    pose, along = null_vectors(a)
    if not len(pose):
        return {}
    dim = x.shape[2]
    each = np.linalg.norm(along.reshape(len(along), -1, dim), axis=2)
    step = along * (STEP * reach / each.max(axis=1, keepdims=True))
    most = (each > 0.5 * each.max(axis=1, keepdims=True)).argmax(axis=1)
    found: dict[int, int] = {}
    # A curve that ends at the pose, or bends sharply there, may go on one way only.
    for way in (1, -1):
        left = np.flatnonzero(~np.isin(pose, list(found)))
        away = _ends_away(own, x, pose[left], way * step[left], values, goal, reach, settle)
        found |= dict(zip(pose[left[away]].tolist(), most[left[away]].tolist(), strict=True))
    return found


def _ends_away(own: OwnRows, x: Array, pose: Ints, step: Array, values: Array, goal: Array,
               reach: float, settle: Settle) -> Ints:
    """Which steps ``(p, w)`` from poses end about as far away, at a pose as singular."""
    if not len(pose):
        return pose
    tried = x[pose]
    tried.reshape(len(pose), -1)[:, own.columns] += step
    there, good = settle(tried, pose)
    gap = np.linalg.norm(there - x[pose], axis=2).max(axis=1)
    away = np.flatnonzero(good & (gap > 0.3 * STEP * reach) & (gap < 3 * STEP * reach))
    if not len(away):
        return away
    _, a = own.both(there[away], values[pose[away]], goal[pose[away]], own.agreed)
    return away[np.unique(null_vectors(a)[0])]
