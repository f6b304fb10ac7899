"""`rigpose pose RIG`: every pose for given drives and targets."""

from __future__ import annotations

from collections.abc import Mapping
from fractions import Fraction
from typing import Any

import click
import numpy as np

from rigpose.cli.given import as_json, frame_options, keep_inputs, read_given, the_rig
from rigpose.cli.show import counted, known_joints, print_json, print_table
from rigpose.files.csvfile import RigWriter, own_places
from rigpose.files.motionfile import to_file
from rigpose.files.scene import Outlet, outlet
from rigpose.ground.budget import Budget
from rigpose.ground.words import State
from rigpose.motion.branches import find_branches
from rigpose.motion.branchset import Branches
from rigpose.motion.nearest import nearest_branch
from rigpose.motion.why import why_nothing

SHOWN = 24
MOST_GAUGES = 6


@click.command("pose", short_help="Find every pose for given drives and targets.")
@click.argument("rig")
@click.option("--drive", "drives", multiple=True, metavar="NAME=VALUE",
              help="Drive a crank (degrees), ram or rail (the rig's unit); "
              "NAME=FIRST:LAST:COUNT for even steps over frames.")
@click.option("--target", "targets", multiple=True, metavar="JOINT=X,Y",
              help="Where a joint must be; JOINT.y=2 gives one coordinate.")
@click.option("--bend", "bends", multiple=True, metavar="JOINT=SIDE",
              help="Only branches that bend so: left, right or straight; on a rail before, "
              "after or straight.")
@click.option("--nearest", is_flag=True,
              help="Only the branch nearest to rest, found without listing all.")
@click.option("--no-mirrors", is_flag=True, help="Only one of two mirror images.")
@click.option("--most", type=click.IntRange(1), default=4096, show_default=True,
              help="How many branches to hold.")
@click.option("--out", metavar="FILE", default=None,
              help="Write the joints' positions as CSV, with a column `branch`.")
@frame_options
@as_json
def pose_command(rig: str, out: str | None, as_json: bool, **asked: Any) -> int:
    """Find every branch that meets the drives and targets, nearest to rest first."""
    loaded = the_rig(rig)
    keep_inputs({"the rig": rig}, {"--out": out})
    way = outlet(loaded, Fraction(24), unit=asked["unit"], up=asked["up"])
    drives, targets, bends = read_given(loaded, asked["drives"], asked["targets"], asked["bends"])
    if asked["nearest"]:
        every = nearest_branch(loaded, drives, targets)
    else:
        every = find_branches(loaded, drives, targets, budget=Budget(poses=asked["most"]),
                              mirrors=not asked["no_mirrors"])
    found = every.take(every.fitting(bends)) if bends else every
    written = out if out is not None and len(found) else None
    if written is not None:
        _write(found, written, way)
    why = why_nothing(every)
    if as_json:
        print_json({**pose_dict(found), "why": why, "out": written})
    elif len(found):
        _tell(found, written)
    else:
        _tell_nothing(every, bends, why, out)
    return 0 if len(found) and (found.found.whole or asked["nearest"]) else 1


def _write(found: Branches, out: str, way: Outlet) -> None:
    with RigWriter(out, found.rig, branches=True) as writer:
        for k, name in enumerate(found.names):
            writer.block(found.frames, to_file(found.rig, way, found.positions[k]), name)


def pose_dict(found: Branches) -> Mapping[str, Any]:
    """What `--json` prints. Over several frames the numbers of a branch are lists."""
    frames = slice(None) if len(found.frames) > 1 else 0
    mirrors = found.mirror_of if len(found) else ()
    return {
        "found": found.found.value, "name": found.rig.name, "joints": found.rig.own_joints,
        "count": found.count, "groups": [known_joints(found.rig, g) for g in found.groups],
        "notes": found.notes,
        "branches": [{
            "name": found.names[k], "bends": found.names.bends(k),
            "margin": found.margin[k, frames], "miss": _miss(found, k)[frames],
            "mirror_of": mirrors[k], "values": _values(found, k, frames),
            "positions": own_places(found.rig, found.positions[k, frames]),
        } for k in range(len(found))],
    }


def _miss(found: Branches, k: int) -> np.ndarray:
    """The largest distance between a target and its joint, (n_frames,)."""
    worst = np.where(found.state[k] > State.NONE, 0.0, np.nan)
    for joint, place in found.knowns.targets.items():
        gap = np.nan_to_num(found.positions[k, :, found.rig.index[joint]] - place)
        worst = np.maximum(worst, np.sqrt((gap * gap).sum(axis=-1)))
    return worst


def _values(found: Branches, k: int, frames: slice | int) -> Mapping[str, Any]:
    """Drives, gauges and limit angles by name."""
    motion = found.take([k]).motion()
    return {name: motion.value(name)[frames] for name in motion.value_names}


def _tell(found: Branches, out: str | None) -> None:
    frames = len(found.frames)
    over = f" over {frames} frames" if frames > 1 else ""
    gauges = _gauges(found) if frames == 1 else []
    rows = []
    for k in range(min(len(found), SHOWN)):
        live = found.state[k] > State.NONE
        least = float(np.nanmin(found.margin[k])) if live.any() else float("nan")
        values = _values(found, k, 0) if gauges else {}
        rows.append([str(k + 1), found.names[k], f"{least:.3f}",
                     *([str(int(live.sum()))] if frames > 1 else []),
                     *[f"{values[name]:.6g}" for name in gauges]])
    columns = ["", "branch", "margin", *(["frames"] if frames > 1 else []), *gauges]
    click.echo(f"{found.rig.name}: {counted(len(found), 'branch', 'branches')}{over}, "
               f"{found.found.value}")
    print_table(columns, rows)
    if len(found) > SHOWN:
        click.echo(f"and {len(found) - SHOWN} more; --out or --json gives all of them")
    _tell_more(found)
    if out is not None:
        click.echo(f"wrote {out}")


def _gauges(found: Branches) -> list[str]:
    """Drives that aren't driven: what a person wants to read off, so not the rails on which the
    helper joints of a slider run."""
    rig = found.rig
    helpers = {r.name for r in rig.rails if r.joint in rig.helper_joints}
    free = [name for name in rig.drive_names if name not in {*found.knowns.drives, *helpers}]
    return free[:MOST_GAUGES]


def _tell_more(found: Branches) -> None:
    if len(found.groups) > 1:
        click.echo("independent groups, each with branches of its own:")
    for k, every in enumerate(found.groups if len(found.groups) > 1 else ()):
        group = known_joints(found.rig, every)
        joints = ", ".join(group[:6]) + (", …" if len(group) > 6 else "")
        ways = len(np.unique(found.choice[:, k])) if found.found.whole else 0
        click.echo(f"  {joints}" + (f": {counted(ways, 'branch', 'branches')}" if ways else ""))
    for note in found.notes:
        click.echo(note)


def _tell_nothing(every: Branches, bends: Mapping[str, str], why: tuple[str, ...],
                  out: str | None) -> None:
    if len(every):
        asked = " ".join(f"{joint}:{side}" for joint, side in bends.items())
        names = ", ".join(every.names[:6]) + (", …" if len(every) > 6 else "")
        click.echo(f"{every.rig.name}: no branch is {asked}; there are {names}")
    else:
        cut = "" if every.found.whole else f" ({every.found.value})"
        click.echo(f"{every.rig.name}: nothing meets these drives and targets{cut}")
        for reason in why:
            click.echo(f"  {reason}")
    _tell_more(every)
    if out is not None:
        click.echo(f"{out} is not written")
