"""A TOML or JSON file as plain dicts, lists and values, and on which line each of them stands."""

from __future__ import annotations

import json
import re
import tomllib
from collections.abc import Callable
from dataclasses import dataclass
from functools import cached_property
from pathlib import Path

from rigpose.files.disk import read_text
from rigpose.files.lines import Lines, scan
from rigpose.ground.errors import BadInput, Problem
from rigpose.model.names import KeyPath, path_text, shown

_PLACE = re.compile(r"\s*\(at (?:line (\d+), column \d+|end of document)\)$")
_DEEP = "lists and tables inside one another go too deep"


class _RepeatedKeyError(ValueError):
    """Two equal keys in one JSON object."""


@dataclass
class Document:
    """What a file holds. ``name`` is what messages call the file."""

    data: dict[str, object]
    text: str
    kind: str
    name: str

    @cached_property
    def lines(self) -> Lines:
        """The lines of all keys; looked for only when a problem is told."""
        return scan(self.text, self.kind)

    def where(self, path: KeyPath) -> str:
        """The file, and the line of a key where it can be had.

        A part of a copy has none of its own: there the copy's line is told.
        """
        if len(path) > 3 and path[:3] not in self.lines.found:
            # A short form, [x, y] for { at = [x, y] }: its items stand right under the part.
            path = (*path[:2], *path[3:])
        line = self.lines.of(path)
        if len(path) > 1 and "/" in str(path[1]) and path[:2] not in self.lines.found:
            copy = str(path[1]).split("/", maxsplit=1)[0]
            line = self.lines.found.get(("copies", copy)) or self.lines.found.get(
                ("copies", copy.rstrip("0123456789")), line)
        return self.name if line is None else f"{self.name}:{line}"


def read_document(path: Path, name: str = "") -> Document:
    """Read a file, by its suffix as TOML or JSON; ``name`` is what messages call it.

    Raises BadInput where it can't be read, isn't UTF-8, is over 64 MiB, doesn't parse or has
    equal keys.
    """
    name = name or path.name
    suffix = path.suffix.lower()
    if suffix not in _PARSERS:
        mend = "name it NAME.toml or NAME.json"
        raise BadInput(Problem(name, "", "a rig file is TOML or JSON, told by its suffix",
                               shown(path.suffix) if path.suffix else "no suffix", mend))
    text = read_text(path)
    data = _PARSERS[suffix](text, name)
    return Document(data, text, suffix[1:], name)


def _toml(text: str, name: str) -> dict[str, object]:
    try:
        return tomllib.loads(text)
    except RecursionError:
        raise BadInput(Problem(name, "", _DEEP, "", "is it the right file?")) from None
    except ValueError as error:
        raise _not_toml(text, name, str(error)) from None


def _not_toml(text: str, name: str, message: str) -> BadInput:
    """The parser's complaint with its line; for equal keys those are looked for and named."""
    if "overwrite" in message or "twice" in message:
        repeats = _repeats(text, "toml", name)
        if repeats:
            return BadInput(repeats)
    place = _PLACE.search(message)
    line = place[1] if place and place[1] else str(text.count("\n") + 1) if place else None
    where = name if line is None else f"{name}:{line}"
    got = _PLACE.sub("", message)
    return BadInput(Problem(where, "", "the file is not proper TOML", got[:1].lower() + got[1:],
                            "mend that line or the one above it"))


def _repeats(text: str, kind: str, name: str) -> list[Problem]:
    return [Problem(f"{name}:{r.line}", path_text(r.path), "a key or part may stand once only",
                    f"it stands on line {r.first} already", "rename or remove one of them")
            for r in scan(text, kind).repeats]


def _json(text: str, name: str) -> dict[str, object]:
    try:
        data = json.loads(text, object_pairs_hook=_once)
    except RecursionError:
        raise BadInput(Problem(name, "", _DEEP, "", "is it the right file?")) from None
    except json.JSONDecodeError as error:
        raise BadInput(Problem(f"{name}:{error.lineno}", "", "the file is not proper JSON",
                               error.msg[:1].lower() + error.msg[1:],
                               "mend that line or the one above it")) from None
    except _RepeatedKeyError as error:
        raise BadInput(_repeats(text, "json", name) or Problem(
            name, "", "a key may stand once only", shown(str(error)), "rename one")) from None
    except ValueError as error:
        raise BadInput(Problem(name, "", "the file is not proper JSON", str(error),
                               "mend that number")) from None
    if not isinstance(data, dict):
        raise BadInput(Problem(name, "", "a rig file is one JSON object", shown(data),
                               "put all in { }"))
    _check_text(text, data, name)
    return data


def _once(pairs: list[tuple[str, object]]) -> dict[str, object]:
    table = dict(pairs)
    if len(table) < len(pairs):
        seen: set[str] = set()
        for key, _ in pairs:
            if key in seen:
                raise _RepeatedKeyError(key)
            seen.add(key)
    return table


def _check_text(text: str, data: object, name: str) -> None:
    """Half of a surrogate pair, written with an escape, could not be written to any file."""
    if "\\ud" not in text and "\\uD" not in text:
        return
    try:
        json.dumps(data, ensure_ascii=False).encode()
    except UnicodeEncodeError as error:
        got = f"\\u{ord(error.object[error.start]):04x}"
        raise BadInput(Problem(name, "", "text is Unicode, without half characters", got,
                               "write the whole character")) from None


_PARSERS: dict[str, Callable[[str, str], dict[str, object]]] = {".toml": _toml, ".json": _json}
