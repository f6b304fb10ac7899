"""Frames of reference at the door: the one place where numbers change their frame.

Three frames, named everywhere: *rig* (the rig file's own numbers), *scene* (the rig standing on
its ``plane``, still in the rig's unit, up axis and rate), *file* (the scene in a file's unit, up
axis, rate and offset). Where nothing changes the numbers come through with the same bits.
"""

from __future__ import annotations

from dataclasses import dataclass
from fractions import Fraction

import numpy as np
import numpy.typing as npt

from rigpose.ground.errors import BadInput, Problem
from rigpose.model.rig import METRES, Rig, Stand

Floats = npt.NDArray[np.float64]

_EXACT_METRES = {unit: Fraction(str(metres)) for unit, metres in METRES.items()}


def to_scene(rig: Rig, positions: Floats) -> Floats:
    """Rig to scene: (..., dim) to (..., 3), in the rig's unit.

    A rig in space stands as it is; a plane one is put on ``rig.plane`` (by default z = 0).
    """
    if rig.dim == 3:
        return positions
    if rig.plane == Stand():
        flat = np.zeros((*positions.shape[:-1], 3))
        flat[..., :2] = positions
        # A pose that doesn't exist has no third coordinate either.
        flat[..., 2][np.isnan(positions).any(axis=-1)] = np.nan
        return flat
    origin, axes = _stand(rig.plane)
    stood: Floats = origin + positions[..., :1] * axes[0] + positions[..., 1:] * axes[1]
    return stood


def from_scene(rig: Rig, places: Floats) -> tuple[Floats, float]:
    """Scene to rig: (..., 3) to (..., dim), and how far the farthest was from the rig's plane.

    Places off the plane are dropped onto it at a right angle. The distance is in the rig's unit,
    0 for a rig in space and where there are no places.
    """
    if rig.dim == 3:
        return places, 0.0
    origin, axes = _stand(rig.plane)
    if rig.plane == Stand():
        flat, off = places[..., :2].copy(), np.abs(places[..., 2])
    else:
        way = places - origin
        flat, off = way @ axes.T, np.abs(way @ np.cross(axes[0], axes[1]))
    known = off[~np.isnan(off)]
    return flat, float(known.max(initial=0.0))


def _stand(stand: Stand) -> tuple[Floats, Floats]:
    """The origin (3,) and the two axes (2, 3)."""
    return np.array(stand.origin), np.array([stand.x, stand.y])


@dataclass(frozen=True, slots=True)
class Frame:
    """What a set of numbers is written in.

    unit : a name from the table of units
    up : the axis that points up, "y" or "z"
    fps : frames a second
    offset : added to every frame number
    """

    unit: str = "m"
    up: str = "y"
    fps: Fraction = Fraction(24)
    offset: Fraction = Fraction(0)

    def __post_init__(self) -> None:
        problems = []
        if self.unit not in METRES:
            problems.append(Problem("", "unit", f'a unit is one of {", ".join(METRES)}',
                                    f'"{self.unit}"'))
        if self.up not in ("y", "z"):
            problems.append(Problem("", "up", "up is y or z", f'"{self.up}"'))
        if self.fps <= 0:
            problems.append(Problem("", "fps", "a rate is more than 0", str(self.fps)))
        if problems:
            raise BadInput(problems)

    def __str__(self) -> str:
        text = f"{self.fps} a second, {self.unit}, {self.up} up"
        return f"{text}, frames {float(self.offset):+g}" if self.offset else text


@dataclass(frozen=True, slots=True)
class Outlet:
    """The way from scene to file, and back.

    scene, file : the frames of reference on both sides
    """

    scene: Frame
    file: Frame

    def convert(self, places: Floats) -> Floats:
        """Scene to file: (..., 3) to (..., 3)."""
        return _turned(_scaled(places, self.ratio), self.scene.up, self.file.up)

    def revert(self, places: Floats) -> Floats:
        """File to scene: (..., 3) to (..., 3)."""
        return _scaled(_turned(places, self.file.up, self.scene.up), 1 / self.ratio)

    def lengths(self, values: Floats) -> Floats:
        """Scene to file for lengths of any shape; angles need nothing."""
        return _scaled(values, self.ratio)

    def number(self, frames: Floats) -> Floats:
        """Frame numbers, scene to file: the same instant at the file's rate, then the offset."""
        if self.scene.fps == self.file.fps and self.scene.offset == self.file.offset:
            return frames
        start, offset = self.scene.offset, self.file.offset
        return _shift(_scaled(_shift(frames, -start), self.file.fps / self.scene.fps), offset)

    def unnumber(self, frames: Floats) -> Floats:
        """Frame numbers, file to scene."""
        return Outlet(self.file, self.scene).number(frames)

    @property
    def ratio(self) -> Fraction:
        """One unit of the scene in units of the file, exactly."""
        return _EXACT_METRES[self.scene.unit] / _EXACT_METRES[self.file.unit]


def outlet(rig: Rig, fps: Fraction, *, unit: str | None = None, up: str | None = None,
           to_fps: Fraction | None = None, offset: Fraction = Fraction(0)) -> Outlet:
    """The outlet of a rig at a rate; what isn't asked for stays as the rig and the shot have it.

    Raises BadInput for an unknown unit or up axis and for a rate that isn't positive.
    """
    scene = Frame(rig.unit, rig.up, fps)
    return Outlet(scene, Frame(rig.unit if unit is None else unit, rig.up if up is None else up,
                               fps if to_fps is None else to_fps, offset))


def _scaled(values: Floats, ratio: Fraction) -> Floats:
    """Values times an exact ratio: at most two roundings, none that a decimal unit would add."""
    if ratio == 1:
        return values
    return values * float(ratio.numerator) / float(ratio.denominator)


def _shift(frames: Floats, by: Fraction) -> Floats:
    return frames + float(by) if by else frames


def _turned(places: Floats, before: str, after: str) -> Floats:
    """A quarter turn about x, so that nothing is mirrored: y up to z up is (x, -z, y)."""
    if before == after:
        return places
    turned = np.empty_like(places)
    turned[..., 0] = places[..., 0]
    # 0 - v rather than -v: a zero keeps its plain sign, and no file says -0.0.
    if before == "y":
        turned[..., 1], turned[..., 2] = 0.0 - places[..., 2], places[..., 1]
    else:
        turned[..., 1], turned[..., 2] = places[..., 2], 0.0 - places[..., 1]
    return turned
