"""Which points and values a step reads and writes."""

from __future__ import annotations

from functools import singledispatch

from rigpose.model.equations import Equations
from rigpose.solve.plan import (
    Aim,
    Carry,
    Check,
    Circle,
    Cluster,
    Fit,
    Gauge,
    Given,
    Hang,
    Heading,
    Hinge,
    Junction,
    Level,
    Line,
    Local,
    Meet,
    Orient,
    Point,
    Seat,
    Sheet,
    Shift,
    Slide,
    Step,
    Swing,
    Tied,
)


def _points(*local: Local) -> set[Point]:
    return {p for p in local if isinstance(p, int)}


def _heading(heading: Heading | None) -> set[Point]:
    return set(heading.base) if heading and heading.base else set()


def _curve(curve: Circle | Line | Sheet) -> set[Point]:
    if isinstance(curve, Sheet):
        return set()
    if isinstance(curve, Circle):
        return {curve.centre, *(curve.radius.points or ())}
    return {*curve.points, *(curve.moved or ())} | _heading(curve.heading)


@singledispatch
def reads(step: Step) -> set[Point]:
    """Points that a step reads."""
    return set()


@reads.register
def _(step: Meet) -> set[Point]:
    return _curve(step.first) | _curve(step.second)


@reads.register
def _(step: Carry) -> set[Point]:
    return {*step.placed, *_points(*step.local, *step.base)}


@reads.register
def _(step: Aim) -> set[Point]:
    return {step.pivot, *_heading(step.heading),
            *_points(*step.local, step.pivot_local, *step.line)}


@reads.register
def _(step: Swing) -> set[Point]:
    return {step.pivot, step.through, *_points(*step.local, step.pivot_local, *step.slot)}


@reads.register
def _(step: Slide) -> set[Point]:
    return set(step.line)


@reads.register
def _(step: Seat) -> set[Point]:
    return _points(*step.local)


@reads.register
def _(step: Shift) -> set[Point]:
    return {step.point, step.minus, step.plus}


@reads.register
def _(step: Orient) -> set[Point]:
    return {*_heading(step.heading), *_points(*step.local, *step.line)}


@reads.register
def _(step: Level) -> set[Point]:
    return _points(*step.local, *step.pair)


@reads.register
def _(step: Junction) -> set[Point]:
    return set[Point]().union(*(_curve(c) for c in step.curves))


@reads.register
def _(step: Fit) -> set[Point]:
    return {step.dst, *(c.centre for c in step.circles)}


@reads.register
def _(step: Hang) -> set[Point]:
    return {*step.placed, *_points(*step.local, *step.base)}


@reads.register
def _(step: Hinge) -> set[Point]:
    start = set() if step.start is None else {step.start}
    return {*step.axis, *start, *_points(*step.local, *step.axis_local, step.pointer)}


@reads.register
def _(step: Check) -> set[Point]:
    return set(step.points)


def writes(step: Step) -> tuple[Point, ...]:
    """Points that a step writes."""
    if isinstance(step, Cluster):
        return step.joints
    if isinstance(step, (Given, Meet, Junction, Fit, Slide, Shift)):
        return (step.dst,)
    if isinstance(step, (Carry, Aim, Swing, Seat, Orient, Level, Hang, Hinge)):
        return step.dst
    return ()


def values_read(step: Step, eqs: Equations) -> set[int]:
    """Value numbers that a step reads."""
    found: set[int] = set()
    if isinstance(step, (Meet, Junction)):
        curves = (step.first, step.second) if isinstance(step, Meet) else step.curves
        for curve in curves:
            found |= _curve_values(curve)
    elif isinstance(step, Hinge):
        found.add(step.value)
    elif isinstance(step, (Aim, Orient)):
        found.add(step.heading.value)
    elif isinstance(step, Slide):
        found.add(step.value)
    elif isinstance(step, Tied):
        found |= {int(v) for v in eqs.ties[step.tie].nonzero()[0]} - {step.value}
    elif isinstance(step, Check):
        found |= _check_values(step, eqs)
    return found - {-1}


def _curve_values(curve: Circle | Line | Sheet) -> set[int]:
    if isinstance(curve, Circle):
        return {curve.radius.value}
    if isinstance(curve, Sheet):
        return {curve.value}
    return {curve.value, curve.heading.value if curve.heading else -1}


def _check_values(step: Check, eqs: Equations) -> set[int]:
    if step.kind == "distance":
        return {int(eqs.distances.value[step.index])}
    if step.kind in ("way", "angle"):
        table = eqs.lines if step.kind == "way" else eqs.angles
        return {int(table.value[step.index])}
    if step.kind == "tie":
        return {int(v) for v in eqs.ties[step.index].nonzero()[0]}
    return set()


def value_written(step: Step) -> int:
    """The value number that a step settles, -1 for none."""
    return step.value if isinstance(step, (Gauge, Tied)) else -1


def has_choice(step: Step) -> bool:
    """Whether a step has more than one way."""
    two_way = (Meet, Junction, Swing, Level)
    return isinstance(step, Cluster) or (isinstance(step, two_way) and step.bit >= 0)


def alive_steps(steps: list[Step], joints: int) -> list[Step]:
    """The steps without those whose points come to no joint (points below ``joints``).

    A body's own frame may have choices that place nothing any more, because the ground placed
    those joints by other means; each would list every branch twice.
    """
    makers = {p: k for k, step in enumerate(steps) for p in writes(step)}
    keep = [k for k, step in enumerate(steps) if _is_root(step, joints)]
    alive = set(keep)
    while keep:
        for p in _needs(steps[keep.pop()]):
            k = makers.get(p)
            if k is not None and k not in alive:
                alive.add(k)
                keep.append(k)
        if not keep:
            # A check within a frame counts as soon as one of its points does.
            made = {p for k in alive for p in writes(steps[k])}
            keep = [k for k, step in enumerate(steps) if k not in alive
                    and isinstance(step, Check) and reads(step) & made]
            alive.update(keep)
    return [step for k, step in enumerate(steps) if k in alive]


def _is_root(step: Step, joints: int) -> bool:
    if isinstance(step, (Gauge, Tied)):
        return True
    if isinstance(step, Check):
        return not step.points or min(step.points) < joints
    return any(p < joints for p in writes(step))


def _needs(step: Step) -> set[Point]:
    return set(step.around) if isinstance(step, Cluster) else reads(step)
