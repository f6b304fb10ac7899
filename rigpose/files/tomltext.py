"""TOML written from plain values: keys, texts, numbers, lists and tables on one line."""

from __future__ import annotations

import datetime
import math
import re
from collections.abc import Mapping, Sequence

_BARE = re.compile(r"[A-Za-z0-9_-]+")
_ESCAPES = {"\b": "\\b", "\t": "\\t", "\n": "\\n", "\f": "\\f", "\r": "\\r", '"': '\\"',
            "\\": "\\\\"}


def key(name: str) -> str:
    """A key, in quotes where TOML needs them.

    >>> key("elbow"), key("elbow up")
    ('elbow', '"elbow up"')
    """
    return name if _BARE.fullmatch(name) else text(name)


def text(value: str) -> str:
    r"""A basic string.

    >>> print(text('say "go"'))
    "say \"go\""
    """
    return '"' + "".join(_ESCAPES.get(c) or _sign(c) for c in value) + '"'


def _sign(sign: str) -> str:
    return f"\\u{ord(sign):04X}" if ord(sign) < 0x20 or ord(sign) == 0x7F else sign


def value(item: object) -> str:
    """Any value that TOML knows; floats with the shortest digits that read back the same.

    Raises TypeError for others.

    >>> value({"at": [0.0, 1.5], "pin": True})
    '{ at = [0.0, 1.5], pin = true }'
    """
    if isinstance(item, str):
        return text(item)
    if isinstance(item, bool):
        return "true" if item else "false"
    if isinstance(item, int | float):
        return _number(item)
    if isinstance(item, Mapping):
        inner = ", ".join(f"{key(k)} = {value(v)}" for k, v in item.items())
        return f"{{ {inner} }}" if inner else "{}"
    if isinstance(item, Sequence):
        return "[" + ", ".join(value(v) for v in item) + "]"
    if isinstance(item, datetime.date | datetime.time):
        return item.isoformat()
    raise TypeError(f"TOML has no {type(item).__name__}")


def _number(number: float) -> str:
    if isinstance(number, int) or math.isfinite(number):
        return repr(number)
    return "nan" if math.isnan(number) else ("inf" if number > 0 else "-inf")
