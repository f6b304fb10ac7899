"""The values that a shot's keys give to drives and targets at any frame, by channel.

A channel is one drive or one coordinate of one target. It has keys of its own: a key that doesn't
name it neither holds nor bends it. Before its first key it holds the first value, after its last
key the last one, so in a shot each channel is known everywhere or nowhere.
"""

from __future__ import annotations

from collections.abc import Callable, Iterator, Mapping
from dataclasses import dataclass

import numpy as np
import numpy.typing as npt

from rigpose.ground.errors import BadInput, Problem
from rigpose.motion.shot import EASES, Shot

Floats = npt.NDArray[np.float64]
Stops = list[tuple[float, float, int]]
"""A channel's keys: frame, value, and the ease's place in `EASES`."""


@dataclass(frozen=True, slots=True)
class Knowns:
    """What is given at each frame. All arrays are read-only.

    frames : (n_frames,) float
    drives : drive name to (n_frames,) float, degrees or the rig's unit
    targets : joint name to (n_frames, dim) float, NaN where that coordinate is free
    """

    frames: Floats
    drives: Mapping[str, Floats]
    targets: Mapping[str, Floats]


def channels(shot: Shot, frames: npt.ArrayLike) -> Knowns:
    """The shot's drives and targets at any frames, whole or not, in any order.

    frames : (n_frames,) float

    Raises BadInput for a frame that is no finite number and for an ease that doesn't exist.
    """
    at = np.array(frames, dtype=np.float64).reshape(-1)
    if not np.isfinite(at).all():
        raise BadInput(Problem("", "frames", "frames are finite numbers", "NaN or infinity"))
    drives: dict[str, Floats] = {}
    targets: dict[str, Floats] = {}
    for (kind, name, axis), stops in _gather(shot).items():
        values = _ease_along(stops, at)
        if kind == "drive":
            drives[name] = _sealed(values)
        else:
            column = targets.setdefault(name, np.full((len(at), shot.rig.dim), np.nan))
            column[:, axis] = values
    return Knowns(_sealed(at), drives, {name: _sealed(values) for name, values in targets.items()})


def smooth(u: Floats) -> Floats:
    """The 3-4-5 polynomial of cam design: 10 u^3 - 15 u^4 + 6 u^5 for u in 0 … 1.

    Chosen over the cubic 3 u^2 - 2 u^3 because its acceleration is zero at both ends too: a heavy
    boom that starts with a step in acceleration looks like a jolt on film. The price is a quicker
    middle, 1.875 times the mean speed where the cubic has 1.5. It never leaves 0 … 1.

    >>> smooth(np.array([0.0, 0.5, 1.0])).tolist()
    [0.0, 0.5, 1.0]
    """
    return u * u * u * (10.0 + u * (6.0 * u - 15.0))


_SHAPES: tuple[Callable[[Floats], Floats], ...] = (lambda u: u, smooth, np.zeros_like)
"""From the share of the way in time to the share of the way in value, in the order of `EASES`."""


def _gather(shot: Shot) -> dict[tuple[str, str, int], Stops]:
    found: dict[tuple[str, str, int], Stops] = {}
    for where, value, frame, ease in _told(shot):
        found.setdefault(where, []).append((frame, value, ease))
    for stops in found.values():
        stops.sort()
    return found


def _told(shot: Shot) -> Iterator[tuple[tuple[str, str, int], float, float, int]]:
    for key in shot.keys:
        if key.ease not in EASES:
            raise BadInput(Problem(shot.source, f"key at frame {key.frame:g}",
                                   f'ease is one of {", ".join(EASES)}', f'"{key.ease}"'))
        ease = EASES.index(key.ease)
        for name, value in key.drive.items():
            yield ("drive", name, 0), value, key.frame, ease
        for name, place in key.target.items():
            for axis, value_or_free in enumerate(place):
                if value_or_free is not None:
                    yield ("target", name, axis), value_or_free, key.frame, ease


def _ease_along(stops: Stops, at: Floats) -> Floats:
    """One channel's values, (n_frames,)."""
    when, value, ease = np.array(stops, dtype=np.float64).T
    before = np.clip(np.searchsorted(when, at, side="right") - 1, 0, len(when) - 1)
    after = np.minimum(before + 1, len(when) - 1)
    span = when[after] - when[before]
    u = np.clip((at - when[before]) / np.where(span > 0.0, span, 1.0), 0.0, 1.0)
    share = np.empty_like(u)
    for kind, shape in enumerate(_SHAPES):
        chosen = ease[before] == kind
        share[chosen] = shape(u[chosen])
    low, high = value[before], value[after]
    # The clip takes away the last rounding, so that no value passes its own keys.
    eased = low + (high - low) * share
    held: Floats = np.clip(eased, np.minimum(low, high), np.maximum(low, high))
    return held


def _sealed(values: Floats) -> Floats:
    values.flags.writeable = False
    return values
