"""One part of a document into its typed description, with every fault of it noted."""

from __future__ import annotations

from collections.abc import Mapping
from functools import cache
from typing import TypeVar, get_args

import msgspec

from rigpose.model.names import KeyPath, shown
from rigpose.model.notes import Notes

SpecT = TypeVar("SpecT", bound=msgspec.Struct)


def decode(notes: Notes, path: KeyPath, raw: object, spec: type[SpecT]) -> SpecT | None:
    """The description of ``raw``, or None after noting all that is wrong with it."""
    try:
        return msgspec.convert(raw, spec)
    except msgspec.ValidationError:
        _explain(notes, path, raw, spec)
        return None


def fitting(raw: object, spec: type[msgspec.Struct]) -> dict[str, object]:
    """The keys of ``raw`` that are known and hold what they should; none where it is no table.

    So that one wrong key hides no mistake inside the others.
    """
    if not isinstance(raw, dict):
        return {}
    fields = _fields(spec)
    return {key: value for key, value in raw.items()
            if key in fields and _fits(value, fields[key].type)}


@cache
def _fields(spec: type[msgspec.Struct]) -> Mapping[str, msgspec.structs.FieldInfo]:
    return {f.encode_name: f for f in msgspec.structs.fields(spec)}


@cache
def _form(spec: type[msgspec.Struct]) -> str:
    return (spec.__doc__ or "").split(";")[0].strip()


@cache
def _wanted(spec: type[msgspec.Struct], key: str) -> str:
    """What a key must be, for people: the first part of its description in the schema."""
    kind = _fields(spec)[key].type
    texts = [m.description for m in getattr(kind, "__metadata__", ()) if m.description]
    return str(texts[0]).split(";", maxsplit=1)[0].rstrip(".") if texts else "of another kind"


def _explain(notes: Notes, path: KeyPath, raw: object, spec: type[msgspec.Struct]) -> None:
    """msgspec stops at the first fault; go through the keys one by one and note each."""
    if not isinstance(raw, dict):
        notes.add(path, f"must be {_form(spec)}", shown(raw))
        return
    fields = _fields(spec)
    for key in raw:
        if key not in fields:
            notes.unknown((*path, key), "key", key, fields)
        elif not _fits(raw[key], fields[key].type):
            inner = _inner(fields[key].type)
            if inner is not None and isinstance(raw[key], dict):
                _explain(notes, (*path, key), raw[key], inner)
            else:
                form = _wanted(spec, key) if inner is None else _form(inner)
                notes.add((*path, key), f"must be {form}", shown(raw[key]))
    for key, field in fields.items():
        if field.required and key not in raw:
            notes.add(path, f"needs the key `{key}`", "", f"`{key}` is {_wanted(spec, key)}")


def _inner(kind: object) -> type[msgspec.Struct] | None:
    """The struct inside an optional or annotated type, if there is one."""
    if isinstance(kind, type):
        return kind if issubclass(kind, msgspec.Struct) else None
    return next((s for s in map(_inner, get_args(kind)) if s is not None), None)


def _fits(value: object, kind: object) -> bool:
    try:
        msgspec.convert(value, kind)
    except msgspec.ValidationError:
        return False
    return True
