"""What the command line gives: options that verbs share, and values checked all at once."""

from __future__ import annotations

import re
from collections.abc import Callable, Mapping, Sequence
from fractions import Fraction
from pathlib import Path
from typing import Any, TypeVar

import click
import numpy as np

from rigpose.files.document import read_document
from rigpose.files.rigfile import load_rig
from rigpose.files.shotfile import load_shot
from rigpose.ground.errors import BadInput, Problem
from rigpose.model.rig import METRES, Rig
from rigpose.motion.naming import wanted_signs
from rigpose.motion.shot import Shot
from rigpose.solve.knowns import AXES, read_knowns

Verb = TypeVar("Verb", bound=Callable[..., Any])
Value = TypeVar("Value")

as_json = click.option("--json", "as_json", is_flag=True, help="Print JSON with stable keys.")
MOST_STEPS = 10_000_000
_RATIO = re.compile(r"[+-]?[0-9]{1,9}(\.[0-9]{1,9})?(/0*[1-9][0-9]{0,8})?")


def frame_options(verb: Verb) -> Verb:
    """--unit, --up: the file's frame of reference."""
    verb = click.option("--up", type=click.Choice(["y", "z"]), default=None,
                        help="The axis that points up in the file; else the rig's.")(verb)
    return click.option("--unit", type=click.Choice(list(METRES)), default=None,
                        help="The file's unit of length; else the rig's.")(verb)


class Gathered:
    """Problems of several readers, so that all mistakes of one call are told at once."""

    def __init__(self) -> None:
        self.problems: list[Problem] = []

    def add(self, where: str, part: str, rule: str, got: str, mend: str = "") -> None:
        """Keep one problem."""
        self.problems.append(Problem(where, part, rule, got, mend))

    def of(self, read: Callable[[], Value]) -> Value | None:
        """What a reader gives, or None after keeping what it finds wrong."""
        try:
            return read()
        except BadInput as bad:
            self.problems += bad.problems
            return None

    def stop_if_any(self) -> None:
        """Raise BadInput with all that was kept, if there is anything."""
        if self.problems:
            raise BadInput(self.problems)


def the_rig(path: str) -> Rig:
    """A rig file; one clear message where it is a shot file."""
    try:
        return load_rig(path)
    except BadInput:
        if {"rig", "frames", "keys"} & _keys(path) and "joints" not in _keys(path):
            raise BadInput(Problem(path, "", "a rig file is asked for", "a shot file",
                                   "name the rig that it poses, or use `rigpose bake`")) from None
        raise


def the_shot(path: str) -> Shot:
    """A shot file; one clear message where it is a rig file."""
    try:
        return load_shot(path)
    except BadInput:
        if "joints" in _keys(path) and not {"rig", "frames", "keys"} & _keys(path):
            raise BadInput(Problem(path, "", "a shot file is asked for", "a rig file",
                                   "name one of its shots, or use `rigpose pose`")) from None
        raise


def _keys(path: str) -> set[str]:
    try:
        return set(read_document(Path(path)).data)
    except BadInput:
        return set()


def keep_inputs(read: Mapping[str, str], written: Mapping[str, str | None]) -> None:
    """Refuse output that would replace what is read, or other output of the same call.

    read : what a file is, to its path; written : option to its path, or None
    """
    taken = {Path(path).resolve(): what for what, path in read.items() if path}
    for option, out in written.items():
        if out is None:
            continue
        path = Path(out).resolve()
        if path in taken:
            raise BadInput(Problem(option, out, "output goes to a file of its own",
                                   f"the file of {taken[path]}", "name another file"))
        taken[path] = option


def ratio(option: str, text: str) -> Fraction:
    """A number or a fraction of two whole numbers, exactly as it is written."""
    if not _RATIO.fullmatch(text.strip()):
        raise BadInput(Problem(option, "", "is a number or a fraction of two whole numbers",
                               f'"{text}"', "write 24 or 24000/1001"))
    above, _, below = text.strip().partition("/")
    return Fraction(above) / Fraction(below or "1")


def read_given(rig: Rig, drives: Sequence[str], targets: Sequence[str],
               bends: Sequence[str]) -> tuple[dict[str, Any], dict[str, Any], dict[str, str]]:
    """Drives, targets and bends of a call. Raises BadInput with all that is wrong with them."""
    gathered = Gathered()
    driven = _drives(gathered, drives)
    wished = _targets(gathered, rig, targets)
    asked = _pairs(gathered, bends, "--bend", "JOINT=SIDE, as elbow=left")
    gathered.of(lambda: read_knowns(rig, driven, wished))
    if asked:
        gathered.of(lambda: wanted_signs(rig, asked))
    gathered.stop_if_any()
    return driven, wished, asked


def _drives(gathered: Gathered, given: Sequence[str]) -> dict[str, Any]:
    """NAME=VALUE, or NAME=FIRST:LAST:COUNT for evenly spaced values over frames."""
    drives = {}
    pairs = _pairs(gathered, given, "--drive", "NAME=VALUE or NAME=FIRST:LAST:COUNT")
    for name, value in pairs.items():
        text, (first, *over) = f"{name}={value}", value.split(":")
        if over and (len(over) != 2 or not _count(over[1])):
            gathered.add("--drive", text, "values over frames are FIRST:LAST:COUNT, the count "
                         f"from 1 to {MOST_STEPS:,}", f'"{value}"',
                         "write 0:90:10 for ten values from 0 to 90")
            continue
        numbers = _numbers(gathered, "--drive", text, [first, *over[:1]])
        if numbers:
            drives[name] = (np.linspace(numbers[0], numbers[1], int(over[1])) if over
                            else np.array(numbers[0]))
    return drives


def _count(text: str) -> bool:
    return re.fullmatch(r"[0-9]{1,9}", text) is not None and 0 < int(text) <= MOST_STEPS


def _targets(gathered: Gathered, rig: Rig, given: Sequence[str]) -> dict[str, Any]:
    """JOINT=X,Y or JOINT.y=Y; several axes of one joint may come one by one."""
    whole: dict[str, Any] = {}
    single: dict[str, Any] = {}
    for name, value in _pairs(gathered, given, "--target", "JOINT=X,Y or JOINT.y=Y").items():
        text = f"{name}={value}"
        numbers = _numbers(gathered, "--target", text, value.split(","))
        joint, dot, axis = name.rpartition(".")
        if not numbers:
            continue
        if name in rig.index or not dot or axis not in tuple(AXES):
            whole[name] = numbers
        elif len(numbers) == 1:
            single.setdefault(joint, {})[axis] = numbers[0]
        else:
            gathered.add("--target", text, "one axis has one number", f'"{value}"')
    for joint in [joint for joint in single if joint in whole]:
        gathered.add("--target", joint, "a joint's place is given once",
                     "it whole and by its axes", "take one of them out")
    return whole | single


def _pairs(gathered: Gathered, given: Sequence[str], option: str, form: str) -> dict[str, str]:
    """NAME=VALUE, each name once."""
    pairs: dict[str, str] = {}
    for text in given:
        name, sign, value = (part.strip() for part in text.partition("="))
        if not sign or not name or not value:
            gathered.add(option, "", f"is written {form}", f'"{text}"')
        elif name in pairs:
            gathered.add(option, name, "is given once", f"{pairs[name]} and {value}",
                         "take one of them out")
        else:
            pairs[name] = value
    return pairs


def _numbers(gathered: Gathered, option: str, text: str, values: Sequence[str]) -> list[float]:
    """Finite numbers; none of them where one isn't."""
    numbers = []
    for value in values:
        try:
            number = float(value)
        except ValueError:
            number = float("nan")
        if not np.isfinite(number):
            gathered.add(option, text, "a value is a finite number", f'"{value}"')
            return []
        numbers.append(number)
    return numbers
