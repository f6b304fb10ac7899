"""`rigpose bake SHOT`: a shot's joint positions, frame by frame."""

from __future__ import annotations

from collections.abc import Mapping
from contextlib import ExitStack
from fractions import Fraction
from typing import Any

import click

from rigpose.cli.given import as_json, frame_options
from rigpose.cli.show import meter, print_json, problem_dict
from rigpose.files.csvfile import CsvWriter, Layout
from rigpose.files.motionfile import save_values, to_file
from rigpose.files.scene import Outlet, outlet
from rigpose.files.shotfile import load_shot
from rigpose.ground.budget import Budget
from rigpose.ground.errors import BadInput, Problem
from rigpose.model.judge import judge
from rigpose.motion.bake import Baking, branch_map
from rigpose.motion.motion import Motion
from rigpose.motion.settle import Piece
from rigpose.motion.shot import Shot


@click.command("bake")
@click.argument("shot")
@click.option("--out", metavar="FILE", default=None, help="Write joint positions as CSV.")
@click.option("--values", metavar="FILE", default=None,
              help="Write drives, gauges and limit angles as CSV.")
@click.option("--layout", type=click.Choice(["tall", "wide"]), default="tall",
              help="A row for each joint and frame, or one for each frame.")
@click.option("--all-branches", is_flag=True, help="Write every branch, with a column `branch`.")
@click.option("--fps", default=None, help="The file's frames a second (the shot's).")
@click.option("--offset", default="0", help="Added to every frame number in the file.")
@frame_options
@as_json
def bake_command(shot: str, out: str | None, values: str | None, as_json: bool,
                 **asked: Any) -> int:
    """Bake a shot: one motion that keeps every length, written as CSV."""
    loaded = load_shot(shot)
    way = outlet(loaded.rig, loaded.fps, unit=asked["unit"], up=asked["up"],
                 to_fps=_fraction("--fps", asked["fps"]),
                 offset=_fraction("--offset", asked["offset"]) or Fraction(0))
    if asked["all_branches"]:
        return _bake_all(loaded, way, out, asked["layout"], as_json)
    work = Baking(loaded, Budget())
    motion = _bake(work, way, out, asked["layout"])
    written = out if work.row is not None else None
    if values is not None and work.row is not None:
        save_values(motion, values, unit=way.file.unit, fps=way.file.fps, offset=way.file.offset)
    if as_json:
        print_json(bake_dict(motion, written))
    else:
        _tell(motion, way, written)
    return 0 if motion.ok and motion.found.whole else 1


def _fraction(option: str, text: str | None) -> Fraction | None:
    if text is None:
        return None
    try:
        return Fraction(text)
    except (ValueError, ZeroDivisionError):
        raise BadInput(Problem(option, "", "is a number or a fraction of two whole numbers",
                               f'"{text}"', "write 24 or 24000/1001")) from None


def _bake(work: Baking, way: Outlet, out: str | None, layout: Layout) -> Motion:
    """The motion; its rows are written as they are made."""
    rig, total, done = work.shot.rig, len(work.shot.numbers), []
    worst, missing = 0.0, 0
    with ExitStack() as stack:
        bar = stack.enter_context(meter("baking"))
        writer = None
        if out is not None and work.row is not None:
            writer = stack.enter_context(
                CsvWriter(out, rig.joint_names, layout=layout, names=rig.names))
        for piece in work.pieces():
            done.append(piece)
            if writer is not None:
                _write(writer, work, way, piece)
            worst = max(worst, judge(rig, piece.positions, work.rest.size).worst()[0])
            missing += int((~piece.alive).sum())
            bar.show(piece.stop, total, f"worst length {worst:.1e} of the size, {missing} missing")
    return work.motion(done)


def _write(writer: CsvWriter, work: Baking, way: Outlet, piece: Piece) -> None:
    frames = work.shot.numbers[piece.start:piece.stop]
    writer.block(way.number(frames), to_file(work.shot.rig, way, piece.positions))


def _bake_all(shot: Shot, way: Outlet, out: str | None, layout: Layout, as_json: bool) -> int:
    found = branch_map(shot)
    if out is not None and len(found):
        with CsvWriter(out, found.joints, layout=layout, branches=True,
                       names=found.rig.names) as writer:
            for k, name in enumerate(found.names):
                places = to_file(found.rig, way, found.positions[k])
                writer.block(way.number(found.frames), places, name)
    if as_json:
        print_json({"frames": len(found.frames), "found": found.found.value,
                    "branches": list(found.names), "notes": found.notes, "problems": [],
                    "out": out if len(found) else None})
    else:
        click.echo(str(found))
        if out is not None and len(found):
            click.echo(f"wrote {out}")
        click.echo(_frame_line(len(found.frames), way))
    return 0 if len(found) and found.found.whole else 1


def bake_dict(motion: Motion, out: str | None) -> Mapping[str, Any]:
    """What `--json` prints."""
    return {
        "frames": len(motion), "branch": motion.name, "bends": motion.bends,
        "found": motion.found.value, "worst": motion.worst,
        "worst_redundant": motion.worst_redundant,
        "spans": [{"first": s.first, "last": s.last, "parts": s.parts, "why": s.why}
                  for s in motion.spans],
        "events": [{"frame": e.frame, "kind": e.kind, "joints": e.joints, "parts": e.parts}
                   for e in motion.events],
        "notes": motion.notes, "problems": [problem_dict(p) for p in motion.problems],
        "out": out,
    }


def _tell(motion: Motion, way: Outlet, out: str | None) -> None:
    click.echo(motion.note())
    click.echo(f"lengths hold to {motion.worst:.1e} of the size")
    if motion.redundant:
        click.echo(f"surplus lengths ({', '.join(sorted(motion.redundant))}) are off by at most "
                   f"{motion.worst_redundant:.1e} of the size")
    if out is not None:
        click.echo(f"wrote {out}")
    click.echo(_frame_line(len(motion), way))


def _frame_line(frames: int, way: Outlet) -> str:
    fps = way.file.fps
    rate = str(fps.numerator) if fps.denominator == 1 else f"{fps.numerator}/{fps.denominator}"
    return f"{frames} frames, {rate} a second, {way.file.unit}, {way.file.up} up"
