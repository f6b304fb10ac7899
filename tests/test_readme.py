"""The README is true: its examples load, its commands print what it shows, its tables are whole.

Everything runs in an empty folder that holds nothing but a copy of rigs/, as a reader would.
Numbers that are shown are compared as numbers: another machine rounds the last digit otherwise.
"""

from __future__ import annotations

import json
import math
import re
import shlex
import shutil
from collections.abc import Iterator
from pathlib import Path
from typing import Any

import msgspec
import pytest

from rigpose.cli.main import run
from rigpose.files.flat import flat_text
from rigpose.files.rigfile import load_rig
from rigpose.files.schema import rig_schema, shot_schema
from rigpose.files.shotfile import load_shot
from rigpose.model.make import make_rig
from rigpose.model.rig import Rig
from rigpose.model.spec import PartSpec

ROOT = Path(__file__).resolve().parent.parent
README = (ROOT / "README.md").read_text(encoding="utf-8")
NUMBER = re.compile(r"-?\d+(?:\.\d+)?(?:e[+-]?\d+)?")


def blocks(kind: str) -> list[tuple[str, str]]:
    """The text of each fenced block of a kind, and the file name that the line before it has."""
    found = re.findall(rf"([^\n]*)\n\n```{kind}\n(.*?)```", README, re.DOTALL)
    return [(text, (re.findall(r"`([^`]+)`", before) or [""])[-1]) for before, text in found]


def section(title: str) -> str:
    """What stands under a heading."""
    match = re.search(rf"^## {title}\n(.*?)(?=^## |\Z)", README, re.DOTALL | re.MULTILINE)
    assert match is not None, f"no section {title}"
    return match[1]


def rows(title: str) -> Iterator[list[str]]:
    """The cells of a section's table, without its head."""
    lines = [line for line in section(title).splitlines() if line.startswith("|")]
    for line in lines[2:]:
        yield [cell.strip() for cell in line.strip("|").split(" | ")]


@pytest.fixture
def reader(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> Path:
    """A folder with rigs/ and with the files that the README says to save."""
    shutil.copytree(ROOT / "rigs", tmp_path / "rigs")
    for text, name in (*blocks("toml"), *blocks("csv")):
        assert re.fullmatch(r"\w+(\.shot)?\.(toml|csv)", name), f"which file is this?\n{text}"
        (tmp_path / name).write_text(text, encoding="utf-8")
    monkeypatch.chdir(tmp_path)
    return tmp_path


def commands() -> list[tuple[list[str], list[str]]]:
    """Every command shown, as words, with the lines that it is shown to print."""
    shown: list[tuple[list[str], list[str]]] = []
    for text, _ in blocks("console"):
        for line in text.splitlines():
            if line.startswith("$ "):
                shown.append((shlex.split(line[2:]), []))
            else:
                shown[-1][1].append(line)
    return shown


def same(line: str, shown: str) -> bool:
    """Equal but for the last digits of numbers; amounts of rounding only have to be tiny."""
    if NUMBER.sub("#", line) != NUMBER.sub("#", shown):
        return False
    pairs = zip(map(float, NUMBER.findall(line)), map(float, NUMBER.findall(shown)), strict=True)
    return all(math.isclose(a, b, rel_tol=1e-12, abs_tol=1e-14) for a, b in pairs)


def test_every_toml_example_loads(reader: Path) -> None:
    names = [name for _, name in blocks("toml")]
    assert len(names) >= 2
    for name in names:
        if name.endswith(".shot.toml"):
            assert load_shot(reader / name).keys
        else:
            assert load_rig(reader / name).joints


@pytest.mark.usefixtures("reader")
def test_every_command_prints_what_is_shown(capsys: pytest.CaptureFixture[str]) -> None:
    for words, shown in commands():
        if words[0] == "head":
            lines = Path(words[2]).read_text(encoding="utf-8").splitlines()
            printed = lines[:abs(int(words[1]))]
        else:
            assert words[0] == "rigpose"
            code = run(words[1:])
            printed = capsys.readouterr().out.splitlines()
            short = re.search("without a pose|nothing meets", "\n".join(printed)) is not None
            assert code == (1 if short else 0)
        assert len(printed) == len(shown), "\n".join([" ".join(words), *printed])
        wrong = [(a, b) for a, b in zip(printed, shown, strict=True) if not same(a, b)]
        assert wrong == []


@pytest.mark.usefixtures("reader")
def test_the_main_job_is_a_command_of_ours() -> None:
    line = re.search(r"<!-- command: main job -->\n```sh\n(.*)\n```", README)
    assert line is not None
    last = shlex.split(line[1].split("&&")[-1])
    assert last[0] == ".venv/bin/rigpose"
    assert run(last[1:]) == 0
    assert len(Path(last[-1]).read_text(encoding="utf-8").splitlines()) == 1 + 72 * 6


def test_the_lines_of_the_library_run(reader: Path, capsys: pytest.CaptureFixture[str]) -> None:
    (text, _), = blocks("python")
    assert len(text.strip().splitlines()) == 10
    names: dict[str, Any] = {}
    exec(compile(text, "README.md", "exec"), names)
    assert (reader / "q010.csv").exists()
    assert names["motion"].ok
    printed = capsys.readouterr().out.splitlines()
    assert "quay crane" in printed[0]
    # What was saved in centimetres reads back as it was in metres.
    assert float(printed[-1]) < 1e-13


def keys(schema: dict[str, Any], top: dict[str, Any]) -> set[str]:
    """All key paths of a schema: `bones`, `bones.ends`, …; what every part may say left out."""
    common = set(msgspec.json.schema(PartSpec)["$defs"]["PartSpec"]["properties"])
    found = set()
    for name, value in top["properties"].items():
        found.add(name)
        for part in set(re.findall(r"#/\$defs/(\w+)", json.dumps(value))):
            inner = set(schema["$defs"][part]["properties"])
            found |= {f"{name}.{key}" for key in inner - (common if common <= inner else set())}
    return found


def documented(title: str) -> set[str]:
    return {key for row in rows(title) for key in re.findall(r"`([^`]+)`", row[0])}


def test_every_key_of_a_rig_file_is_in_the_table_and_no_other() -> None:
    schema = rig_schema()
    top = schema["$defs"][schema["$ref"].rsplit("/", maxsplit=1)[-1]]
    parts = {f"PART.{key}" for key in msgspec.json.schema(PartSpec)["$defs"]["PartSpec"]
             ["properties"]}
    assert documented("The rig file") == keys(schema, top) | parts


def test_every_key_of_a_shot_file_is_in_the_table_and_no_other() -> None:
    schema = shot_schema()
    top = schema["$defs"][schema["$ref"].rsplit("/", maxsplit=1)[-1]]
    assert documented("The shot file") == keys(schema, top)


def test_every_verb_and_option_is_told_and_no_other(capsys: pytest.CaptureFixture[str]) -> None:
    assert run(["--help"]) == 0
    verbs = set(re.findall(r"^  (\w+)  ", capsys.readouterr().out.split("Commands:")[1],
                           re.MULTILINE))
    told = section("The command")
    assert {words.split()[1] for words in re.findall(r"`(rigpose [^`]+)`", told)} == verbs
    options = set()
    for verb in verbs:
        assert run([verb, "--help"]) == 0
        options |= set(re.findall(r"^  (?:-\w, )?(--[\w-]+)", capsys.readouterr().out,
                                  re.MULTILINE))
    shown = set(re.findall(r"`(--[\w-]+)", told))
    assert options - {"--help"} - shown == set()
    assert shown - options == set()


def test_every_rig_is_listed() -> None:
    machines = {path.stem for path in (ROOT / "rigs").glob("*.toml")
                if not path.name.endswith(".shot.toml")}
    listed = {re.findall(r"`(\w+)`( \*)?", row[0])[0] for row in rows("Rigs of Lantern Quay")}
    assert {name for name, _ in listed} == machines
    assert {name for name, star in listed if star} == {
        path.name.removesuffix("_stuck.shot.toml")
        for path in (ROOT / "rigs").glob("*_stuck.shot.toml")}


@pytest.mark.usefixtures("reader")
@pytest.mark.parametrize(("verb", "words"), [
    ("check", ["signal_arm.toml"]), ("pose", ["signal_arm.toml", "--drive", "wheel=90"]),
    ("bake", ["signal_arm.shot.toml"])])
def test_the_keys_to_rely_on_are_there(verb: str, words: list[str],
                                       capsys: pytest.CaptureFixture[str]) -> None:
    assert run([verb, *words, "--json"]) == 0
    assert relied_on(verb) <= paths(json.loads(capsys.readouterr().out))


def relied_on(verb: str) -> set[str]:
    """The keys that the paragraph above the table promises."""
    told = re.search(rf"`{verb}`:((?:\s+`\w+`)+)", section("JSON"))
    keys = set(re.findall(r"`(\w+)`", told[1])) if told else set()
    each = re.search(r"branch with((?:\s+`\w+`)+)", section("JSON"))
    assert each is not None
    return keys | ({f"branches.{key}" for key in re.findall(r"`(\w+)`", each[1])}
                   if verb == "pose" else set())


def paths(data: dict[str, Any]) -> set[str]:
    """All key paths of a JSON document; what is keyed by parts' names counts as one value."""
    found = set()
    for key, value in data.items():
        found.add(key)
        inner = [value] if isinstance(value, dict) else value if isinstance(value, list) else []
        if key not in ("moved", "bends", "values"):
            found |= {f"{key}.{path}" for item in inner if isinstance(item, dict)
                      for path in paths(item)}
    return found


def odd_rigs() -> dict[str, Rig]:
    """Rigs of which `check` has more to say than of good ones."""
    pinned = {"hub": {"at": [0, 0], "pin": True}, "post": {"at": [2, 0], "pin": True},
              "far": {"at": [5.0003, 0], "pin": True}}
    wheels = {f"wheel{k}": [hub, f"pin{k}"] for k, hub in enumerate(pinned)}
    places: dict[str, Any] = {f"pin{k}": [x + 0.6, 0.8] for k, x in enumerate((0, 2, 5))}
    return {"rounded": make_rig(pinned | places, wheels, plates={"rod": list(places)}),
            "open": make_rig(pinned, {"strut": {"ends": ["hub", "post"], "length": 1.5}})}


@pytest.mark.parametrize(("verb", "calls"), [
    ("check", ["rigs/quay_engine.toml", "rounded.toml", "open.toml"]),
    ("pose", ["signal_arm.toml --drive wheel=90", "signal_arm.toml --target tip.y=95",
              "signal_arm.toml"]),
    ("bake", ["rigs/quay_engine.shot.toml", "rigs/bell_rocker_stuck.shot.toml",
              "signal_arm.shot.toml --all-branches", "signal_arm.toml"]),
    ("flat", ["signal_arm.toml"]), ("start", ["places.csv"])])
def test_every_key_of_the_json_is_told_and_no_other(
        reader: Path, verb: str, calls: list[str], capsys: pytest.CaptureFixture[str]) -> None:
    for name, rig in odd_rigs().items():
        (reader / f"{name}.toml").write_text(flat_text(rig), encoding="utf-8")
    found: set[str] = set()
    for call in calls:
        assert run([verb, *call.split(), "--json"]) in (0, 1, 2)
        found |= paths(json.loads(capsys.readouterr().out))
    told, everywhere = relied_on(verb), set()
    for cell, _ in rows("JSON"):
        who, _, names = cell.partition(": ")
        keys = set(re.findall(r"`([^`]+)`", names))
        everywhere |= keys if who == "all" else set()
        told |= keys if who == verb else set()
    heads = {path.rpartition(".")[0] for path in told | everywhere}
    assert found - heads - everywhere == told - heads - everywhere
    assert "out" in found


def test_it_says_nothing_that_nobody_asked_for() -> None:
    assert len(README.splitlines()) <= 400
    assert "shields.io" not in README
    assert "!" not in re.sub(r"<!--.*?-->|```.*?```", "", README, flags=re.DOTALL)


@pytest.mark.parametrize("name", ["README.md", "DEVELOPERS.md"])
def test_links_lead_somewhere(name: str) -> None:
    text = (ROOT / name).read_text(encoding="utf-8")
    for target in re.findall(r"\]\(([^)#]+)\)", text):
        assert target.startswith("https://") or (ROOT / target).exists(), target
