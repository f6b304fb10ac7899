"""Joint positions from CSV, in either layout, with every row's mistake told by its line."""

from __future__ import annotations

import csv
import io
from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from pathlib import Path

import numpy as np
import numpy.typing as npt

from rigpose.files.disk import read_text
from rigpose.ground.errors import BadInput, Problem

Floats = npt.NDArray[np.float64]
Row = tuple[int, list[str]]
"""The line that a row ends on, and its cells."""

TALL = ["joint", "x", "y", "z"]
_HEADERS = "frame,joint,x,y,z or frame,elbow.x,elbow.y,elbow.z,… (a column branch may follow frame)"


@dataclass(frozen=True, slots=True)
class Table:
    """What a CSV of positions says, in the file's own frame of reference.

    frames : (n_frames,) float, rising
    joints : names in the order of their first row, or of the header
    branches : names in the order of their first row; empty where the file has no such column
    positions : (n_branches or 1, n_frames, n_joints, 3) float, NaN in gaps
    """

    frames: Floats
    joints: tuple[str, ...]
    branches: tuple[str, ...]
    positions: Floats


def read_positions(path: str | Path, names: Mapping[str, str] | None = None) -> Table:
    """Reads a CSV of joint positions, tall or wide.

    names : joint name to the studio's name; turned back on reading, as written by `CsvWriter`

    Raises BadInput with up to 20 problems: no such file, another header, rows of another length,
    cells that are no numbers, a joint twice in one frame.
    """
    file = Path(path)
    header, rows = _rows(file)
    branched = header[1:2] == ["branch"]
    rest = header[2:] if branched else header[1:]
    _even(file.name, rows, len(header))
    joints = None if rest == TALL else _wide_joints(file.name, header[:1], rest)
    if joints is None:
        cells = _tall(file.name, rows, branched)
    else:
        cells = _wide(file.name, rows, branched, joints)
    back = {studio: joint for joint, studio in (names or {}).items()}
    return _table(file.name, rows, cells, back)


def _rows(file: Path) -> tuple[list[str], list[Row]]:
    """The header's cells and the rows below it; blank lines are left out."""
    reader = csv.reader(io.StringIO(read_text(file, None), newline=""), strict=True)
    rows: list[Row] = []
    try:
        rows.extend((reader.line_num, row) for row in reader if row)
    except csv.Error as error:
        raise BadInput(Problem(f"{file.name}:{reader.line_num}", "", "the file is CSV (RFC 4180)",
                               str(error))) from None
    if not rows:
        raise BadInput(Problem(file.name, "", "the first row is a header", "an empty file",
                               f"write {_HEADERS}"))
    return [cell.strip() for cell in rows[0][1]], rows[1:]


def _even(file: str, rows: list[Row], width: int) -> None:
    wrong = [Problem(f"{file}:{line}", "", f"a row has {width} cells as the header has",
                     str(len(row))) for line, row in rows if len(row) != width]
    if wrong:
        raise BadInput(wrong)


def _wide_joints(file: str, first: list[str], columns: list[str]) -> list[str]:
    """The joints of a wide header, checked: x, y and z of each in a row."""
    joints = [column.rpartition(".")[0] for column in columns[::3]]
    expected = [f"{joint}.{axis}" for joint in joints for axis in "xyz"]
    if first != ["frame"] or not joints or not all(joints) or columns != expected:
        raise BadInput(Problem(f"{file}:1", "header", f"the header is {_HEADERS}",
                               ",".join((*first, *columns))[:100],
                               "cells are separated by commas"))
    if len(set(joints)) < len(joints):
        twice = next(joint for joint in joints if joints.count(joint) > 1)
        raise BadInput(Problem(f"{file}:1", f'"{twice}"', "a joint has its columns once", "twice"))
    return joints


@dataclass(frozen=True, slots=True)
class _Cells:
    """One entry for each place in the file, (n_places,), and its coordinates (n_places, 3)."""

    frames: Floats
    branches: Sequence[str]
    joints: Sequence[str]
    places: Floats
    per_row: int
    branched: bool


def _tall(file: str, rows: list[Row], branched: bool) -> _Cells:
    skip = 2 if branched else 1
    numbers = _numbers(file, rows, [0, *range(skip + 1, skip + 4)])
    branches = [row[1] for _, row in rows] if branched else [""] * len(rows)
    return _Cells(numbers[:, 0], branches, [row[skip] for _, row in rows], numbers[:, 1:], 1,
                  branched)


def _wide(file: str, rows: list[Row], branched: bool, joints: list[str]) -> _Cells:
    skip, n = (2 if branched else 1), len(joints)
    numbers = _numbers(file, rows, [0, *range(skip, skip + 3 * n)])
    branches = [row[1] if branched else "" for _, row in rows for _ in joints]
    return _Cells(np.repeat(numbers[:, 0], n), branches, joints * len(rows),
                  numbers[:, 1:].reshape(-1, 3), n, branched)


def _numbers(file: str, rows: list[Row], columns: list[int]) -> Floats:
    """(n_rows, n_columns) float; empty cells are NaN, but the frame must be there."""
    try:
        table = [[_number(row[k]) for k in columns] for _, row in rows]
    except ValueError:
        wrong = [(line, row[k]) for line, row in rows for k in columns if not _is_number(row[k])]
        raise BadInput([Problem(f"{file}:{line}", "", "a cell is a finite number or empty",
                                f'"{cell}"') for line, cell in wrong]) from None
    found = np.array(table, dtype=np.float64).reshape(len(rows), len(columns))
    missing = np.flatnonzero(np.isnan(found[:, 0]))
    if missing.size:
        raise BadInput([Problem(f"{file}:{rows[k][0]}", "frame", "every row has a frame number",
                                "none") for k in missing])
    return found


def _number(cell: str) -> float:
    """A float; NaN for an empty cell and for nan, as many exporters write a gap."""
    if "_" in cell:
        raise ValueError(cell)
    value = float(cell) if cell else float("nan")
    if value in (float("inf"), float("-inf")):
        raise ValueError(cell)
    return value


def _is_number(cell: str) -> bool:
    try:
        _number(cell)
    except ValueError:
        return False
    return True


def _table(file: str, rows: list[Row], cells: _Cells, back: Mapping[str, str]) -> Table:
    frames, frame = np.unique(cells.frames, return_inverse=True)
    joints, joint = _first_seen(cells.joints)
    branches, branch = _first_seen(cells.branches)
    shape = (max(1, len(branches)), len(frames), len(joints))
    _dense(file, shape, len(cells.joints))
    where = np.ravel_multi_index((branch, frame.reshape(-1), joint), shape)
    _once(file, rows, cells, where)
    positions = np.full((*shape, 3), np.nan)
    positions.reshape(-1, 3)[where] = cells.places
    for array in (frames, positions):
        array.flags.writeable = False
    named = tuple(back.get(name, name) for name in joints)
    return Table(frames, named, tuple(branches) if cells.branched else (), positions)


def _first_seen(names: Sequence[str]) -> tuple[list[str], npt.NDArray[np.intp]]:
    order = {name: k for k, name in enumerate(dict.fromkeys(names))}
    return list(order), np.fromiter((order[name] for name in names), np.intp, len(names))


def _dense(file: str, shape: tuple[int, int, int], given: int) -> None:
    """Refuses rows so scattered that the table of them would fill the memory with gaps."""
    cells = shape[0] * shape[1] * shape[2]
    if cells > 1_000_000 + 64 * given:
        raise BadInput(Problem(file, "", "most joints have a row in most frames",
                               f"{given} places for {shape[2]} joints in {shape[1]} frames",
                               "split the file"))


def _once(file: str, rows: list[Row], cells: _Cells, where: npt.NDArray[np.intp]) -> None:
    order = np.argsort(where, kind="stable")
    again = np.sort(order[1:][where[order][1:] == where[order][:-1]])
    if again.size:
        raise BadInput([Problem(f"{file}:{rows[k // cells.per_row][0]}", f'"{cells.joints[k]}"',
                                "a joint has one place in a frame",
                                f"a second one in frame {cells.frames[k]:g}") for k in again])
