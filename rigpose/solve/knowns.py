"""What is given, from names and file units to numbers of the equations' frame."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from difflib import get_close_matches

import numpy as np
import numpy.typing as npt

from rigpose.ground.errors import BadInput, Problem
from rigpose.model.equations import Array, Equations
from rigpose.model.rig import Rig
from rigpose.solve.table import Inputs

AXES = "xyz"
Given = Mapping[str, npt.ArrayLike]
Wished = Mapping[str, "npt.ArrayLike | Mapping[str, npt.ArrayLike]"]


@dataclass(frozen=True)
class Knowns:
    """Known values by name, checked, in the rig's own units.

    drives : drive name to (n_frames,) degrees or lengths
    targets : joint name to (n_frames, dim), NaN where a coordinate is free
    """

    frames: int
    drives: Mapping[str, Array]
    targets: Mapping[str, Array]

    @property
    def drive_names(self) -> frozenset[str]:
        """Names of the driven values."""
        return frozenset(self.drives)

    @property
    def target_names(self) -> frozenset[tuple[str, int]]:
        """Joint and axis of every coordinate that is given."""
        return frozenset((joint, axis) for joint, place in self.targets.items()
                         for axis in range(place.shape[1]) if not np.isnan(place[0, axis]))

    def inputs(self, eqs: Equations) -> Inputs:
        """The same numbers in the equations' frame."""
        values = {eqs.value_index[name]: array * eqs.unit[eqs.value_index[name]]
                  for name, array in self.drives.items()}
        joint = eqs.rig.index
        targets = {(joint[name], axis): (self.targets[name][:, axis] - eqs.origin[axis]) / eqs.scale
                   for name, axis in self.target_names}
        return Inputs(self.frames, values, targets)

    def part(self, which: slice) -> Knowns:
        """Some of the frames."""
        drives = {k: v[which] for k, v in self.drives.items()}
        targets = {k: v[which] for k, v in self.targets.items()}
        return Knowns(len(range(*which.indices(self.frames))), drives, targets)


def read_knowns(rig: Rig, drives: Given | None, targets: Wished | None) -> Knowns:
    """Check names, shapes, numbers and ranges.

    drives : drive name to one number or (n_frames,) numbers, degrees or the rig's unit
    targets : joint name to (dim,) or (n_frames, dim), or to a table of axes: ``{"y": 2.0}``

    Raises BadInput with every problem found.
    """
    problems: list[Problem] = []
    values = {}
    for name, given in (drives or {}).items():
        array = _numbers(given, f'drive "{name}"', problems, 1)
        if name not in rig.drive_names:
            problems.append(_unknown(rig, "drive", name, rig.drive_names))
        elif array is not None and _in_range(rig, name, array, problems):
            values[name] = array
    places = {}
    for joint, wish in (targets or {}).items():
        place = _place(rig, joint, wish, problems)
        if place is not None:
            places[joint] = place
    frames = _frames(values, places, problems)
    if problems:
        raise BadInput(problems)
    return Knowns(frames, {k: np.broadcast_to(v, frames) for k, v in values.items()},
                  {k: np.broadcast_to(v, (frames, rig.dim)) for k, v in places.items()})


def _unknown(rig: Rig, kind: str, name: str, known: tuple[str, ...]) -> Problem:
    close = get_close_matches(name, known, 1)
    mend = f'is "{close[0]}" meant?' if close else (
        f"it has {', '.join(known[:8])}{', …' if len(known) > 8 else ''}" if known
        else f"the rig has no {kind}s")
    return Problem(rig.source, f'{kind} "{name}"', f"the rig has no {kind} of this name",
                   f'"{name}"', mend)


def _numbers(given: npt.ArrayLike, part: str, problems: list[Problem], ndim: int) -> Array | None:
    try:
        array = np.asarray(given, dtype=np.float64)
    except (TypeError, ValueError):
        problems.append(Problem("", part, "is a number, or one for each frame", repr(given)[:60]))
        return None
    if array.ndim > ndim or array.size == 0:
        problems.append(Problem("", part, "is a number, or one for each frame",
                                f"an array of shape {array.shape}"))
        return None
    if not np.isfinite(array).all():
        problems.append(Problem("", part, "is a finite number", "NaN or infinity"))
        return None
    return np.atleast_1d(array)


def _in_range(rig: Rig, name: str, array: Array, problems: list[Problem]) -> bool:
    ranges = {p.name: p.range for p in rig.cranks} | {p.name: p.range for p in rig.rams}
    ranges |= {p.name: p.range for p in rig.rails}
    low, high = ranges[name] or (-np.inf, np.inf)
    room = 1e-9 * max(abs(low) if np.isfinite(low) else 0, abs(high) if np.isfinite(high) else 0)
    outside = (array < low - room) | (array > high + room)
    if outside.any():
        worst = float(array[outside][np.argmax(np.maximum(low - array, array - high)[outside])])
        problems.append(Problem(rig.source, f'drive "{name}"',
                                f"stays in its range {low:g} … {high:g}", f"{worst:g}",
                                "drive it less far, or widen the range"))
        return False
    return True


def _place(rig: Rig, joint: str, wish: object, problems: list[Problem]) -> Array | None:
    """(n_frames or 1, dim), NaN where a coordinate is free."""
    part = f'target "{joint}"'
    if joint not in rig.index:
        problems.append(_unknown(rig, "joint", joint, rig.joint_names))
        return None
    if rig.joints[rig.index[joint]].pin:
        problems.append(Problem(rig.source, part, "moves a joint that is not pinned",
                                "a pinned joint", "target another joint, or unpin this one"))
        return None
    if isinstance(wish, Mapping):
        return _by_axis(rig, joint, wish, problems)
    try:
        array = np.atleast_2d(np.asarray(wish, dtype=np.float64))
    except (TypeError, ValueError):
        array = np.empty((0, 0))
    if array.ndim != 2 or array.shape[1] != rig.dim or not len(array):
        problems.append(Problem(rig.source, part, f"has {rig.dim} coordinates", repr(wish)[:60],
                                'or name the axes: {"y": 2.0}'))
        return None
    free = np.isnan(array)
    if np.isinf(array).any() or (free != free[0]).any() or free.all():
        problems.append(Problem(rig.source, part, "gives the same finite coordinates in all frames",
                                "infinity, or NaN in some frames"))
        return None
    return array


def _by_axis(rig: Rig, joint: str, wish: Mapping[str, npt.ArrayLike],
             problems: list[Problem]) -> Array | None:
    columns: dict[int, Array] = {}
    for axis, given in wish.items():
        part = f'target "{joint}.{axis}"'
        if axis not in AXES[:rig.dim] or len(axis) != 1:
            problems.append(Problem(rig.source, part, "has no such axis", f'"{axis}"',
                                    f"axes are {', '.join(AXES[:rig.dim])}"))
            continue
        array = _numbers(given, part, problems, 1)
        if array is not None:
            columns[AXES.index(axis)] = array
    if len(columns) < len(wish) or not columns:
        return None
    frames = max(len(a) for a in columns.values())
    if any(len(a) not in (1, frames) for a in columns.values()):
        problems.append(Problem(rig.source, f'target "{joint}"', "has as many numbers on each axis",
                                " and ".join(str(len(a)) for a in columns.values())))
        return None
    place = np.full((frames, rig.dim), np.nan)
    for k, array in columns.items():
        place[:, k] = array
    return place


def _frames(values: Mapping[str, Array], places: Mapping[str, Array],
            problems: list[Problem]) -> int:
    counts = {name: len(array) for name, array in (*values.items(), *places.items())}
    frames = max(counts.values(), default=1)
    wrong = {name: count for name, count in counts.items() if count not in (1, frames)}
    if wrong:
        told = ", ".join(f'"{name}" has {count}' for name, count in wrong.items())
        problems.append(Problem("", "", f"all drives and targets have one number or {frames}",
                                told, "give each one number, or one for each frame"))
    return frames
