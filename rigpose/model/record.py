"""Frozen values of which a large rig has hundreds of thousands.

Made by msgspec they cost a tenth of what frozen dataclasses cost, and the garbage collector need
not walk over them: a record holds plain values and other records only, so none can be part of a
circle of references.
"""

from __future__ import annotations

import gc
from collections.abc import Iterator
from contextlib import contextmanager
from dataclasses import Field, fields, make_dataclass
from functools import cache
from typing import Any, ClassVar

import msgspec


@cache
def _fields_of(kind: type[msgspec.Struct]) -> dict[str, Field[Any]]:
    return {f.name: f for f in fields(make_dataclass(kind.__name__, kind.__struct_fields__))}


class _Fields:
    """What `dataclasses.replace` and its like look for."""

    def __get__(self, record: object, kind: type[msgspec.Struct]) -> dict[str, Field[Any]]:
        return _fields_of(kind)


class Record(msgspec.Struct, frozen=True, gc=False):
    """A frozen value. `dataclasses.replace`, `fields` and `asdict` take it like a dataclass.

    ``unshown`` names fields that its text leaves out.
    """

    __dataclass_fields__: ClassVar[dict[str, Field[Any]]] = _Fields()  # type: ignore[assignment]
    unshown: ClassVar[frozenset[str]] = frozenset()

    def __repr__(self) -> str:
        shown = (f"{name}={getattr(self, name)!r}" for name in self.__struct_fields__
                 if name not in self.unshown)
        return f"{type(self).__name__}({', '.join(shown)})"


@contextmanager
def all_kept() -> Iterator[None]:
    """The garbage collector waits while very many values are made that all stay.

    It would walk over all of them again and again, which takes as long as making them.
    """
    waits = gc.isenabled()
    gc.disable()
    try:
        yield
    finally:
        if waits:
            gc.enable()
