"""How a copy is placed, joined and repeated."""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from dataclasses import dataclass, replace

from rigpose.model.assemble import Built
from rigpose.model.bench import Bench
from rigpose.model.head import unit_vector
from rigpose.model.names import KeyPath, shown
from rigpose.model.placed import Move, placed, placed_axes, plane_move, space_move
from rigpose.model.rig import METRES, Coordinates, Rig
from rigpose.model.spec import CopySpec

MOST_COPIES = 10_000


@dataclass(frozen=True)
class Plan:
    """How often a file is brought in, and how each copy stands and is joined.

    ``at`` is where the first one's origin stands (None: where its joined joint says),
    ``shift`` what is added from each to the next, ``moves`` their turns, not yet shifted.
    """

    path: KeyPath
    names: tuple[str, ...]
    join: Mapping[str, str]
    chain: Mapping[str, str]
    at: Coordinates | None
    shift: Coordinates
    moves: tuple[Move, ...]


def numbered(name: str, count: int) -> Iterator[str]:
    """The names of repeated copies.

    >>> list(numbered("rib", 2))
    ['rib1', 'rib2']
    """
    return (f"{name}{k}" for k in range(1, count + 1))


def make_plan(bench: Bench, name: str, spec: CopySpec, rig: Rig, metres: float) -> Plan | None:
    """The plan of a copy of ``rig``, or None after noting what is wrong.

    ``metres`` is one unit of the parent in metres.
    """
    path = ("copies", name)
    before = len(bench.notes)
    _check_repeat(bench, path, spec)
    _check_mirror(bench, path, spec)
    join = _join(bench, path, spec, rig)
    _check_chain(bench, path, spec, rig)
    at = None if spec.at is None else bench.coordinates((*path, "at"), spec.at)
    shift = bench.coordinates((*path, "shift"), spec.shift or [0.0] * bench.dim)
    moves = _moves(bench, path, spec, METRES[rig.unit] / metres)
    names: tuple[str, ...] = (name,)
    if spec.repeat is not None and len(bench.notes) == before:
        names = tuple(n for n in numbered(name, spec.repeat) if bench.claim("copies", n))
    if shift is None or len(bench.notes) > before:
        return None
    return Plan(path, names, join, spec.chain, at, shift, moves)


def _check_repeat(bench: Bench, path: KeyPath, spec: CopySpec) -> None:
    if spec.repeat is not None and not 1 <= spec.repeat <= MOST_COPIES:
        bench.notes.add((*path, "repeat"), f"must be a whole number from 1 to {MOST_COPIES}",
                        str(spec.repeat), "bring in fewer, or leave `repeat` out")
    for key in ("chain", "shift"):
        if getattr(spec, key) and spec.repeat is None:
            bench.notes.add((*path, key), f"`{key}` speaks of several copies, so it needs "
                            "`repeat`", "none", f"add `repeat`, or take `{key}` out")
    if spec.chain and spec.shift:
        bench.notes.add((*path, "shift"), "chained copies stand where their joints say", "both",
                        "take `shift` or `chain` out")


def _check_mirror(bench: Bench, path: KeyPath, spec: CopySpec) -> None:
    if bench.dim == 2 and spec.mirror == "z":
        bench.notes.add((*path, "mirror"), "a plane rig has no z to mirror", '"z"',
                        'write "x" or "y"')
    if bench.dim == 2 and spec.axis is not None:
        bench.notes.add((*path, "axis"), "a plane rig turns in its plane, about no `axis`",
                        shown(spec.axis), "take `axis` out")


def _join(bench: Bench, path: KeyPath, spec: CopySpec, rig: Rig) -> dict[str, str]:
    joined: dict[str, str] = {}
    for own, other in spec.join.items():
        inner = (*path, "join", own)
        if own not in rig.index:
            bench.notes.unknown(inner, f"joint in {spec.of}", own, rig.index)
        found = bench.joint(inner, other)
        if found is None:
            continue
        if found in joined.values():
            bench.notes.add(inner, "two joints of a copy cannot become the same joint",
                            f"{shown(found)} again", "join it to another")
        joined[own] = found
    return joined


def _check_chain(bench: Bench, path: KeyPath, spec: CopySpec, rig: Rig) -> None:
    for own, before in spec.chain.items():
        for joint in (own, before):
            if joint not in rig.index:
                bench.notes.unknown((*path, "chain", own), f"joint in {spec.of}", joint, rig.index)


def _moves(bench: Bench, path: KeyPath, spec: CopySpec, scale: float) -> tuple[Move, ...]:
    """The turns of all copies; empty after noting what is wrong."""
    turn = bench.number((*path, "turn"), spec.turn)
    axis: Coordinates | None = (0.0, 0.0, 1.0)
    if spec.axis is not None and bench.dim == 3:
        written = bench.coordinates((*path, "axis"), spec.axis)
        axis = unit_vector(bench, (*path, "axis"), written)
    if turn is None or axis is None:
        return ()
    count = min(spec.repeat or 1, MOST_COPIES)
    turns = [turn] if spec.repeat is None else [turn * k for k in range(count)]
    if bench.dim == 2:
        return tuple(plane_move(t, spec.mirror, scale) for t in turns)
    return tuple(space_move(t, axis, spec.mirror, scale) for t in turns)


def bring_in(bench: Bench, plan: Plan, built: Built) -> bool:
    """Add all copies of a plan to the bench; False after noting what is wrong."""
    rig = built.rig
    for k, (name, move) in enumerate(zip(plan.names, plan.moves, strict=True)):
        joined = dict(plan.join)
        if k > 0:
            joined.update({own: _of_before(bench, plan.names[k - 1], joint)
                           for own, joint in plan.chain.items()})
        if len(set(joined.values())) < len(joined):
            bench.notes.add((*plan.path, "chain"),
                            "two joints of a copy cannot become the same joint",
                            f"{name} has two at {shown(_twice(list(joined.values())))}",
                            "join or chain other joints")
            return False
        there = replace(move, shift=_shift(bench, plan, rig, joined, k))
        bench.parts.add(placed(rig, there, name, joined))
        bench.hinges.update(placed_axes(built.hinges, there, name, joined))
        bench.also.update({f"{name}/{own}": joint for own, joint in joined.items()})
    return True


def _of_before(bench: Bench, copy: str, joint: str) -> str:
    name = f"{copy}/{joint}"
    return bench.also.get(name, name)


def _twice(names: list[str]) -> str:
    return next(n for n in names if names.count(n) > 1)


def _shift(bench: Bench, plan: Plan, rig: Rig, joined: Mapping[str, str], k: int) -> Coordinates:
    """Where copy number k (from 0) is moved after its turn.

    Chained to the one before, or joined with no `at` given, it stands so that the first of
    these joints lies on the one that it becomes.
    """
    steps = tuple(s * k for s in plan.shift)
    if k > 0 and plan.chain:
        return _onto(bench, plan.moves[k], rig, joined, list(plan.chain)) or steps
    if plan.at is not None:
        return tuple(a + s for a, s in zip(plan.at, steps, strict=True))
    start = _onto(bench, plan.moves[k], rig, joined, list(plan.join))
    return steps if start is None else tuple(a + s for a, s in zip(start, steps, strict=True))


def _onto(bench: Bench, move: Move, rig: Rig, joined: Mapping[str, str], order: list[str]) -> (
    Coordinates | None
):
    for own in order:
        there = bench.parts.joints[joined[own]].at
        here = rig.joints[rig.index[own]].at
        if there is not None and here is not None:
            return tuple(t - h for t, h in zip(there, move.place(here), strict=True))
    return None
