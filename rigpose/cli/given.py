"""Options that several verbs share, and reading NAME=VALUE from the command line."""

from __future__ import annotations

import re
from collections.abc import Callable, Sequence
from typing import Any, TypeVar

import click
import numpy as np

from rigpose.ground.errors import BadInput, Problem
from rigpose.model.rig import METRES, Rig
from rigpose.solve.knowns import AXES

Verb = TypeVar("Verb", bound=Callable[..., Any])

as_json = click.option("--json", "as_json", is_flag=True, help="Print JSON with stable keys.")
MOST_STEPS = 10_000_000


def frame_options(verb: Verb) -> Verb:
    """--unit, --up: the file's frame of reference."""
    verb = click.option("--up", type=click.Choice(["y", "z"]), default=None,
                        help="The axis that points up in the file (the rig's).")(verb)
    return click.option("--unit", type=click.Choice(list(METRES)), default=None,
                        help="The file's unit of length (the rig's).")(verb)


def read_drives(given: Sequence[str]) -> dict[str, np.ndarray]:
    """NAME=VALUE, or NAME=FIRST:LAST:COUNT for evenly spaced values over frames."""
    drives = {}
    for text in given:
        name, value = _halves(text, "--drive", "NAME=VALUE")
        drives[name] = _values(text, value)
    return drives


def _values(text: str, value: str) -> np.ndarray:
    parts = value.split(":")
    if len(parts) == 3 and re.fullmatch(r"\d+", parts[2]) and 0 < int(parts[2]) <= MOST_STEPS:
        return np.linspace(_number(text, parts[0]), _number(text, parts[1]), int(parts[2]))
    if len(parts) == 1:
        return np.array(_number(text, value))
    raise BadInput(Problem("--drive", text, "a drive is NAME=VALUE or NAME=FIRST:LAST:COUNT",
                           f'"{value}"'))


def read_targets(rig: Rig, given: Sequence[str]) -> dict[str, Any]:
    """JOINT=X,Y or JOINT.y=Y; several axes of one joint may come one by one."""
    targets: dict[str, Any] = {}
    for text in given:
        name, value = _halves(text, "--target", "JOINT=X,Y or JOINT.y=Y")
        numbers = [_number(text, v) for v in value.split(",")]
        joint, dot, axis = name.rpartition(".")
        if name in rig.index or not dot or axis not in AXES:
            targets[name] = numbers
        elif len(numbers) != 1:
            raise BadInput(Problem("--target", text, "one axis has one number", f'"{value}"'))
        else:
            axes = targets.setdefault(joint, {})
            if not isinstance(axes, dict):
                raise BadInput(Problem("--target", text, "a target is given once", "it twice"))
            axes[axis] = numbers[0]
    return targets


def read_bends(given: Sequence[str]) -> dict[str, str]:
    """JOINT=left."""
    return dict(_halves(text, "--bend", "JOINT=left") for text in given)


def _halves(text: str, option: str, form: str) -> tuple[str, str]:
    name, sign, value = text.partition("=")
    if not sign or not name.strip():
        raise BadInput(Problem(option, text, f"is written {form}", f'"{text}"'))
    return name.strip(), value.strip()


def _number(text: str, value: str) -> float:
    try:
        number = float(value)
    except ValueError:
        number = float("nan")
    if not np.isfinite(number):
        raise BadInput(Problem("", text, "a value is a finite number", f'"{value}"'))
    return number
