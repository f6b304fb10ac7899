"""`rigpose bake SHOT --all-branches`: every row of a shot, side by side in one file."""

from __future__ import annotations

from collections.abc import Sequence
from typing import Any

import click
import numpy as np

from rigpose.cli.show import counted, event_dict, print_json
from rigpose.files.csvfile import Layout, RigWriter, ValuesWriter
from rigpose.files.motionfile import to_file, values_table
from rigpose.files.scene import Outlet
from rigpose.ground.words import State
from rigpose.motion.bake import branch_map
from rigpose.motion.branchset import Branches
from rigpose.motion.shot import Shot
from rigpose.motion.why import why_nothing


def bake_all(shot: Shot, way: Outlet, out: str | None, values: str | None, layout: Layout,
             as_json: bool) -> int:
    """Write every row; the exit code."""
    found = branch_map(shot)
    why = why_nothing(found)
    if out is not None and len(found):
        _write(found, way, out, layout)
    if values is not None and len(found):
        _write_values(found, way, values)
    if as_json:
        print_json(_dict(found, why, out if len(found) else None))
    else:
        _tell(found, why)
        tell_files(len(found.frames), way, [out, values], bool(len(found)))
    return 0 if not _dead(found) and found.found.whole else 1


def _dead(found: Branches) -> int:
    """Frames in which no row has a pose."""
    return int((~(found.state > State.NONE).any(axis=0)).sum())


def _write(found: Branches, way: Outlet, out: str, layout: Layout) -> None:
    with RigWriter(out, found.rig, layout=layout, branches=True) as writer:
        for k, name in enumerate(found.names):
            places = to_file(found.rig, way, found.positions[k])
            writer.block(way.number(found.frames), places, name)


def _write_values(found: Branches, way: Outlet, values: str) -> None:
    names = found.take([0]).motion().value_names
    with ValuesWriter(values, names, branches=True) as writer:
        for branch in found:
            table = values_table(branch.motion(), way)
            writer.block(way.number(found.frames), table, branch.names[0])


def _dict(found: Branches, why: Sequence[str], out: str | None) -> dict[str, Any]:
    """The keys of a bake of one row, and ``branches``; `branch` and `spans` speak of one only."""
    return {
        "frames": len(found.frames), "branch": None, "found": found.found.value, "spans": [],
        "branches": [{"name": name, "living": living,
                      "events": [event_dict(found.rig, e) for e in events]}
                     for name, living, events in zip(found.names, _living(found), _events(found),
                                                     strict=True)],
        "notes": found.notes, "why": why, "problems": [], "out": out,
    }


def _living(found: Branches) -> list[int]:
    """In how many frames each row has a pose."""
    return [int(n) for n in np.sum(found.state > State.NONE, axis=1)]


def _events(found: Branches) -> Sequence[Sequence[Any]]:
    return found.events or [()] * len(found)


def _tell(found: Branches, why: Sequence[str]) -> None:
    frames = len(found.frames)
    click.echo(f"{found.rig.name}: {counted(len(found), 'branch', 'branches')}, "
               f"{found.found.value}")
    for name, living in zip(found.names, _living(found), strict=True):
        lives = "every frame" if living == frames else f"{living} of {frames} frames"
        click.echo(f"  {name}: {lives}")
    if _dead(found):
        click.echo(f"  {_dead(found)} of {frames} frames have no pose at all")
    for line in (*why, *found.notes):
        click.echo(f"  {line}")


def tell_files(frames: int, way: Outlet, files: Sequence[str | None], written: bool) -> None:
    """Which files were written, and what their numbers are in."""
    for file in files:
        if file is not None:
            click.echo(f"wrote {file}" if written else f"{file} is not written")
    click.echo(f"{counted(frames, 'frame')}, {way.file}")
