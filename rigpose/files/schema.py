"""The JSON Schema of a rig file, for editors that complete and check while one types."""

from __future__ import annotations

from typing import Any

import msgspec

from rigpose.model.spec import RigSpec


def json_schema() -> dict[str, Any]:
    """The schema (JSON Schema 2020-12) of a rig file, every key described.

    It covers the forms of values; names that must exist, lengths that must agree and the like
    are checked on loading only.

    >>> json_schema()["title"]
    'A rig file'
    """
    schema = msgspec.json.schema(RigSpec)
    return {"$schema": "https://json-schema.org/draft/2020-12/schema", "title": "A rig file",
            **schema}
