"""Long rigs of 10,000 and 100,000 joints: loaded, checked, planned and posed, each in a process of
its own; how time grows, how much memory it takes and how well lengths are held.

python bench_scale.py [mast|lift|spire JOINTS json|toml]
"""

from __future__ import annotations

import json
import resource
import subprocess
import sys
import tempfile
import time
import tomllib
from collections.abc import Callable
from pathlib import Path
from typing import TypeVar

sys.path.insert(0, str(Path(__file__).resolve().parents[1]))

from longrigs import DRIVES, LONG, Document

import rigpose as rp
from rigpose.solve.planner import plan_for

T = TypeVar("T")
STAGES = ("load", "check", "plan", "pose")


def written(document: Document, file: Path) -> None:
    """As JSON, or as TOML with a part a line."""
    if file.suffix == ".json":
        file.write_text(json.dumps(document), encoding="utf-8")
        return
    lines = [f"{k} = {json.dumps(v)}" for k, v in document.items() if not isinstance(v, dict)]
    for section, parts in document.items():
        if isinstance(parts, dict):
            lines += [f"[{section}]", *(f"{name} = {_toml(part)}" for name, part in parts.items())]
    file.write_text("\n".join(lines) + "\n", encoding="utf-8")


def _toml(part: object) -> str:
    if isinstance(part, dict):
        return "{ " + ", ".join(f"{k} = {_toml(v)}" for k, v in part.items()) + " }"
    return json.dumps(part)


def measured(kind: str, joints: int, form: str) -> None:
    """One rig from file to pose; prints the seconds of each stage as JSON."""
    with tempfile.TemporaryDirectory() as folder:
        file = Path(folder) / f"long.{form}"
        written(LONG[kind](joints), file)
        took: dict[str, float] = {}

        def timed(stage: str, work: Callable[[], T]) -> T:
            start = time.perf_counter()
            result = work()
            took[stage] = time.perf_counter() - start
            return result

        text = file.read_text(encoding="utf-8")
        timed("parse", lambda: json.loads(text) if form == "json" else tomllib.loads(text))
        rig = timed("load", lambda: rp.load_rig(file))
    drives = DRIVES[kind]
    report = timed("check", lambda: rp.check(rig))
    timed("plan", lambda: plan_for(rig, frozenset(drives), frozenset()))
    found = timed("pose", lambda: rp.nearest_branch(rig, drives))
    worst = rp.judge(rig, found.positions, found.size).worst(found.redundant)[0]
    peak = resource.getrusage(resource.RUSAGE_SELF).ru_maxrss / 2**20
    print(json.dumps({**took, "freedoms": report.freedoms, "found": found.found.value,
                      "poses": len(found), "worst": worst, "peak": peak}))


def shown(kind: str, joints: int, form: str) -> float:
    """Runs one rig in a process of its own; the seconds of all stages (parsing is in loading)."""
    run = subprocess.run([sys.executable, __file__, kind, str(joints), form], check=True,
                         capture_output=True, text=True)
    told = json.loads(run.stdout)
    total = sum(told[stage] for stage in STAGES)
    stages = ", ".join(f"{stage} {told[stage]:.2f}" for stage in STAGES)
    print(f"{kind} of {joints:,} joints from {form}: {total:.2f} s ({stages}; of loading, parsing "
          f"{told['parse']:.2f}), {told['peak']:.2f} GiB; freedoms {told['freedoms']}, "
          f"{told['poses']} pose, {told['found']}, lengths off by {told['worst']:.0e} of the size",
          flush=True)
    return float(total)


if __name__ == "__main__":
    if len(sys.argv) > 1:
        measured(sys.argv[1], int(sys.argv[2]), sys.argv[3])
    else:
        for name in LONG:
            few, many = shown(name, 10_000, "json"), shown(name, 100_000, "json")
            print(f"{name}: {many / few:.1f} times as long for ten times the joints")
            shown(name, 100_000, "toml")
