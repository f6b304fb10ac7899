"""The command called in process, and what it leaves."""

from __future__ import annotations

import csv
import json
from pathlib import Path
from typing import Any

import pytest

from rigpose.cli.main import run

Capture = pytest.CaptureFixture[str]


def said(capsys: Capture, *words: str, code: int = 0) -> list[str]:
    """Run the command, require its exit code, and give the lines that it prints."""
    assert run(list(words)) == code
    out, err = capsys.readouterr()
    assert err == ""
    return out.splitlines()


def data(capsys: Capture, *words: str, code: int = 0) -> dict[str, Any]:
    """What it prints with --json."""
    found: dict[str, Any] = json.loads("\n".join(said(capsys, *words, "--json", code=code)))
    return found


def refused(capsys: Capture, *words: str) -> list[str]:
    """The lines of a refusal: exit code 2, nothing but messages, no traceback."""
    assert run(list(words)) == 2
    out, err = capsys.readouterr()
    assert out == ""
    assert "Traceback" not in err
    return err.splitlines()


def table(path: str | Path) -> list[list[str]]:
    with Path(path).open(encoding="utf-8", newline="") as file:
        return list(csv.reader(file))


def write(name: str, text: str) -> str:
    Path(name).write_text(text, encoding="utf-8")
    return name


def leftovers(folder: Path) -> list[str]:
    return [path.name for path in folder.iterdir() if path.name.endswith(".part")]
