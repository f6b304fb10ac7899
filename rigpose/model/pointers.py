"""Axes in space, and the joints beside them by which a part's turn is seen."""

from __future__ import annotations

import math
from collections.abc import Collection

from rigpose.model.bench import Bench, joints_of
from rigpose.model.bodies import GROUND
from rigpose.model.names import KeyPath, shown
from rigpose.model.rig import Coordinates, Pair
from rigpose.model.vectors import less, off, unit

CLEAR = 1e-2
"""A joint this part of the rig's extent off an axis shows the turn well; where a part has none the
one that lies farthest off is taken."""
ON_AXIS = 1e-6
"""A joint nearer to the axis than this part of the extent lies on it."""


def hinge_axis(bench: Bench, path: KeyPath, name: str) -> Pair | None:
    """The two joints of the axis of a hinge."""
    if name in bench.hinges or bench.is_lost("hinge", name):
        return bench.hinges.get(name)
    if name in bench.parts.joints:
        bench.notes.add(path, "in space a part turns about a hinge, not about a mere joint",
                        shown(name), "name a hinge, or write axis = [joint, joint]")
    else:
        bench.notes.unknown(path, "hinge", name, bench.hinges)
    return None


def axis_of(bench: Bench, path: KeyPath, written: list[str]) -> Pair | None:
    """Two joints that stand apart, as an axis."""
    pair = bench.pair(path, written)
    if pair is None:
        return None
    a, b = (bench.parts.joints[j].at for j in pair)
    if a is not None and b is not None and math.dist(a, b) <= ON_AXIS * bench.size:
        bench.notes.add(path, "the two joints of an axis stand apart", f"both at {shown(list(a))}",
                        "name another joint, or move one of them")
        return None
    return pair


def pointer(bench: Bench, path: KeyPath, keys: tuple[str, str], part: str,
            written: list[str] | None, axis: Pair | None) -> Pair | None:
    """From the first joint of an axis to the joint of a part that shows its turn.

    ``keys`` are those that name the part and its line. Of the ground, pinned joints count.
    """
    key, line_key = keys
    own = _own_joints(bench, (*path, key), part)
    if own is None or axis is None:
        return None
    if written is not None:
        return _written(bench, (*path, line_key), part, own, written, axis)
    where = f"a turn of {shown(part)} is seen from where its joints lie beside the axis"
    ends = bench.places(path, axis, where, f"give `at` for {{}}, or `{line_key}`")
    if ends is None:
        return None
    apart = _distances(bench, own, axis, ends)
    clear = next((j for j, far in apart.items() if far >= CLEAR * bench.size), None)
    best = clear or max(apart, key=lambda j: apart[j], default=None)
    if best is None or apart[best] <= ON_AXIS * bench.size:
        _tell_none_off(bench, path, key, part, own, axis)
        return None
    return axis[0], best


def _own_joints(bench: Bench, path: KeyPath, part: str) -> Collection[str] | None:
    if part == GROUND:
        return [j.name for j in bench.parts.joints.values() if j.pin]
    body = bench.body(path, part)
    return None if body is None else joints_of(body)


def _distances(bench: Bench, own: Collection[str], axis: Pair, ends: list[Coordinates]) -> (
    dict[str, float]
):
    """How far a part's joints lie off an axis, those without `at` left out."""
    way = unit(less(ends[1], ends[0]))
    places = {j: bench.parts.joints[j].at for j in own if j not in axis}
    return {j: math.hypot(*off(at, ends[0], way)) for j, at in places.items() if at is not None}


def _tell_none_off(bench: Bench, path: KeyPath, key: str, part: str, own: Collection[str],
                   axis: Pair) -> None:
    some = ", ".join(list(own)[:6]) or "none"
    mend = "pin a joint beside the axis" if part == GROUND else (
        f"make {shown(part)} a plate with a joint beside the axis")
    kind = "pinned joints" if part == GROUND else f"joints of {shown(part)}"
    bench.notes.add((*path, key), "both parts have a joint off the axis, by which their turn is "
                    "seen", f"{kind}: {some}; axis: {axis[0]}, {axis[1]}", mend)


def _written(bench: Bench, path: KeyPath, part: str, own: Collection[str], written: list[str],
             axis: Pair) -> Pair | None:
    line = bench.pair(path, written)
    if line is None:
        return None
    if line[0] not in axis or line[1] in axis:
        bench.notes.add(path, "in space the line runs from a joint of the axis to one beside it",
                        shown(list(line)), f"the axis is {shown(list(axis))}")
        return None
    if line[1] not in own:
        some = ", ".join([j for j in own if j not in axis][:6]) or "none"
        bench.notes.add(path, f"the line must end at a joint of {shown(part)}", shown(line[1]),
                        f"beside the axis it has {some}")
        return None
    return (axis[0], line[1]) if _is_off(bench, path, line[1], axis) else None


def _is_off(bench: Bench, path: KeyPath, joint: str, axis: Pair) -> bool:
    a, b = (bench.parts.joints[j].at for j in axis)
    if a is None or b is None or _distances(bench, [joint], axis, [a, b]).get(joint, 1.0) > (
            ON_AXIS * bench.size):
        return True
    bench.notes.add(path, "the line must end beside the axis", f"{shown(joint)}, which lies on it",
                    "name another joint of the part")
    return False
