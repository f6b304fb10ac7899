"""Whole files in and whole files out: nobody ever finds half a file under the name they asked for.

A file is written under another name in the same folder and renamed when it is complete; renaming
within a folder is one step for the system, so a reader sees the old file or the new one.
"""

from __future__ import annotations

import secrets
from collections.abc import Iterator
from contextlib import contextmanager
from pathlib import Path
from types import TracebackType
from typing import BinaryIO, Self

from rigpose.ground.errors import BadInput, Problem

LARGEST_TEXT = 64 << 20
"""Bytes. A rig or shot above this is a wrong file, not a large one."""


def read_text(path: Path, largest: int | None = LARGEST_TEXT) -> str:
    """The text of a UTF-8 file, with or without a byte order mark.

    Raises BadInput where it can't be read, is larger than ``largest`` bytes or isn't UTF-8.
    """
    with told(path, "be read"):
        if largest is not None and path.stat().st_size > largest:
            raise BadInput(Problem(path.name, "", f"a file is at most {largest >> 20} MiB",
                                   f"{path.stat().st_size} bytes", "is it the right file?"))
        data = path.read_bytes()
    try:
        return data.decode("utf-8-sig")
    except UnicodeDecodeError as error:
        line = data.count(b"\n", 0, error.start) + 1
        raise BadInput(Problem(f"{path.name}:{line}", "", "a text file is UTF-8",
                               f"the byte 0x{data[error.start]:02x}",
                               "save it again as UTF-8")) from None


@contextmanager
def told(path: Path, what: str) -> Iterator[None]:
    """Turns the system's refusals into one message with the file's name."""
    try:
        yield
    except OSError as error:
        reason = error.strerror or str(error)
        raise BadInput(Problem(str(path), "", f"the file can't {what}", reason,
                               "check the path, the rights and the room on the disk")) from None


class Beside:
    """A binary file that appears under its name only when the ``with`` block ends well.

    On an exception what was written is removed and an old file of that name stays whole. Where
    ``path`` is a link the file it points to is replaced, and the link stays.

    Raises BadInput where the folder doesn't exist or can't be written to, and where the name is
    taken by something that is no file.
    """

    def __init__(self, path: str | Path) -> None:
        self.path = Path(path).resolve()
        self._spare = self.path.with_name(f".rigpose-{secrets.token_hex(6)}.part")
        self._file: BinaryIO | None = None

    def write(self, data: bytes) -> None:
        """Appends ``data``; raises BadInput when the disk is full."""
        if self._file is None:
            raise ValueError("write inside the with block")
        with told(self.path, "be written"):
            self._file.write(data)

    def __enter__(self) -> Self:
        if self.path.exists() and not self.path.is_file():
            raise BadInput(Problem(str(self.path), "", "output goes to a file", "something else",
                                   "name a file that may be replaced"))
        with told(self.path, "be written"):
            self._file = self._spare.open("xb")
        return self

    def __exit__(self, kind: type[BaseException] | None, error: BaseException | None,
                 trace: TracebackType | None) -> None:
        if self._file is None:
            return
        try:
            with told(self.path, "be written"):
                self._file.close()
                if kind is None:
                    self._spare.replace(self.path)
        finally:
            self._file = None
            self._spare.unlink(missing_ok=True)


def write_whole(path: str | Path, data: bytes) -> None:
    """Writes a whole file beside and renames it. Raises BadInput as `Beside` does."""
    with Beside(path) as out:
        out.write(data)
