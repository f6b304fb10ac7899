"""On which line of a TOML or JSON text a key stands.

The parsers that decode files tell no places, so this scanner goes through the text once more,
and only when there is a problem to tell. It follows keys, tables, lists and strings and decodes
no values. It expects a text that parses, and where it loses its way it keeps what it has.
"""

from __future__ import annotations

import json
import re
from bisect import bisect_right
from dataclasses import dataclass, field

from rigpose.model.names import KeyPath

_BLANK = re.compile(r"(?:[ \t\r\n,]|#[^\n]*)*")
_BREAKS = re.compile(r"(?:[ \t\r\n]|#[^\n]*)*")
_STRING = re.compile(
    r'"""(?:\\.|[^\\])*?"{3,5}|\'\'\'.*?\'{3,5}|"(?:\\.|[^"\\\n])*"|\'[^\'\n]*\'', re.DOTALL
)
_BARE_KEY = re.compile(r"[A-Za-z0-9_-]+")
_BARE_VALUE = re.compile(r"[^,\]}\n#]*")
_END_OF_LINE = re.compile(r"[^\n]*")
_INDENT = re.compile(r"[ \t]*")
_DOT = re.compile(r"[ \t]*\.[ \t]*")
_EQUALS = re.compile(r"[ \t\r\n]*[=:]")


class _LostError(Exception):
    """The text is not what the scanner expects."""


@dataclass
class Repeat:
    """A key that stands twice."""

    path: KeyPath
    line: int
    first: int


@dataclass
class Lines:
    """The lines of all keys found. ``repeats`` holds keys that stood before.

    ``implied`` are tables that only stand in headers of what is inside them, as `limits` in
    `[limits.fold]`; kept apart, since a header of their own may follow and is no repeat.
    """

    found: dict[KeyPath, int] = field(default_factory=dict)
    implied: dict[KeyPath, int] = field(default_factory=dict)
    repeats: list[Repeat] = field(default_factory=list)

    def of(self, path: KeyPath) -> int | None:
        """The line of a key, else of the nearest table or list around it; None for the whole."""
        for length in range(len(path), 0, -1):
            line = self.found.get(path[:length]) or self.implied.get(path[:length])
            if line is not None:
                return line
        return None


def line_of(text: str, path: KeyPath, kind: str = "toml") -> int | None:
    """The line (from 1) of the key at a path, or of what is around it.

    >>> line_of("[bones]\\nstay = { ends = ['a', 'b'] }", ("bones", "stay", "ends"))
    2
    """
    return scan(text, kind).of(path)


def scan(text: str, kind: str = "toml") -> Lines:
    """Find the lines of all keys of a "toml" or "json" text."""
    scanner = _Scanner(text)
    try:
        if kind == "json":
            scanner.value(())
        else:
            scanner.statements()
    except (_LostError, RecursionError):
        pass
    return scanner.lines


class _Scanner:
    def __init__(self, text: str) -> None:
        self.text = text
        self.at = 0
        self.breaks = [m.start() for m in re.finditer("\n", text)]
        self.lines = Lines()
        self.lists: dict[KeyPath, int] = {}

    def line(self) -> int:
        return bisect_right(self.breaks, self.at - 1) + 1

    def skip(self, pattern: re.Pattern[str]) -> str:
        match = pattern.match(self.text, self.at)
        if match is None:
            raise _LostError
        self.at = match.end()
        return match[0]

    def here(self, sign: str) -> bool:
        if not self.text.startswith(sign, self.at):
            return False
        self.at += len(sign)
        return True

    def note(self, path: KeyPath, line: int) -> None:
        first = self.lines.found.setdefault(path, line)
        if first != line or path in self.lists:
            self.lines.repeats.append(Repeat(path, line, first))

    def statements(self) -> None:
        """A TOML text: headers of tables and lists of tables, and keys with values."""
        table: KeyPath = ()
        while True:
            self.skip(_BREAKS)
            if self.at >= len(self.text):
                return
            if self.here("[["):
                table = self.list_header()
            elif self.here("["):
                table = self.header()
            else:
                self.key_value(table)
            self.skip(_END_OF_LINE)

    def resolved(self, keys: list[str]) -> KeyPath:
        """A header's path; in a list of tables it speaks of the last one."""
        path: KeyPath = ()
        for key in keys:
            path = (*path, key)
            self.lines.implied.setdefault(path, self.line())
            if path in self.lists:
                path = (*path, self.lists[path])
        return path

    def list_header(self) -> KeyPath:
        line = self.line()
        keys = self.keys()
        path = (*self.resolved(keys[:-1]), keys[-1])
        self.lists[path] = self.lists.get(path, -1) + 1
        self.lines.found.setdefault(path, line)
        path = (*path, self.lists[path])
        self.lines.found[path] = line
        return path

    def header(self) -> KeyPath:
        line = self.line()
        path = self.resolved(self.keys())
        if path and isinstance(path[-1], str):
            self.note(path, line)
        return path

    def keys(self) -> list[str]:
        """A dotted key."""
        found = []
        while True:
            self.skip(_INDENT)
            found.append(self.key())
            if not _DOT.match(self.text, self.at):
                return found
            self.skip(_DOT)

    def key(self) -> str:
        if self.text[self.at : self.at + 1] not in ('"', "'"):
            return self.skip(_BARE_KEY)
        raw = self.skip(_STRING)
        if raw[0] == "'":
            return raw[1:-1]
        try:
            return str(json.loads(raw, strict=False))
        except ValueError:
            return raw[1:-1]

    def key_value(self, table: KeyPath) -> None:
        line = self.line()
        keys = self.keys()
        for k in range(1, len(keys)):
            self.lines.found.setdefault((*table, *keys[:k]), line)
        path = (*table, *keys)
        self.note_key(path, line)
        self.skip(_EQUALS)
        self.value(path)

    def note_key(self, path: KeyPath, line: int) -> None:
        """Two equal keys may stand on one line, which `note` alone would not see."""
        if path in self.lines.found:
            self.lines.repeats.append(Repeat(path, line, self.lines.found[path]))
        else:
            self.lines.found[path] = line

    def value(self, path: KeyPath) -> None:
        self.skip(_BREAKS)
        if self.here("{"):
            self.members(path)
        elif self.here("["):
            self.items(path)
        elif self.text[self.at : self.at + 1] in ('"', "'"):
            self.skip(_STRING)
        else:
            self.skip(_BARE_VALUE)

    def members(self, path: KeyPath) -> None:
        while True:
            self.skip(_BLANK)
            if self.here("}"):
                return
            self.key_value(path)

    def items(self, path: KeyPath) -> None:
        count = 0
        while True:
            self.skip(_BLANK)
            if self.here("]"):
                return
            if self.at >= len(self.text):
                raise _LostError
            line = self.line()
            self.lines.found[(*path, count)] = line
            self.value((*path, count))
            count += 1
