"""Joint positions and values as CSV (RFC 4180), written in blocks of frames.

Two layouts: *tall* has a row for each joint and frame, *wide* a row for each frame. Numbers have
the fewest digits that read back to the same float64; whole frame numbers are written as integers.
A pose that doesn't exist has empty cells. Nothing is rounded.
"""

from __future__ import annotations

import re
from collections.abc import Iterator, Mapping, Sequence
from pathlib import Path
from types import TracebackType
from typing import Literal, Self

import msgspec
import numpy as np
import numpy.typing as npt

from rigpose.files.csvread import Table, read_positions
from rigpose.files.disk import Beside
from rigpose.ground.errors import BadInput, Problem
from rigpose.model.rig import Rig

__all__ = ["CsvWriter", "Layout", "RigWriter", "Table", "ValuesWriter", "read_positions"]

Floats = npt.NDArray[np.float64]
Layout = Literal["tall", "wide"]

_CELLS_AT_ONCE = 1 << 16
"""Numbers turned into text in one go: large enough to be quick, small enough for the cache."""


class _Writer:
    """A CSV file of rows: frame, then the branch if there are several, labels, numbers."""

    def __init__(self, path: str | Path, header: Sequence[str], branches: bool) -> None:
        self._file = Beside(path)
        self._branches = branches
        start = ["frame", "branch"] if branches else ["frame"]
        self._header = ",".join(quoted(cell) for cell in (*start, *header)).encode()

    def __enter__(self) -> Self:
        self._file.__enter__()
        self._file.write(self._header + b"\r\n")
        return self

    def __exit__(self, kind: type[BaseException] | None, error: BaseException | None,
                 trace: TracebackType | None) -> None:
        self._file.__exit__(kind, error, trace)

    def _add(self, frames: npt.ArrayLike, labels: Sequence[str], numbers: Floats,
             branch: str | None) -> None:
        """numbers : (n_frames, n_labels, width) float."""
        if (branch is not None) != self._branches:
            raise BadInput(Problem(self._file.path.name, "branch",
                                   "a block names its branch just where the file has that column",
                                   repr(branch)))
        head = "," if branch is None else f",{quoted(branch)},"
        cells = [f"{head}{quoted(label)}," if label else head for label in labels]
        at = np.asarray(frames, dtype=np.float64)
        for text in _lines(at, [cell.encode() for cell in cells], numbers):
            self._file.write(text)


class CsvWriter(_Writer):
    """Writes joint positions; a context manager that leaves the file only when all went well.

    joints : the joints' names, in the order of the arrays
    layout : "tall" is frame,joint,x,y,z; "wide" is frame,elbow.x,elbow.y,elbow.z,…
    branches : with a column ``branch`` after the frame
    names : joint name to the name that the studio uses

    Raises BadInput for an unknown layout, where two joints would get one name, and where the file
    can't be written.
    """

    def __init__(self, path: str | Path, joints: Sequence[str], *, layout: Layout = "tall",
                 branches: bool = False, names: Mapping[str, str] | None = None) -> None:
        self._joints = [(names or {}).get(joint, joint) for joint in joints]
        self._layout = layout
        _check(Path(path).name, layout, self._joints)
        wide = [f"{joint}.{axis}" for joint in self._joints for axis in "xyz"]
        super().__init__(path, wide if layout == "wide" else ["joint", *"xyz"], branches)

    def block(self, frames: npt.ArrayLike, positions: npt.ArrayLike,
              branch: str | None = None) -> None:
        """Adds rows.

        frames : (n_frames,) float
        positions : (n_frames, n_joints, 3) float, NaN where there is no pose
        branch : its name, where the file has that column

        Raises BadInput for other shapes, infinities and a frame that is no number.
        """
        at, places = _block(self._file.path.name, frames, positions, (len(self._joints), 3))
        if self._layout == "tall":
            self._add(at, self._joints, places, branch)
        else:
            self._add(at, [""], places.reshape(len(at), 1, -1), branch)


class RigWriter(CsvWriter):
    """Writes the joints that people know of a rig, without the helpers that hinges and the like
    made: a studio has no such joints. ``block`` takes the places of all joints of the rig."""

    def __init__(self, path: str | Path, rig: Rig, *, layout: Layout = "tall",
                 branches: bool = False) -> None:
        self._rig = rig
        super().__init__(path, rig.own_joints, layout=layout, branches=branches, names=rig.names)

    def block(self, frames: npt.ArrayLike, positions: npt.ArrayLike,
              branch: str | None = None) -> None:
        """As `CsvWriter.block`, with positions (n_frames, n_joints, 3) of `Rig.joint_names`."""
        every = (len(self._rig.joints), 3)
        at, places = _block(self._file.path.name, frames, positions, every)
        super().block(at, own_places(self._rig, places), branch)


def own_places(rig: Rig, positions: Floats) -> Floats:
    """Of positions (..., n_joints, 3) those of the rig's own joints."""
    if not rig.helper_joints:
        return positions
    kept: Floats = positions[..., [rig.index[j] for j in rig.own_joints], :]
    return kept


class ValuesWriter(_Writer):
    """Writes values (drives, gauges, limit angles): frame,name,value. Used like `CsvWriter`."""

    def __init__(self, path: str | Path, names: Sequence[str], *, branches: bool = False) -> None:
        self._names = list(names)
        _check(Path(path).name, "tall", self._names)
        super().__init__(path, ["name", "value"], branches)

    def block(self, frames: npt.ArrayLike, values: npt.ArrayLike,
              branch: str | None = None) -> None:
        """Adds rows: frames (n_frames,), values (n_frames, n_names); NaN where there is none."""
        at, table = _block(self._file.path.name, frames, values, (len(self._names),))
        self._add(at, self._names, table[..., None], branch)


def quoted(cell: str) -> str:
    """A cell as RFC 4180 has it: in quotes where it holds a comma, a quote or a line end.

    >>> print(quoted('elbow'), quoted('a, "b"'))
    elbow "a, ""b\"""
    """
    return '"' + cell.replace('"', '""') + '"' if re.search('[",\r\n]', cell) else cell


def _check(file: str, layout: str, labels: Sequence[str]) -> None:
    if layout not in ("tall", "wide"):
        raise BadInput(Problem(file, "layout", "a layout is tall or wide", f'"{layout}"'))
    seen: set[str] = set()
    for label in labels:
        if label in seen or not label:
            raise BadInput(Problem(file, f'"{label}"', "each name in a file stands for one joint "
                                   "or value", "it twice" if label else "an empty name",
                                   "change one in the rig's [names]"))
        seen.add(label)


def _block(file: str, frames: npt.ArrayLike, numbers: npt.ArrayLike,
           shape: tuple[int, ...]) -> tuple[Floats, Floats]:
    """Both as arrays whose shapes fit and that CSV can hold."""
    at, table = np.asarray(frames, dtype=np.float64), np.asarray(numbers, dtype=np.float64)
    if at.ndim != 1 or table.shape != (len(at), *shape):
        raise BadInput(Problem(file, "block", f"numbers have the shape (frames, {shape})",
                               f"{table.shape} for frames {at.shape}"))
    if not np.isfinite(at).all() or np.isinf(table).any():
        raise BadInput(Problem(file, "block", "frames are finite, numbers finite or NaN",
                               "NaN or infinity"))
    return at, table


def _lines(frames: Floats, labels: list[bytes], numbers: Floats) -> Iterator[bytes]:
    """The text of (n_frames, n_labels, width) numbers, in pieces."""
    if not numbers.size:
        return
    step = max(1, _CELLS_AT_ONCE // max(1, numbers[0].size))
    for k in range(0, len(frames), step):
        yield _text(frames[k:k + step], labels, numbers[k:k + step])


def _text(frames: Floats, labels: list[bytes], numbers: Floats) -> bytes:
    """One piece.

    The JSON encoder writes the shortest digits about five times faster than ``repr``, and JSON's
    numbers are CSV's; only its null becomes an empty cell. A list of rows is cut at the brackets
    and laid out by slices, so that no Python runs for a row.
    """
    flat = numbers.reshape(-1, numbers.shape[-1])
    rows = msgspec.json.encode(flat.tolist())[2:-2].replace(b"null", b"").split(b"],[")
    pieces = [b"\r\n"] * (4 * len(rows))
    pieces[0::4] = [cell for cell in _frame_cells(frames) for _ in labels]
    pieces[1::4] = labels * len(frames)
    pieces[2::4] = rows
    return b"".join(pieces)


def _frame_cells(frames: Floats) -> list[bytes]:
    return [(str(int(f)) if f.is_integer() else repr(f)).encode() for f in frames.tolist()]
