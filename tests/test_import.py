"""`import rigpose` is light, and every public name is there when it is asked for."""

from __future__ import annotations

import json
import subprocess
import sys
from pathlib import Path

import pytest

import rigpose

ROOT = Path(__file__).resolve().parent.parent
HEAVY = ("trimesh", "pyglet", "rich", "click", "tomlkit")


def loaded_after(code: str) -> set[str]:
    """Names of the modules that a fresh interpreter has loaded after some code."""
    program = f"import json, sys\n{code}\nprint(json.dumps(sorted(sys.modules)))"
    run = subprocess.run([sys.executable, "-c", program], cwd=ROOT, capture_output=True, text=True,
                         check=True)
    return set(json.loads(run.stdout.splitlines()[-1]))


def test_importing_pulls_in_nothing_heavy() -> None:
    assert loaded_after("import rigpose").isdisjoint(HEAVY)


def test_baking_and_writing_pull_in_neither_meshes_nor_windows() -> None:
    """All of the library's main job: nothing of it shows tables or draws."""
    code = ("import rigpose as rp, tempfile, pathlib\n"
            "motion = rp.bake(rp.load_shot('rigs/quay_crane.shot.toml'))\n"
            "with tempfile.TemporaryDirectory() as folder:\n"
            "    rp.save_motion(motion, pathlib.Path(folder) / 'crane.csv')")
    assert loaded_after(code).isdisjoint(HEAVY)


def test_the_command_pulls_in_neither_meshes_nor_windows() -> None:
    assert loaded_after("import rigpose.cli.main").isdisjoint({"trimesh", "pyglet", "rich"})


@pytest.mark.parametrize("name", rigpose.__all__)
def test_every_public_name_is_there_and_described(name: str) -> None:
    found = getattr(rigpose, name)
    # A plain type alias, such as a callable's, has no text of its own.
    assert found.__module__.startswith("rigpose.") is (name != "Watch")
    assert name == "Watch" or found.__doc__
    assert name in dir(rigpose)


def test_a_name_that_is_not_there_is_an_attribute_error() -> None:
    with pytest.raises(AttributeError, match="module 'rigpose' has no attribute 'lift'"):
        rigpose.lift  # noqa: B018


def test_the_version_is_the_projects() -> None:
    project = (ROOT / "pyproject.toml").read_text(encoding="utf-8")
    assert f'version = "{rigpose.__version__}"' in project
