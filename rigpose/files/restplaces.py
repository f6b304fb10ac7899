"""`rest = "locators.csv"`: joints' places from a CSV file, in the rig's own frame."""

from __future__ import annotations

from collections.abc import Mapping
from fractions import Fraction
from pathlib import Path

import numpy as np

from rigpose.files.locators import Locators, read_locators
from rigpose.files.scene import from_scene, outlet
from rigpose.ground.errors import BadInput
from rigpose.model.bench import Bench
from rigpose.model.head import Head
from rigpose.model.rig import Coordinates, Rig

Places = Mapping[str, Coordinates]


def rest_places(bench: Bench, head: Head, document: Mapping[str, object], file: Path | None,
                name: str) -> Places:
    """Places by joint, of those joints that the CSV file holds by their own or the studio's name.

    ``file`` is None where it was refused already. A joint that has no `at` and no row either is
    noted. Rows that no joint asks for are passed over: an export holds more than one rig.
    """
    table = document.get("joints")
    joints = table if isinstance(table, dict) else {}
    found = _read(bench, head, file, name)
    if found is None:
        for joint in joints:
            bench.lose("joint", joint)
        return {}
    return _into_rig(head, _chosen(bench, name, joints, found, document.get("names")), found.dim)


def _read(bench: Bench, head: Head, file: Path | None, name: str) -> Locators | None:
    try:
        found = None if file is None else read_locators(file, name)
    except BadInput as bad:
        bench.notes.take(bad.problems)
        return None
    if found is not None and head.dim == 3 and found.dim == 2:
        bench.notes.add(("rest",), "the places of a rig in space need a column z",
                        f"columns x and y only in {name}", "export z too")
        return None
    return found


def _chosen(bench: Bench, name: str, joints: Mapping[str, object], found: Locators,
            names: object) -> Places:
    studio = names if isinstance(names, dict) else {}
    chosen: dict[str, Coordinates] = {}
    for joint, raw in joints.items():
        place = found.places.get(joint) or found.places.get(str(studio.get(joint)))
        if place is not None:
            chosen[joint] = place
        elif not isinstance(raw, list) and not (isinstance(raw, dict) and "at" in raw):
            bench.notes.unknown(("joints", joint), f"row in {name}", joint, list(found.places))
            bench.lose("joint", joint)
    return chosen


def _into_rig(head: Head, chosen: Places, dim: int) -> Places:
    """From the file's unit and up axis into the rig's; x and y alone are the rig's own plane."""
    if not chosen or head.rest is None:
        return {}
    frame = Rig(name=head.name, dim=head.dim, joints=(), unit=head.unit, up=head.up,
                plane=head.plane)
    way = outlet(frame, Fraction(1), unit=head.rest.unit, up=head.rest.up)
    points = np.array(list(chosen.values()))
    if dim == 3:
        points, _ = from_scene(frame, way.revert(points))
    elif way.ratio != 1:
        points = points * float(1 / way.ratio)
    return {joint: tuple(map(float, p)) for joint, p in zip(chosen, points, strict=True)}
