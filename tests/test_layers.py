"""The shape of the code: imports go down only, `import rigpose` is light, functions are short."""

from __future__ import annotations

import ast
import json
import subprocess
import sys
import tomllib
from collections.abc import Iterator
from pathlib import Path

import numpy as np
import pytest

ROOT = Path(__file__).resolve().parent.parent
SOURCES = sorted((*ROOT.glob("rigpose/**/*.py"), *ROOT.glob("viewer/**/*.py")))
LAYERS = ("ground", "kernels", "model", "solve", "motion", "files", "desk", "cli")
"""From the bottom up. What stands beside them in the package (its door) may import them all."""


def imported(path: Path) -> Iterator[tuple[int, str]]:
    """Line and full name of everything that a module imports, inside functions too."""
    package = path.relative_to(ROOT).parent.parts
    for node in ast.walk(ast.parse(path.read_text(encoding="utf-8"))):
        if isinstance(node, ast.Import):
            yield from ((node.lineno, alias.name) for alias in node.names)
        elif isinstance(node, ast.ImportFrom):
            up = package[:len(package) - node.level + 1] if node.level else ()
            base = ".".join((*up, node.module or "")).strip(".")
            yield from ((node.lineno, f"{base}.{alias.name}") for alias in node.names)


def layer(name: str) -> int | None:
    """The layer of a dotted name, None outside the layers."""
    parts = name.split(".")
    inside = parts[0] == "rigpose" and len(parts) > 1 and parts[1] in LAYERS
    return LAYERS.index(parts[1]) if inside else None


def test_imports_go_down_only() -> None:
    wrong = []
    for path in ROOT.glob("rigpose/*/**/*.py"):
        own = layer(".".join(path.relative_to(ROOT).with_suffix("").parts))
        assert own is not None, f"{path} lies in no layer of {LAYERS}"
        for line, name in imported(path):
            top = name.split(".")[0]
            above = layer(name) if top == "rigpose" else None
            if top == "rigpose" and (above is None or above > own):
                wrong.append(f"{path.relative_to(ROOT)}:{line} imports {name}")
            if top == "rigpose_viewer" and LAYERS[own] != "cli":
                wrong.append(f"{path.relative_to(ROOT)}:{line} imports the viewer")
    assert wrong == []


def test_the_judge_stands_apart_from_the_solver() -> None:
    allowed = ("__future__", "collections", "dataclasses", "enum", "functools", "itertools",
               "math", "typing", "numpy", "rigpose.ground", "rigpose.model")
    names = [name for _, name in imported(ROOT / "rigpose/model/judge.py")]
    assert [name for name in names if not name.startswith(allowed)] == []


def test_importing_the_package_is_light() -> None:
    code = ("import json, sys, rigpose\n"
            "heavy = ('trimesh', 'pyglet', 'rich', 'click', 'tomlkit', 'hypothesis', 'pytest')\n"
            "print(json.dumps([name for name in heavy if name in sys.modules]))")
    run = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, check=True,
                         cwd=ROOT)
    assert json.loads(run.stdout) == []


def test_every_package_is_in_the_wheel() -> None:
    project = tomllib.loads((ROOT / "pyproject.toml").read_text(encoding="utf-8"))
    folders = {str(path.parent.relative_to(ROOT)).replace("/", ".")
               for path in ROOT.glob("rigpose/**/__init__.py")}
    listed = set(project["tool"]["setuptools"]["packages"])
    assert listed == folders | {"rigpose_viewer"}


def test_files_are_short() -> None:
    lengths = {path: len(path.read_text(encoding="utf-8").splitlines())
               for path in (*SOURCES, *ROOT.glob("tests/**/*.py"))}
    assert np.median([lengths[path] for path in SOURCES if lengths[path] > 1]) <= 200
    assert [f"{path.relative_to(ROOT)}: {n}" for path, n in lengths.items() if n > 600] == []


def bodies(path: Path) -> Iterator[int]:
    """The lines of each function's body, its docstring left out."""
    for node in ast.walk(ast.parse(path.read_text(encoding="utf-8"))):
        if not isinstance(node, ast.FunctionDef | ast.AsyncFunctionDef):
            continue
        body = node.body[1:] if ast.get_docstring(node) is not None else node.body
        if body:
            yield (body[-1].end_lineno or body[-1].lineno) - body[0].lineno + 1


def test_functions_are_short() -> None:
    lengths = [length for path in SOURCES for length in bodies(path)]
    assert np.median(lengths) <= 10
    assert np.percentile(lengths, 90) <= 35


@pytest.mark.parametrize("word", ["TODO", "FIXME", "except Exception", "except BaseException"])
def test_nothing_is_left_for_later(word: str) -> None:
    found = [str(path.relative_to(ROOT)) for path in SOURCES
             if word in path.read_text(encoding="utf-8")]
    assert found == []
