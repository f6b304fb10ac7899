"""The rest pose written back into a rig file as the joints' `at`s, with all else untouched.

Only joints that rest has moved are rewritten, so expressions and comments of the others stay. The
helper joints of hinges, universals and sliders stand in no file: they follow from a joint and a
direction. Where rest turns the direction, or moves the joint from where a slider counts, new
places alone would make another machine.
"""

from __future__ import annotations

import json
from collections.abc import Container, Iterator, MutableMapping
from pathlib import Path

import numpy as np
import tomlkit
from tomlkit.items import InlineTable

from rigpose.files.disk import read_text
from rigpose.ground.errors import BadInput, Problem
from rigpose.model.equations import Array
from rigpose.model.names import path_text
from rigpose.model.rig import Joint, Rig
from rigpose.model.sliders import sliders_of, stands_at
from rigpose.motion.gauges import read_value
from rigpose.solve.rest import Rest

Table = MutableMapping[str, object]

TURN = 1e-9
"""A smaller turn of an axis (radians) is what drawing and rest differ by in rounding: a thousandth
of what `slack` lets lengths disagree."""


def settle_text(path: Path, rig: Rig, rest: Rest) -> str:
    """The text of rig file ``path`` with the places of ``rest`` as `at`s, rig's unit.

    ``rig`` is what `load_rig` made of the file. A key `rest` (places from a CSV file) is taken
    out, as the places now stand in the file. Lengths that are measured from `at` stay what they
    were to rounding, redundant ones within `slack`. Raises BadInput where the rig doesn't
    assemble, where a joint that moves belongs to a copy, which has its places elsewhere, and
    where an axis, or where a slider counts from, would have to change with the places.
    """
    if not rest.assembles:
        raise BadInput(Problem(
            str(path), rest.worst, "only a rig that assembles can be settled",
            f"a misfit of {rest.misfit:.3g} of the size", "mend its lengths first (see check)"))
    text = read_text(path)
    x: Array = rest.equations.outward(rest.scaled)
    least = float(1e-12 * rest.size + 4 * np.spacing(np.abs(x).max(initial=0.0)))
    told = [*_turned(path, rig, x, least), *_slid(path, rig, x, least)]
    places = _moved(rig, x, least)
    if path.suffix.lower() == ".json":
        data = json.loads(text)
        _write(data, path, rig, places, told)
        return json.dumps(data, indent=2, ensure_ascii=False) + "\n"
    document = tomlkit.parse(text)
    _write(document, path, rig, places, told)
    return tomlkit.dumps(document)


def _moved(rig: Rig, x: Array, least: float) -> dict[str, list[float]]:
    """New places of the rig's own joints that rest ``x (n, dim)`` moves by more than ``least``."""
    return {j.name: [float(v) for v in place] for j, place in zip(rig.joints, x, strict=True)
            if not j.helper and (j.at is None or np.linalg.norm(place - np.array(j.at)) > least)}


def _turned(path: Path, rig: Rig, x: Array, least: float) -> Iterator[Problem]:
    """The axes that rest turns."""
    sliders = sliders_of(rig)
    for joint in rig.joints:
        key = _axis_key(joint, sliders)
        if not key or joint.at is None:
            continue
        start = rig.index[stands_at(rig, joint.name)]
        drawn = np.subtract(joint.at, rig.joints[start].at or joint.at)
        now = x[rig.index[joint.name]] - x[start]
        long = float(np.linalg.norm(drawn))
        if long and np.linalg.norm(now - drawn) > TURN * long + 2 * least:
            yield Problem(
                str(path), key, "settling writes places, and an axis keeps its direction",
                f"a rest that turns {_direction(drawn)} to {_direction(now)}",
                "draw the parts so that it stays, or settle the rig written out flat")


def _axis_key(joint: Joint, sliders: Container[str]) -> str:
    """Where a file gives the direction that a helper joint holds; empty for all other joints."""
    name, _, number = joint.name.rpartition(" axis")
    if not joint.helper or number not in ("", " 1", " 2"):
        return ""
    if number:
        return path_text(("universals", name, "axes", int(number) - 1))
    return path_text(("sliders" if name in sliders else "hinges", name, "axis"))


def _direction(way: Array) -> str:
    """A direction of length 1, to as many digits as rounding leaves."""
    return str([round(float(v), 10) + 0.0 for v in way / np.linalg.norm(way)])


def _slid(path: Path, rig: Rig, x: Array, least: float) -> Iterator[Problem]:
    """The sliders that rest moves from where they count."""
    for name in sliders_of(rig):
        value = float(read_value(rig, x[None], name)[0])
        if abs(value) > 2 * least:
            yield Problem(
                str(path), path_text(("sliders", name)), "a slider counts from its drawing",
                f"a rest that moves it by {value:.6g} {rig.unit}",
                f"draw it there, {value:.6g} {rig.unit} on, and count all its values from there, "
                "or settle the rig written out flat")


def _write(data: Table, path: Path, rig: Rig, places: dict[str, list[float]],
           told: list[Problem]) -> None:
    joints = data.get("joints")
    table: Table = joints if isinstance(joints, MutableMapping) else {}
    if "rest" in data:
        del data["rest"]
        places = {j.name: list(j.at) for j in rig.joints if j.at and j.name in table} | places
    problems = [*told, *_elsewhere(path, table, places)]
    if problems:
        raise BadInput(problems)
    for name, place in places.items():
        _put(table, name, place)


def _elsewhere(path: Path, table: Table, places: dict[str, list[float]]) -> Iterator[Problem]:
    for name in places:
        if name not in table:
            yield Problem(
                str(path), name, "a joint of a copy has its place in the copy's own file",
                "a rest that moves it", "settle that file, or settle the rig written out flat")


def _put(table: Table, name: str, place: list[float]) -> None:
    """Set the place of one joint in whichever form the file has it."""
    old = table[name]
    if not isinstance(old, MutableMapping):
        table[name] = _kept(old, place)
    elif "at" in old or not isinstance(old, InlineTable):
        old["at"] = _kept(old.get("at"), place)
    else:
        whole = tomlkit.inline_table()
        whole.update({"at": place, **old.unwrap()})
        table[name] = whole


def _kept(old: object, place: list[float]) -> object:
    """``place`` as a list that keeps the layout of the ``old`` one where it has the same length."""
    if isinstance(old, list) and len(old) == len(place):
        for k, value in enumerate(place):
            old[k] = value
        return old
    return place
