"""Rig files written and loaded, or refused."""

from __future__ import annotations

from pathlib import Path

import pytest

from rigpose.files.rigfile import load_rig
from rigpose.ground.errors import BadInput
from rigpose.model.rig import Rig

FRAME = """
[joints]
foot = { at = [0, 0], pin = true }
mast = { at = [0, 4], pin = true }
elbow = [3, 4]
hook = [6, 2]
loose = {}
[bones]
boom = ["foot", "elbow"]
fall = ["elbow", "hook"]
"""


def told(folder: Path, text: str, *, frame: str = FRAME, name: str = "crane.toml") -> str:
    """What loading says of a rig with these lines, which stand from line 2 on."""
    file = folder / name
    file.write_text(f"rigpose = 1\n{text}{frame}", encoding="utf-8")
    with pytest.raises(BadInput) as caught:
        load_rig(file)
    return str(caught.value)


def load(folder: Path, text: str) -> Rig:
    file = folder / "crane.toml"
    file.write_text(f"rigpose = 1\n{text}", encoding="utf-8")
    return load_rig(file)
