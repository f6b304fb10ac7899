"""Names: which are allowed, which known one was meant, and how values are shown in messages."""

from __future__ import annotations

import difflib
import unicodedata
from collections.abc import Iterable

KeyPath = tuple[str | int, ...]
"""Where a value stands in a rig file: section, part, key, place in a list."""

LONGEST_NAME = 100
MOST_LOOKED_AT = 5000
_FORBIDDEN = "/=:"


def name_fault(name: str, *, slash: bool = False) -> tuple[str, str] | None:
    """Why a name is refused, as (rule, mend); None for a good one.

    ``slash`` allows ``/``, which stands in the names that copies give to their parts.
    """
    if name.isascii() and name.isidentifier() and len(name) <= LONGEST_NAME:
        return None
    return _form_fault(name) or _sign_fault(name, _FORBIDDEN.replace("/", "" if slash else "/"))


def _form_fault(name: str) -> tuple[str, str] | None:
    if not name:
        return "a name has at least one character", "give it a name"
    if len(name) > LONGEST_NAME:
        return f"a name has at most {LONGEST_NAME} characters", "shorten it"
    if name != name.strip():
        return "a name has no blanks at its ends", f"write {shown(name.strip())}"
    return None


def _sign_fault(name: str, forbidden: str) -> tuple[str, str] | None:
    for sign in name:
        if sign in forbidden:
            return f"a name has no `{sign}` in it", f"write {shown(name.replace(sign, '_'))}"
        if unicodedata.category(sign) in ("Cc", "Cs"):
            return "a name has no control characters", f"take out U+{ord(sign):04X}"
    composed = unicodedata.normalize("NFC", name)
    if composed != name:
        return "a name is in Unicode's composed form (NFC)", f"write {shown(composed)}"
    return None


def nearest(name: str, known: Iterable[str]) -> str | None:
    """The known name that is most like this one, if any is like it."""
    near = [k for k in known if abs(len(k) - len(name)) <= max(3, len(name) // 2)]
    folded = {k.casefold(): k for k in near[:MOST_LOOKED_AT]}
    found = difflib.get_close_matches(name.casefold(), folded, n=1, cutoff=0.6)
    return folded[found[0]] if found else None


def meant(name: str, known: Iterable[str]) -> str:
    """The mend for an unknown name: the nearest known one, or a few of those there are."""
    names = list(known)
    near = nearest(name, names)
    if near is not None:
        return f"did you mean {shown(near)}?"
    if not names:
        return "there are none here"
    some = ", ".join(shown(k) for k in names[:6])
    return f"there are {some}" + (" and others" if len(names) > 6 else "")


def shown(value: object, longest: int = 60) -> str:
    """A value as a file would have it, cut short where it is long."""
    text = _text(value)
    return text if len(text) <= longest else text[: longest - 1] + "…"


def _text(value: object) -> str:
    if value is None or isinstance(value, bool):
        return {None: "null", True: "true", False: "false"}[value]
    if isinstance(value, str):
        return '"' + "".join(_sign(c) for c in value[:200]) + '"'
    if isinstance(value, list | tuple):
        return "[" + ", ".join(_text(v) for v in value[:20]) + "]"
    if isinstance(value, dict):
        inner = ", ".join(f"{k} = {_text(v)}" for k, v in list(value.items())[:20])
        return "{ " + inner + " }" if inner else "{}"
    return _number_text(value) if isinstance(value, int | float) else str(value)


def _number_text(value: float) -> str:
    huge = isinstance(value, int) and abs(value) >= 10**60
    return "a whole number of more than 60 digits" if huge else repr(value)


def _sign(sign: str) -> str:
    if sign in '"\\':
        return "\\" + sign
    if unicodedata.category(sign) in ("Cc", "Cs"):
        return f"\\u{ord(sign):04x}"
    return sign


def path_text(path: KeyPath) -> str:
    """A key path for people: ``bones.stay.length``; names with dots or blanks are quoted."""
    text = ""
    for step in path:
        if isinstance(step, int):
            text += f"[{step}]"
        else:
            bare = step and not any(c in '."[]' or c.isspace() for c in step)
            text += ("." if text else "") + (step if bare else shown(step))
    return text
