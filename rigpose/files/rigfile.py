"""Rig files: from a path to a checked `Rig`."""

from __future__ import annotations

from pathlib import Path

from rigpose.files.copies import Folder
from rigpose.files.document import read_document
from rigpose.model.assemble import assemble
from rigpose.model.record import all_kept
from rigpose.model.rig import Rig


def load_rig(path: str | Path) -> Rig:
    """Load a rig file, TOML or JSON, with the files that it names in its own folder.

    Lengths are in the rig's unit, angles in degrees. Raises BadInput with every problem found,
    up to 20, each with its file, line, key path, rule, what came and how to mend it.
    """
    file = Path(path)
    with all_kept():
        document = read_document(file)
        return assemble(document.data, name=file.stem, where=document.where,
                        outside=Folder.of(file), source=str(path))
