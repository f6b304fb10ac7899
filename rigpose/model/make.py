"""A rig made in Python, with the same sections and keys as a rig file."""

from __future__ import annotations

from collections.abc import Mapping, Sequence

import numpy as np

from rigpose.ground.errors import BadInput, Problem
from rigpose.model.assemble import assemble
from rigpose.model.head import VERSION
from rigpose.model.names import KeyPath
from rigpose.model.rig import Rig

DEEPEST = 100
_ALREADY_PLAIN = (float, str, int, bool)


def make_rig(joints: Mapping[str, object], bones: Mapping[str, object] | None = None,
             **sections: object) -> Rig:
    """A checked rig from what a rig file would hold; tuples and NumPy arrays count as lists.

    ``sections`` are the file's other sections and top-level keys: ``plates``, ``rails``,
    ``dim``, ``unit``, … Lengths are in the rig's unit, angles in degrees.
    Raises BadInput with every problem found.

    >>> rig = make_rig({"a": [0, 0], "b": (3, 4)}, {"bar": ["a", "b"]})
    >>> rig.bones[0].length
    5.0
    """
    given = {"joints": joints, **({} if bones is None else {"bones": bones}), **sections}
    document = {"rigpose": VERSION, **{k: _plain(v, 0) for k, v in given.items() if v is not None}}
    return assemble(document, name="rig", where=_nowhere)


def _nowhere(_: KeyPath) -> str:
    return ""


def _plain(value: object, depth: int) -> object:
    """Only dicts, lists and plain numbers, as a file would give them."""
    if type(value) in _ALREADY_PLAIN:
        return value
    if depth > DEEPEST:
        raise BadInput(Problem("", "", f"lists and tables go at most {DEEPEST} deep", "deeper"))
    if isinstance(value, Mapping):
        return {_key(k): _plain(v, depth + 1) for k, v in value.items()}
    if isinstance(value, np.ndarray | np.generic):
        return value.tolist()
    if isinstance(value, Sequence) and not isinstance(value, str | bytes):
        return [_plain(v, depth + 1) for v in value]
    return value


def _key(key: object) -> str:
    if isinstance(key, str):
        return str(key)
    raise BadInput(Problem("", "", "names and keys are text", repr(key)[:60], "write it in quotes"))
