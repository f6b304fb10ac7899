"""`rigpose pose RIG`: every pose for given drives and targets."""

from __future__ import annotations

from collections.abc import Mapping
from typing import Any

import click
import numpy as np

from rigpose.cli.given import as_json, frame_options, read_bends, read_drives, read_targets
from rigpose.cli.show import print_json, print_table
from rigpose.files.csvfile import CsvWriter
from rigpose.files.motionfile import to_file
from rigpose.files.rigfile import load_rig
from rigpose.files.scene import outlet
from rigpose.ground.budget import Budget
from rigpose.ground.words import State
from rigpose.motion.branches import find_branches
from rigpose.motion.branchset import Branches
from rigpose.motion.nearest import nearest_branch

SHOWN = 24


@click.command("pose")
@click.argument("rig")
@click.option("--drive", "drives", multiple=True, metavar="NAME=VALUE",
              help="Drive a crank (degrees), ram or rail; NAME=FIRST:LAST:COUNT over frames.")
@click.option("--target", "targets", multiple=True, metavar="JOINT=X,Y",
              help="Where a joint must be; JOINT.y=2 gives one coordinate.")
@click.option("--bend", "bends", multiple=True, metavar="JOINT=SIDE",
              help="Only branches with this bend: left, right, before, after or straight.")
@click.option("--nearest", is_flag=True, help="Only the one nearest to rest, without listing all.")
@click.option("--no-mirrors", is_flag=True, help="One of two mirror images only.")
@click.option("--most", type=click.IntRange(1), default=4096, show_default=True,
              help="How many branches to hold.")
@click.option("--out", metavar="FILE", default=None, help="Write joint positions as CSV.")
@frame_options
@as_json
def pose_command(rig: str, out: str | None, as_json: bool, **asked: Any) -> int:
    """Find every branch that meets the drives and targets, nearest to rest first."""
    loaded = load_rig(rig)
    drives, targets = read_drives(asked["drives"]), read_targets(loaded, asked["targets"])
    if asked["nearest"]:
        found = nearest_branch(loaded, drives, targets)
    else:
        found = find_branches(loaded, drives, targets, budget=Budget(poses=asked["most"]),
                              mirrors=not asked["no_mirrors"])
    bends = read_bends(asked["bends"])
    if bends:
        found = found.take(found.fitting(bends))
    if out is not None and len(found):
        _write(found, out, asked["unit"], asked["up"])
    if as_json:
        print_json(pose_dict(found))
    else:
        _tell(found, out)
    return 0 if len(found) and (found.found.whole or asked["nearest"]) else 1


def _write(found: Branches, out: str, unit: str | None, up: str | None) -> None:
    from fractions import Fraction

    way = outlet(found.rig, Fraction(24), unit=unit, up=up)
    with CsvWriter(out, found.joints, branches=True, names=found.rig.names) as writer:
        for k, name in enumerate(found.names):
            writer.block(found.frames, to_file(found.rig, way, found.positions[k]), name)


def pose_dict(found: Branches) -> Mapping[str, Any]:
    """What `--json` prints."""
    single = len(found.frames) == 1
    mirrors = found.mirror_of if len(found) else ()
    return {
        "found": found.found.value, "name": found.rig.name, "joints": found.joints,
        "count": found.count, "groups": found.groups, "notes": found.notes,
        "branches": [{
            "name": found.names[k], "bends": found.names.bends(k),
            "margin": found.margin[k, 0] if single else found.margin[k],
            "miss": _miss(found, k) if single else [_miss(found, k, f)
                                                    for f in range(len(found.frames))],
            "mirror_of": mirrors[k],
            "positions": found.positions[k, 0] if single else found.positions[k],
        } for k in range(len(found))],
    }


def _miss(found: Branches, k: int, frame: int = 0) -> float:
    """The largest distance between a target and its joint."""
    worst = 0.0
    for joint, place in found.knowns.targets.items():
        gap = found.positions[k, frame, found.rig.index[joint]] - place[frame]
        worst = max(worst, float(np.sqrt(np.nansum(gap * gap))))
    return worst


def _tell(found: Branches, out: str | None) -> None:
    rows = []
    for k in range(min(len(found), SHOWN)):
        live = found.state[k] > State.NONE
        least = float(np.nanmin(found.margin[k])) if live.any() else float("nan")
        rows.append([str(k + 1), found.names[k], f"{least:.3f}",
                     *([] if len(live) == 1 else [str(int(live.sum()))])])
    columns = ["", "branch", "margin"] + ([] if len(found.frames) == 1 else ["frames"])
    if rows:
        print_table(f"{found.rig.name}: {len(found)} branches, {found.found.value}", columns, rows)
    else:
        click.echo(f"{found.rig.name}: no branch meets these drives and targets "
                   f"({found.found.value})")
    if len(found) > SHOWN:
        click.echo(f"… and {len(found) - SHOWN} more; --out writes all of them")
    if len(found.groups) > 1:
        click.echo(f"{len(found.groups)} independent groups: "
                   + "; ".join(", ".join(g) for g in found.groups))
    for note in found.notes:
        click.echo(note)
    if out is not None and len(found):
        click.echo(f"wrote {out}")
