"""What a person sees: tables, progress on a terminal, and JSON for programs."""

from __future__ import annotations

import math
import shutil
import sys
from collections.abc import Iterator, Sequence
from contextlib import contextmanager
from dataclasses import asdict, replace
from typing import TYPE_CHECKING, Any

import click
import msgspec
import numpy as np

from rigpose.ground.errors import Problem
from rigpose.model.rig import Rig
from rigpose.model.sliders import stands_at
from rigpose.motion.motion import Event

if TYPE_CHECKING:
    from rich.progress import Progress, TaskID

LEAST_TEXT = 32
"""Columns that text keeps in a table on a narrow terminal."""


def print_json(data: object) -> None:
    """One JSON document, indented; numbers that don't exist are null."""
    text = msgspec.json.format(msgspec.json.encode(_plain(data)), indent=2)
    click.echo(text.decode())


def _plain(data: object) -> object:
    if isinstance(data, dict):
        return {str(k): _plain(v) for k, v in data.items()}
    if isinstance(data, list | tuple):
        return [_plain(v) for v in data]
    if isinstance(data, np.ndarray | np.generic):
        return _plain(data.tolist())
    if isinstance(data, float):
        return data if math.isfinite(data) else None
    return data


def problem_dict(problem: Problem) -> dict[str, Any]:
    """A problem's fields by name."""
    return asdict(problem)


def known_joints(rig: Rig, joints: Sequence[str]) -> tuple[str, ...]:
    """The joints with those at which helpers stand in the helpers' place, none twice."""
    return tuple(dict.fromkeys(
        stands_at(rig, j) if j in rig.helper_joints else j for j in joints))


def known_event(rig: Rig, event: Event) -> Event:
    """The event with joints that people know."""
    return replace(event, joints=known_joints(rig, event.joints))


def event_dict(rig: Rig, event: Event) -> dict[str, Any]:
    """An event's fields by name."""
    return asdict(known_event(rig, event))


def counted(number: int, one: str, many: str = "") -> str:
    """A number with its noun.

    >>> counted(1, "frame"), counted(2, "frame"), counted(3, "branch", "branches")
    ('1 frame', '2 frames', '3 branches')
    """
    return f"{number} {one if number == 1 else many or one + 's'}"


def print_table(columns: Sequence[str], rows: Sequence[Sequence[str]]) -> None:
    """A table whose second column is text and all others numbers.

    On a terminal the text is folded to its width; numbers are never cut or folded.
    """
    from rich.console import Console
    from rich.table import Table
    from rich.text import Text

    table = Table(box=None, pad_edge=False, header_style="bold")
    for k, column in enumerate(columns):
        table.add_column(Text(column), justify="left" if k == 1 else "right",
                         overflow="fold", no_wrap=k != 1)
    for row in rows:
        table.add_row(*map(Text, row))
    console = Console(width=_width(columns, rows), highlight=False)
    with console.capture() as capture:
        console.print(table)
    for line in capture.get().splitlines():
        click.echo(line.rstrip())


def _width(columns: Sequence[str], rows: Sequence[Sequence[str]]) -> int:
    """The terminal's, but at least all numbers and a little text; all there is without one."""
    # A sign may be two columns wide.
    widths = [2 * max(map(len, cells)) + 2 if k == 1 else max(map(len, cells)) + 2
              for k, cells in enumerate(zip(columns, *rows, strict=True))]
    whole = sum(widths)
    if not sys.stdout.isatty():
        return whole
    least = whole - widths[1] + min(widths[1], LEAST_TEXT)
    return min(whole, max(least, shutil.get_terminal_size().columns))


class Meter:
    """A progress line on a terminal; nothing where output goes elsewhere."""

    def __init__(self, progress: Progress | None, task: TaskID | None) -> None:
        self._progress, self._task = progress, task

    def show(self, done: int, total: int, note: str = "") -> None:
        """How far it is, and a word about it."""
        if self._progress is not None and self._task is not None:
            self._progress.update(self._task, completed=done, total=total, note=note)


@contextmanager
def meter(what: str) -> Iterator[Meter]:
    """A meter on standard error while work runs."""
    if not sys.stderr.isatty():
        yield Meter(None, None)
        return
    from rich.console import Console
    from rich.progress import BarColumn, MofNCompleteColumn, Progress, TextColumn

    columns = (TextColumn("{task.description}"), BarColumn(), MofNCompleteColumn(),
               TextColumn("{task.fields[note]}"))
    with Progress(*columns, console=Console(stderr=True), transient=True) as progress:
        yield Meter(progress, progress.add_task(what, total=None, note=""))
