"""The rest pose written back into a rig file as the joints' `at`s, with all else untouched.

Only joints that rest has moved are rewritten, so expressions and comments of the others stay.
"""

from __future__ import annotations

import json
from collections.abc import Iterator, MutableMapping
from pathlib import Path

import numpy as np
import tomlkit
from tomlkit.items import InlineTable

from rigpose.files.disk import read_text
from rigpose.ground.errors import BadInput, Problem
from rigpose.model.equations import Array
from rigpose.model.rig import Rig
from rigpose.solve.rest import Rest

Table = MutableMapping[str, object]


def settle_text(path: Path, rig: Rig, rest: Rest) -> str:
    """The text of rig file ``path`` with the places of ``rest`` as `at`s, rig's unit.

    ``rig`` is what `load_rig` made of the file. A key `rest` (places from a CSV file) is taken
    out, as the places now stand in the file. Lengths that are measured from `at` stay what they
    were to rounding, redundant ones within `slack`. Raises BadInput where the rig doesn't
    assemble, and where a joint that moves belongs to a copy, which has its places elsewhere.
    """
    if not rest.assembles:
        raise BadInput(Problem(
            str(path), rest.worst, "only a rig that assembles can be settled",
            f"a misfit of {rest.misfit:.3g} of the size", "mend its lengths first (see check)"))
    text = read_text(path)
    places = _moved(rig, rest)
    if path.suffix.lower() == ".json":
        data = json.loads(text)
        _write(data, path, rig, places)
        return json.dumps(data, indent=2, ensure_ascii=False) + "\n"
    document = tomlkit.parse(text)
    _write(document, path, rig, places)
    return tomlkit.dumps(document)


def _moved(rig: Rig, rest: Rest) -> dict[str, list[float]]:
    """New places of the joints that rest moves by more than rounding."""
    x: Array = rest.equations.outward(rest.scaled)
    least = 1e-12 * rest.size + 4 * np.spacing(np.abs(x).max(initial=0.0))
    return {j.name: [float(v) for v in place] for j, place in zip(rig.joints, x, strict=True)
            if j.at is None or np.linalg.norm(place - np.array(j.at)) > least}


def _write(data: Table, path: Path, rig: Rig, places: dict[str, list[float]]) -> None:
    joints = data.get("joints")
    table: Table = joints if isinstance(joints, MutableMapping) else {}
    if "rest" in data:
        del data["rest"]
        places = {j.name: list(j.at) for j in rig.joints if j.at and j.name in table} | places
    problems = list(_elsewhere(path, table, places))
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
