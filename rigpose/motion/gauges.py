"""Reading values off positions: cranks, rams, rails and the angles of limits."""

from __future__ import annotations

import numpy as np

from rigpose.model.equations import Array
from rigpose.model.gauges import measure
from rigpose.model.judge import direction_of, limit_angle
from rigpose.model.rig import Crank, Limit, Rail, Ram, Rig
from rigpose.solve.rest import find_rest


def read_value(rig: Rig, positions: Array, name: str) -> Array:
    """A value over frames, (n_frames,), in degrees or the rig's unit.

    positions : (n_frames, n_joints, dim); raises KeyError for an unknown name
    """
    parts: tuple[Crank | Ram | Rail | Limit, ...] = (
        *rig.cranks, *rig.rams, *rig.rails, *rig.limits)
    for part in parts:
        if part.name == name:
            return _value(rig, positions, part)
    raise KeyError(name)


def _value(rig: Rig, positions: Array, part: Crank | Ram | Rail | Limit) -> Array:
    if isinstance(part, Crank):
        return _crank(rig, positions, part)
    if isinstance(part, Limit):
        if rig.dim == 3:
            return limit_angle(rig, positions, part)
        turn = direction_of(rig, positions, part.second) - direction_of(rig, positions, part.first)
        low = -180.0 if part.either else part.range[0]
        angle: Array = low + np.remainder(turn - low, 360.0)
        return np.abs(angle) if part.either else angle
    if isinstance(part, Ram):
        a, b = (positions[:, rig.index[j]] for j in part.ends)
        long: Array = np.linalg.norm(b - a, axis=-1)
        return long
    return _way(rig, positions, part)


def _way(rig: Rig, positions: Array, rail: Rail) -> Array:
    place = positions[:, rig.index[rail.joint]]
    if rail.along is None:
        way: Array = (place - np.array(rail.through)) @ np.array(rail.direction)
        return way
    a, b = (positions[:, rig.index[j]] for j in rail.along)
    e = b - a
    share: Array = ((place - a) * e).sum(axis=-1) / np.linalg.norm(e, axis=-1)
    return share


def _crank(rig: Rig, positions: Array, crank: Crank) -> Array:
    """Degrees that don't jump from frame to frame; the first lies in -180 … 180."""
    if rig.dim == 3:
        eqs = find_rest(rig).equations
        number = np.array([eqs.value_index[crank.name]])
        return unrolled(np.degrees(measure(eqs, eqs.inward(positions), number)[:, 0]))
    zero = crank.zero
    if isinstance(zero, str):
        k = [c.name for c in rig.cranks].index(crank.name)
        zero = float(np.degrees(find_rest(rig).equations.angles.zero[k]))
    turn = direction_of(rig, positions, crank.line) - direction_of(rig, positions, crank.base)
    return unrolled(np.remainder(turn - zero + 180.0, 360.0) - 180.0)


def unrolled(degrees: Array) -> Array:
    """Angles (n_frames,) without jumps of a turn; frames without a pose are passed over.

    >>> unrolled(np.array([170.0, np.nan, -170.0])).tolist()
    [170.0, nan, 190.0]
    """
    known = ~np.isnan(degrees)
    out = degrees.copy()
    some = degrees[known]
    turns = np.rint(np.diff(some) / 360.0)
    out[known] = some - 360.0 * np.concatenate([[0.0], np.cumsum(turns)])[:len(some)]
    return out
