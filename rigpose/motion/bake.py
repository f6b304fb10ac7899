"""Baking a shot: from its keys to a motion in which every length is kept.

Five steps, each a value that can be looked at: `channels` (values over the frames),
`branch_map` (all rows), `choose` (which of them), `settle` (its poses), `watch_over` (what
happens on the way).
"""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from rigpose.ground.budget import Budget, Watch, go_on
from rigpose.ground.errors import Problem, Unsolvable
from rigpose.ground.words import Found, State
from rigpose.model.equations import Array
from rigpose.motion.branches import (
    Search,
    branches_on,
    choice_steps,
    plan_of,
    search_on,
)
from rigpose.motion.branchset import Branches
from rigpose.motion.channels import channels
from rigpose.motion.choose import Choice, asked, choose
from rigpose.motion.explain import explain
from rigpose.motion.motion import Event, Motion, Span
from rigpose.motion.rowstart import Row, row_of
from rigpose.motion.settle import Piece, pieces
from rigpose.motion.shot import Shot
from rigpose.solve.clock import Clock, part_of_clock
from rigpose.solve.deadcentre import Pass
from rigpose.solve.flow import writes
from rigpose.solve.knowns import Knowns, read_knowns
from rigpose.solve.rest import Rest, find_rest
from rigpose.solve.search import Context

LENGTHS_HOLD = 1e-12
WIDE = 1 << 16
LOOK_AHEAD = 32
"""Frames searched in one go for the first that assembles."""


def clock_of(shot: Shot, rest: Rest) -> Clock:
    """The shot's drives and targets at its frames and between them.

    Raises BadInput where a drive leaves its range.
    """
    numbers = shot.numbers
    steps = max(len(numbers) - 1, 1)

    def between(times: Array) -> Knowns:
        first, last = shot.frames
        found = channels(shot, first + (last - first) * times / steps)
        return Knowns(len(times), found.drives, found.targets)

    found = channels(shot, numbers)
    read_knowns(shot.rig, found.drives, None)
    return Clock(rest.equations, len(numbers),
                 Knowns(len(numbers), found.drives, found.targets), between)


def branch_map(shot: Shot, *, budget: Budget | None = None,
               watch: Watch | None = None) -> Branches:
    """All rows over the shot's frames. Raises BadInput where the shot leaves something moving."""
    rest = find_rest(shot.rig)
    return branches_on(rest, clock_of(shot, rest), shot.numbers, budget or Budget(), watch)


def bake(shot: Shot, *, budget: Budget | None = None, watch: Watch | None = None,
         strict: bool = False) -> Motion:
    """The shot's motion. What can't be reached is in `Motion.spans` and `Motion.problems`.

    watch : called with ("frames", done, total); a false answer stops, and ``found`` says so

    Raises BadInput for a drive outside its range and where something can still move;
    with ``strict`` also `Unsolvable` where the motion isn't ok.
    """
    work = Baking(shot, budget or Budget())
    done = []
    for piece in work.pieces():
        done.append(piece)
        if not go_on(watch, "frames", piece.stop, len(shot.numbers)):
            break
    motion = work.motion(done)
    if strict and not motion.ok:
        raise Unsolvable(motion.note())
    return motion


@dataclass(frozen=True)
class Start:
    """The frame (counted from 0) from which a row lives, and the choice made there."""

    frame: int
    search: Search
    choice: Choice

    @property
    def branches(self) -> Branches:
        """The branches of that frame."""
        return self.search.branches


class Baking:
    """A bake in progress: pieces as they are made, and the motion at the end."""

    def __init__(self, shot: Shot, budget: Budget) -> None:
        self.shot, self.rest = shot, find_rest(shot.rig)
        self.clock = clock_of(shot, self.rest)
        self.context = Context(self.rest, plan_of(self.rest, self.clock.knowns), budget)
        eqs = self.rest.equations
        self.places = np.empty((self.clock.count, eqs.n, eqs.dim))
        # Bends and places are looked for among more branches than a list would hold.
        wide = asked(shot) or shot.near
        self.start = self._start(replace(budget, poses=max(budget.poses, WIDE)) if wide else budget)
        self.row: Row | None = None
        if self.start.choice.number >= 0:
            self.row = row_of(self.context, self.clock, self.start.frame,
                              self.start.search, self.start.choice.number, asked(shot))

    def _start(self, budget: Budget) -> Start:
        """The first frame that assembles; in most shots frame 0."""
        first = self._at(0, budget)
        if len(first.branches):
            return Start(0, first, choose(self.shot, first.branches))
        for low in range(1, self.clock.count, LOOK_AHEAD):
            high = min(low + LOOK_AHEAD, self.clock.count)
            part = part_of_clock(self.clock, low, high)
            some = branches_on(self.rest, part, self.shot.numbers[low:high], budget)
            alive = (some.state > State.NONE).any(axis=0)
            if alive.any():
                frame = low + int(np.argmax(alive))
                found = self._at(frame, budget)
                return Start(frame, found, choose(self.shot, found.branches))
        return Start(self.clock.count, first, choose(self.shot, first.branches))

    def _at(self, frame: int, budget: Budget) -> Search:
        part = part_of_clock(self.clock, frame, frame + 1)
        return search_on(self.rest, part, self.shot.numbers[frame:frame + 1], budget)

    def pieces(self) -> Iterator[Piece]:
        """The row's poses, first frames first."""
        if self.row is None:
            yield self._nothing(0, self.clock.count)
            return
        low = self.start.frame
        if low:
            yield self._nothing(0, low)
        part = part_of_clock(self.clock, low, self.clock.count)
        for piece in pieces(self.context, part, self.row.begins, out=self.places[low:]):
            moved = tuple((g, replace(p, row=0).moved(low)) for g, p in piece.passes)
            yield replace(piece, start=piece.start + low, stop=piece.stop + low, passes=moved)

    def _nothing(self, start: int, stop: int) -> Piece:
        n = stop - start
        none = self.places[start:stop]
        none[...] = np.nan
        return Piece(start, stop, none, np.zeros(n, dtype=bool), np.full(n, np.nan), {}, ())

    def motion(self, done: Sequence[Piece]) -> Motion:
        """All pieces as one motion, with what happens on the way."""
        frames = self.shot.numbers[:done[-1].stop if done else 0]
        alive = _joined([p.alive for p in done], bool)
        found = self.start.branches.found
        if found is Found.BUDGET and not (asked(self.shot) or self.shot.near):
            found = Found.COMPLETE  # the nearest of each group is the nearest of all
        if len(frames) < self.clock.count:
            found = Found.STOPPED
        eqs, row = self.rest.equations, self.row
        read = {eqs.values[v]: _joined([p.values.get(v, np.full(p.stop - p.start, np.nan))
                                        for p in done]) / eqs.unit[v]
                for v in {v for p in done for v in p.values}}
        motion = Motion(
            rig=self.shot.rig, frames=frames,
            positions=_sealed(self.places[:len(frames)]),
            state=_sealed(np.where(alive, np.uint8(State.MET), np.uint8(State.NONE))),
            margin=_sealed(_joined([p.margin for p in done]).astype(np.float32)),
            name=row.name if row else "", bends=row.bends if row else {},
            knowns=self.clock.knowns.part(slice(0, len(frames))), size=self.rest.size,
            found=found, read=read, redundant=frozenset(self.context.plan.redundant),
            problems=self.start.choice.problems, fps=self.shot.fps, title=self.shot.name,
            notes=(*self.start.branches.notes, *(row.notes if row else ())))
        return watch_over(motion, self, [x for p in done for x in p.passes])


def watch_over(motion: Motion, work: Baking, passes: Sequence[tuple[int, Pass]]) -> Motion:
    """The motion with its events and spans, judged: lengths that don't hold are a problem."""
    alive = motion.state > State.NONE
    spans: tuple[Span, ...] = ()
    if work.row is not None:
        spans = explain(work.context, work.clock, motion.frames, alive,
                        lambda group, at: work.row.signs(group, at, passes))  # type: ignore[union-attr]
    problems = list(motion.problems)
    if motion.worst > LENGTHS_HOLD and motion.beyond_floats > LENGTHS_HOLD:
        problems.append(Problem(
            work.shot.source, motion.worst_part, "every length holds to 1e-12 of the size",
            f"{motion.worst:.3g}", "this is a fault of the solver: please tell its developers"))
    events = tuple(_event(work, motion, g, p) for g, p in passes if not p.held)
    return replace(motion, spans=spans, problems=tuple(problems),
                   events=tuple(sorted(events, key=lambda e: e.frame)))


def _event(work: Baking, motion: Motion, group: int, p: Pass) -> Event:
    step = choice_steps(work.context.plan.groups[group])[p.choice]
    names = motion.rig.joint_names
    joints = tuple(names[j] for j in writes(step) if j < len(names))
    at = float(np.interp(p.time, np.arange(len(motion.frames)), motion.frames))
    return Event(at, p.kind, joints, step.parts)


def _joined(arrays: Sequence[NDArray], dtype: type = float) -> NDArray:  # type: ignore[type-arg]
    if len(arrays) == 1:
        return np.asarray(arrays[0])
    return np.concatenate(arrays) if arrays else np.zeros(0, dtype=dtype)


def _sealed(array: NDArray) -> NDArray:  # type: ignore[type-arg]
    array.flags.writeable = False
    return array
