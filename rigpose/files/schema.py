"""The JSON Schemas of rig and shot files, for editors that complete and check while one types."""

from __future__ import annotations

from typing import Any

import msgspec

from rigpose.files.shotspec import ShotForm
from rigpose.model.spec import RigSpec


def rig_schema() -> dict[str, Any]:
    """The schema (JSON Schema 2020-12) of a rig file, every key described.

    It covers the forms of values; names that must exist, lengths that must agree and the like
    are checked on loading only.

    >>> rig_schema()["title"]
    'A rig file'
    """
    return _schema(RigSpec, "A rig file")


def shot_schema() -> dict[str, Any]:
    """The schema of a shot file, in the same way.

    >>> shot_schema()["title"]
    'A shot file'
    """
    return _schema(ShotForm, "A shot file")


def schema_text(schema: dict[str, Any]) -> str:
    """A schema as the text of a JSON file."""
    return msgspec.json.format(msgspec.json.encode(schema), indent=2).decode() + "\n"


def _schema(spec: type[msgspec.Struct], title: str) -> dict[str, Any]:
    return {"$schema": "https://json-schema.org/draft/2020-12/schema", "title": title,
            **msgspec.json.schema(spec)}
