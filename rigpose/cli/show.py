"""What a person sees: tables, progress on a terminal, and JSON for programs."""

from __future__ import annotations

import math
import sys
from collections.abc import Iterator
from contextlib import contextmanager
from dataclasses import asdict
from typing import TYPE_CHECKING, Any

import click
import msgspec
import numpy as np

from rigpose.ground.errors import Problem

if TYPE_CHECKING:
    from rich.progress import Progress, TaskID


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


def print_table(title: str, columns: list[str], rows: list[list[str]]) -> None:
    """A table as wide as the terminal, or as its content where there is none."""
    from rich.box import SIMPLE
    from rich.console import Console
    from rich.table import Table

    click.echo(title)
    table = Table(box=SIMPLE)
    for k, column in enumerate(columns):
        table.add_column(column, justify="left" if k < 2 else "right", overflow="fold")
    for row in rows:
        table.add_row(*(_escaped(cell) for cell in row))
    width = None if sys.stdout.isatty() else 160
    Console(width=width, highlight=False).print(table)


def _escaped(cell: str) -> str:
    from rich.markup import escape

    return escape(cell)


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
