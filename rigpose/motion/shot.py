"""A shot as plain data: which rig, which frames, and what its keys ask for."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field
from fractions import Fraction
from typing import Literal, get_args

import numpy as np
import numpy.typing as npt

from rigpose.model.rig import Rig

Ease = Literal["linear", "smooth", "hold"]
EASES: tuple[Ease, ...] = get_args(Ease)


@dataclass(frozen=True, slots=True)
class Key:
    """What is asked for at one frame.

    drive : drive name to its value (degrees for a crank, the rig's unit otherwise)
    target : joint name to (dim,) coordinates in the rig's frame, None where one is free
    ease : how each value named here goes to its own next key
    """

    frame: float
    drive: Mapping[str, float] = field(default_factory=dict)
    target: Mapping[str, tuple[float | None, ...]] = field(default_factory=dict)
    ease: Ease = "smooth"


@dataclass(frozen=True, slots=True)
class Shot:
    """A rig with keys over a range of frames. Build it with `load_shot`, which checks everything.

    frames : the first and the last frame, both in the shot
    step : the way from one frame to the next; goes evenly into the range
    branch : bends by joint, or a name from the rig's ``branches``, or None for the nearest to rest
    near : joint name to (dim,) its place at the first frame, in the rig's frame
    keys : in the order of their frames
    """

    name: str
    rig: Rig
    fps: Fraction
    frames: tuple[float, float]
    step: float = 1.0
    branch: Mapping[str, str] | str | None = None
    near: Mapping[str, tuple[float, ...]] = field(default_factory=dict)
    keys: tuple[Key, ...] = ()
    source: str = ""

    @property
    def numbers(self) -> npt.NDArray[np.float64]:
        """The frame numbers, (n_frames,), both ends included.

        >>> from rigpose.model.rig import Rig
        >>> Shot("tide", Rig("gate", 2, ()), Fraction(24), (1, 2), 0.25).numbers.tolist()
        [1.0, 1.25, 1.5, 1.75, 2.0]
        """
        first, last = self.frames
        steps = round((last - first) / self.step)
        # Multiplied before divided: frame 0.3 is then the float 0.3, not 3 times the float 0.1.
        way = (last - first) * np.arange(steps + 1, dtype=np.float64)
        return first + way / max(steps, 1)
