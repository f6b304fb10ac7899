"""Places of named joints from a CSV file, such as a package exports for its locators."""

from __future__ import annotations

import csv
import io
import math
from collections.abc import Iterator, Sequence
from dataclasses import dataclass
from pathlib import Path

from rigpose.files.disk import read_text
from rigpose.ground.errors import BadInput, Problem
from rigpose.model.names import shown

HEADER = "joint,x,y or joint,x,y,z"
_NAMES = ("joint", "name")


@dataclass(frozen=True)
class Locators:
    """``places`` maps each name to 2 or 3 coordinates, in the file's order."""

    places: dict[str, tuple[float, ...]]
    dim: int


@dataclass(frozen=True)
class _Columns:
    name: int
    axes: tuple[int, ...]
    frame: int | None


def read_locators(path: Path, name: str = "") -> Locators:
    """Read columns joint (or name), x, y and perhaps z; other columns are passed over.

    Where there is a column ``frame``, the rows of the first frame count. Raises BadInput with
    everything that is wrong.
    """
    name = name or path.name
    rows = _rows(read_text(path), name)
    line, first = next(rows, (1, []))
    columns = _columns(f"{name}:{line}", first)
    problems: list[Problem] = []
    places: dict[str, tuple[float, ...]] = {}
    for line, row in _first_frame(rows, columns):
        _add(places, problems, f"{name}:{line}", row, columns)
    if not places and not problems:
        problems.append(Problem(name, "", "there is a row for each joint", "none",
                                "export the joints again"))
    if problems:
        raise BadInput(problems)
    return Locators(places, len(columns.axes))


def _rows(text: str, name: str) -> Iterator[tuple[int, list[str]]]:
    """Rows that hold anything, with their lines."""
    reader = csv.reader(io.StringIO(text, newline=""), strict=True)
    try:
        for row in reader:
            if any(cell.strip() for cell in row):
                yield reader.line_num, [cell.strip() for cell in row]
    except csv.Error as error:
        raise BadInput(Problem(f"{name}:{reader.line_num}", "", "the file is not proper CSV",
                               str(error), "mend the quotes of that line")) from None


def _columns(where: str, header: Sequence[str]) -> _Columns:
    cells = [cell.lower() for cell in header]
    named = [cell for cell in cells if cell in _NAMES]
    twice = [cell for cell in ("x", "y", "z", "frame") if cells.count(cell) > 1]
    if len(named) != 1 or "x" not in cells or "y" not in cells or twice:
        raise BadInput(Problem(where, "", f"the first line names the columns once: {HEADER}",
                               shown(",".join(header)), "add such a line, commas between"))
    axes = tuple(cells.index(axis) for axis in "xyz" if axis in cells)
    frame = cells.index("frame") if "frame" in cells else None
    return _Columns(cells.index(named[0]), axes, frame)


def _first_frame(rows: Iterator[tuple[int, list[str]]], columns: _Columns) -> (
    Iterator[tuple[int, list[str]]]
):
    wanted: str | None = None
    for line, row in rows:
        if columns.frame is not None and columns.frame < len(row):
            wanted = row[columns.frame] if wanted is None else wanted
            if row[columns.frame] != wanted:
                continue
        yield line, row


def _add(places: dict[str, tuple[float, ...]], problems: list[Problem], where: str,
         row: list[str], columns: _Columns) -> None:
    if len(row) <= max(columns.name, *columns.axes):
        problems.append(Problem(where, "", "a row has a cell for each column",
                                shown(",".join(row)), "add the missing cells"))
        return
    joint = row[columns.name]
    if not joint:
        problems.append(Problem(where, "", "a row names its joint", shown(",".join(row)),
                                "write the joint's name"))
    elif joint in places:
        problems.append(Problem(where, joint, "a joint has one row", "a second one",
                                "take one of them out"))
    else:
        places[joint] = tuple(_number(problems, where, joint, row[k]) for k in columns.axes)


def _number(problems: list[Problem], where: str, joint: str, cell: str) -> float:
    try:
        number = float(cell) if "_" not in cell else math.nan
    except ValueError:
        number = math.nan
    if not math.isfinite(number):
        problems.append(Problem(where, joint, "a coordinate is a finite number", shown(cell),
                                "write a number with a decimal point"))
    return number
