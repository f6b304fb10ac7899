"""`rigpose bake SHOT`: a shot's joint positions, frame by frame."""

from __future__ import annotations

from collections.abc import Iterator, Mapping, Sequence
from contextlib import ExitStack
from typing import Any

import click

from rigpose.cli.bakeall import bake_all, tell_files
from rigpose.cli.given import Gathered, as_json, frame_options, keep_inputs, ratio, the_shot
from rigpose.cli.show import event_dict, known_event, meter, print_json, problem_dict
from rigpose.files.csvfile import Layout, RigWriter
from rigpose.files.motionfile import save_values, to_file
from rigpose.files.scene import Outlet, outlet
from rigpose.ground.budget import Budget
from rigpose.ground.words import Found, State
from rigpose.model.judge import judge
from rigpose.motion.bake import Baking
from rigpose.motion.motion import Event, Motion
from rigpose.motion.settle import Piece
from rigpose.motion.shot import Shot

FEW = 3
"""Times that an event is told frame by frame."""


@click.command("bake", short_help="Bake a shot: the joints' positions, frame by frame.")
@click.argument("shot")
@click.option("--out", metavar="FILE", default=None,
              help="Write the joints' positions as CSV.")
@click.option("--values", metavar="FILE", default=None,
              help="Write drives, gauges and limit angles as CSV.")
@click.option("--layout", type=click.Choice(["tall", "wide"]), default="tall", show_default=True,
              help="A row for each joint and frame, or one for each frame.")
@click.option("--all-branches", is_flag=True, help="Write every branch, with a column `branch`.")
@click.option("--fps", metavar="RATE", default=None,
              help="The file's frames a second, as 25 or 24000/1001; else the shot's.")
@click.option("--offset", metavar="NUMBER", default="0",
              help="Added to every frame number in the file.")
@frame_options
@as_json
def bake_command(shot: str, out: str | None, values: str | None, as_json: bool,
                 **asked: Any) -> int:
    """Bake a shot: one motion in which every length holds, written as CSV."""
    loaded, way = _loaded(shot, asked)
    keep_inputs({"the shot": shot, "the rig": loaded.rig.source},
                {"--out": out, "--values": values})
    if asked["all_branches"]:
        return bake_all(loaded, way, out, values, asked["layout"], as_json)
    work = Baking(loaded, Budget())
    if work.row is None:
        motion, written = _bake(work, way, None, asked["layout"]), None
    else:
        motion, written = _bake(work, way, out, asked["layout"]), out
        if values is not None:
            save_values(motion, values, unit=way.file.unit, fps=way.file.fps,
                        offset=way.file.offset)
    if as_json:
        print_json(bake_dict(motion, written))
    else:
        _tell(motion)
        tell_files(len(motion), way, [out, values], work.row is not None)
    return 0 if motion.ok and motion.found.whole else 1


def _loaded(shot: str, asked: Mapping[str, Any]) -> tuple[Shot, Outlet]:
    """The shot, and the way to the file's frame of reference; all mistakes told at once."""
    gathered = Gathered()
    fps = None if asked["fps"] is None else gathered.of(lambda: ratio("--fps", asked["fps"]))
    offset = gathered.of(lambda: ratio("--offset", asked["offset"]))
    loaded = gathered.of(lambda: the_shot(shot))
    if fps is not None and fps <= 0:
        gathered.add("--fps", "", "a rate is more than 0", f'"{asked["fps"]}"',
                     "write 24 or 24000/1001")
    gathered.stop_if_any()
    assert loaded is not None and offset is not None  # where one isn't, that is told
    return loaded, outlet(loaded.rig, loaded.fps, unit=asked["unit"], up=asked["up"], to_fps=fps,
                          offset=offset)


def _bake(work: Baking, way: Outlet, out: str | None, layout: Layout) -> Motion:
    """The motion; its rows are written as they are made."""
    rig, total, done = work.shot.rig, len(work.shot.numbers), []
    worst, missing = 0.0, 0
    with ExitStack() as stack:
        bar = stack.enter_context(meter("baking"))
        writer = None
        if out is not None:
            writer = stack.enter_context(RigWriter(out, rig, layout=layout))
        for piece in work.pieces():
            done.append(piece)
            if writer is not None:
                _write(writer, work, way, piece)
            worst = max(worst, judge(rig, piece.positions, work.rest.size).worst()[0])
            missing += int((~piece.alive).sum())
            bar.show(piece.stop, total, f"worst length {worst:.1e} of the size, {missing} missing")
    return work.motion(done)


def _write(writer: RigWriter, work: Baking, way: Outlet, piece: Piece) -> None:
    frames = work.shot.numbers[piece.start:piece.stop]
    writer.block(way.number(frames), to_file(work.shot.rig, way, piece.positions))


def bake_dict(motion: Motion, out: str | None) -> Mapping[str, Any]:
    """What `--json` prints."""
    return {
        "frames": len(motion), "branch": motion.name, "bends": motion.bends,
        "found": motion.found.value, "worst": motion.worst if _measures(motion) else None,
        "worst_redundant": motion.worst_redundant,
        "spans": [{"first": s.first, "last": s.last, "parts": s.parts, "why": s.why}
                  for s in motion.spans],
        "events": [event_dict(motion.rig, e) for e in motion.events],
        "notes": motion.notes, "problems": [problem_dict(p) for p in motion.problems],
        "out": out,
    }


def _tell(motion: Motion) -> None:
    missing = int((motion.state == State.NONE).sum())
    state = f"{missing} of {len(motion)} frames without a pose" if missing else (
        "every frame has a pose")
    branch = "" if not motion.name else (
        "its only branch, " if motion.name == "only" else f"branch {motion.name}, ")
    click.echo(f"{motion.rig.name}: {branch}{state}")
    if not motion.found.whole or motion.found is Found.PROBABLY:
        click.echo(f"the branches to choose from are {motion.found.value}")
    events = [known_event(motion.rig, e) for e in motion.events]
    for line in (*motion.spans, *motion.problems, *motion.notes, *_events(events)):
        click.echo(f"  {line}")
    if missing < len(motion):
        for line in _held(motion):
            click.echo(line)


def _measures(motion: Motion) -> bool:
    """Whether the rig has a length that isn't surplus."""
    rig = motion.rig
    return any(p.name not in motion.redundant for p in (*rig.bones, *rig.plates))


def _held(motion: Motion) -> Iterator[str]:
    """How well lengths hold. Where all are surplus there is only how far they agree."""
    size = f"{motion.size:.4g} {motion.rig.unit}"
    surplus = f"surplus lengths ({', '.join(sorted(motion.redundant))})"
    if not _measures(motion):
        if motion.redundant:
            yield f"{surplus} agree to {motion.worst_redundant:.1e} of the rig's size, {size}"
        return
    yield f"lengths hold to {motion.worst:.1e} of the rig's size, {size}"
    if motion.redundant:
        yield f"{surplus} are off by at most {motion.worst_redundant:.1e} of it"


def _events(events: Sequence[Event]) -> Iterator[str]:
    """What happens more than a few times, the same each time, on one line."""
    alike: dict[str, list[str]] = {}
    for event in events:
        _, _, what = str(event).partition(": ")
        alike.setdefault(what, []).append(f"{event.frame:.9g}")
    for what, frames in alike.items():
        if len(frames) > FEW:
            told = f"{', '.join(frames[:FEW])} … {frames[-1]} ({len(frames)} times)"
        else:
            told = ", ".join(frames)
        yield f"frame{'s' if len(frames) > 1 else ''} {told}: {what}"
