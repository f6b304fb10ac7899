"""What a newcomer sees first: the top level of the project, and the commands of the README."""

from __future__ import annotations

import re
import subprocess
from pathlib import Path

import pytest

ROOT = Path(__file__).resolve().parent.parent
TOP = {"README.md", "DEVELOPERS.md", "pyproject.toml", "rigpose", "viewer", "tests", "rigs"}


def test_the_top_level_holds_only_what_is_agreed() -> None:
    if not (ROOT / ".git").exists():
        pytest.skip("only a checkout knows which files belong to the project")
    listing = subprocess.run(["git", "-c", f"safe.directory={ROOT}", "ls-files", "-z"], cwd=ROOT,
                             capture_output=True, text=True, check=True).stdout
    tops = {name.split("/")[0] for name in listing.split("\0") if name}
    assert {name for name in tops if not name.startswith(".")} == TOP


@pytest.mark.parametrize("name", ["main job", "tests"])
def test_the_readme_has_each_command_as_one_line(name: str) -> None:
    """The form that `.ci/run` reads: a comment, then a fenced block of a single line."""
    lines = (ROOT / "README.md").read_text(encoding="utf-8").splitlines()
    marker = f"<!-- command: {name} -->"
    assert lines.count(marker) == 1
    at = lines.index(marker)
    assert (lines[at + 1], lines[at + 3]) == ("```sh", "```")
    assert lines[at + 2].strip()


def test_the_developers_guide_names_only_what_is_there() -> None:
    text = (ROOT / "DEVELOPERS.md").read_text(encoding="utf-8")
    layers = re.findall(r"^\| `(rigpose/\w+)` \| (.+) \|$", text, re.MULTILINE)
    assert {folder for folder, _ in layers} == {
        f"rigpose/{path.parent.name}" for path in ROOT.glob("rigpose/*/__init__.py")}
    for folder, holds in layers:
        named = [word for word in re.findall(r"`(\w+)`", holds) if word != "check"]
        missing = [name for name in named if not (ROOT / folder / f"{name}.py").exists()]
        assert missing == [], folder
    paths = re.findall(r"`((?:rigpose|tests|\.ci|model|solve|motion|files)/[\w./]+)`", text)
    lost = [path for path in paths
            if not ((ROOT / path).exists() or (ROOT / "rigpose" / path).exists())]
    assert lost == []
