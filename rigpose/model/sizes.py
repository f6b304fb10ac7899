"""[sizes]: named numbers that may refer to one another in any order, but never in a circle."""

from __future__ import annotations

import math
from collections.abc import Mapping

from rigpose.ground.errors import BadInput
from rigpose.model.arithmetic import names_in, read_number
from rigpose.model.names import name_fault, shown
from rigpose.model.notes import Notes

RESERVED = "rest"


def resolve_sizes(notes: Notes, raw: Mapping[str, object]) -> dict[str, float]:
    """The value of every size; NaN for one that was refused (and noted)."""
    needs = {name: _needs(notes, name, value) for name, value in raw.items()}
    values = {name: math.nan for name, need in needs.items() if need is None}
    waiting = {n: [k for k in need if k in raw] for n, need in needs.items() if need is not None}
    for name in _order(waiting, values):
        values[name] = _value(notes, name, raw[name], values)
    circular = [name for name in raw if name not in values]
    if circular:
        _tell_circle(notes, waiting, circular)
        values.update(dict.fromkeys(circular, math.nan))
    return {name: values[name] for name in raw}


def _needs(notes: Notes, name: str, value: object) -> tuple[str, ...] | None:
    path = ("sizes", name)
    if not name.isidentifier() or name == RESERVED or name_fault(name):
        rule = f"a size's name is one word of letters, digits and _, and not {RESERVED!r}"
        notes.add(path, rule, shown(name), "rename it; arithmetic could not tell it apart")
        return None
    if not isinstance(value, str):
        return ()
    try:
        return names_in(value)
    except BadInput as bad:
        notes.refused(path, bad)
        return None


def _order(waiting: Mapping[str, list[str]], done: Mapping[str, float]) -> list[str]:
    """Sizes in an order in which each comes after those it uses (Kahn 1962)."""
    left = {n: len([k for k in need if k not in done]) for n, need in waiting.items()}
    users: dict[str, list[str]] = {n: [] for n in waiting}
    for name, need in waiting.items():
        for k in need:
            if k in users:
                users[k].append(name)
    ready = [n for n, count in left.items() if count == 0]
    for name in ready:
        for user in users[name]:
            left[user] -= 1
            if left[user] == 0:
                ready.append(user)
    return ready


def _value(notes: Notes, name: str, raw: object, values: Mapping[str, float]) -> float:
    try:
        return read_number(raw, values)
    except BadInput as bad:
        notes.refused(("sizes", name), bad)
        return math.nan


def _tell_circle(notes: Notes, waiting: Mapping[str, list[str]], circular: list[str]) -> None:
    """Follow the uses from the first until one comes again; note that circle once."""
    inside = set(circular)
    walk: dict[str, None] = {}
    following = circular[0]
    while following not in walk:
        walk[following] = None
        following = next(k for k in waiting[following] if k in inside)
    steps = list(walk)
    circle = [*steps[steps.index(following):], following]
    rule = "sizes may not refer to one another in a circle"
    notes.add(("sizes", circle[0]), rule, " → ".join(circle), "give one of them a number")
