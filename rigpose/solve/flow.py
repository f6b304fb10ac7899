"""Which points and values a step reads and writes."""

from __future__ import annotations

from collections.abc import Callable
from typing import Any

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
    Ride,
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


def on_curve(curve: Circle | Line | Sheet) -> set[Point]:
    """Points that a curve hangs on."""
    if isinstance(curve, Sheet):
        return set()
    if isinstance(curve, Circle):
        return {curve.centre, *(curve.radius.points or ())}
    return {*curve.points, *(curve.moved or ())} | _heading(curve.heading)


def _nothing(step: Step) -> set[Point]:
    return set()


def _meet(step: Meet) -> set[Point]:
    one, two = step.first, step.second
    if type(one) is type(two) is Circle and one.radius.points is two.radius.points is None:
        return {one.centre, two.centre}
    return on_curve(one) | on_curve(two)


def _carried(step: Carry | Hang) -> set[Point]:
    return {*step.placed, *_points(*step.local, *step.base)}


def _aim(step: Aim) -> set[Point]:
    return {step.pivot, *_heading(step.heading),
            *_points(*step.local, step.pivot_local, *step.line)}


def _swing(step: Swing) -> set[Point]:
    return {step.pivot, step.through, *_points(*step.local, step.pivot_local, *step.slot)}


def _hinge(step: Hinge) -> set[Point]:
    start = set() if step.start is None else {step.start}
    return {*step.axis, *start, *_points(*step.local, *step.axis_local, step.pointer)}


_READS: dict[type[Step], Callable[[Any], set[Point]]] = {
    Meet: _meet, Carry: _carried, Hang: _carried, Aim: _aim, Swing: _swing, Hinge: _hinge,
    Slide: lambda step: set(step.line),
    Seat: lambda step: _points(*step.local),
    Shift: lambda step: {step.point, step.minus, step.plus},
    Ride: lambda step: {step.pivot},
    Orient: lambda step: {*_heading(step.heading), *_points(*step.local, *step.line)},
    Level: lambda step: _points(*step.local, *step.pair),
    Junction: lambda step: set[Point]().union(*map(on_curve, step.curves)),
    Fit: lambda step: {step.dst, *(c.centre for c in step.circles)},
    Check: lambda step: set(step.points),
}


def reads(step: Step) -> set[Point]:
    """Points that a step reads."""
    return _READS.get(type(step), _nothing)(step)


_ONE = frozenset({Given, Meet, Junction, Fit, Slide, Shift})
_SEVERAL = frozenset({Carry, Aim, Swing, Seat, Orient, Level, Hang, Hinge, Ride})


def writes(step: Step) -> tuple[Point, ...]:
    """Points that a step writes."""
    kind = type(step)
    if kind in _ONE:
        return (step.dst,)  # type: ignore[attr-defined]
    if kind in _SEVERAL:
        return step.dst  # type: ignore[attr-defined, no-any-return]
    return step.joints if isinstance(step, Cluster) else ()


POINTS_ONLY = frozenset({Given, Carry, Hang, Seat, Shift, Level, Fit, Swing, Ride})
"""Steps that neither read nor settle a value."""
_WITHOUT_VALUES = POINTS_ONLY | {Gauge}


def values_read(step: Step, eqs: Equations) -> set[int]:
    """Value numbers that a step reads."""
    found: set[int] = set()
    if not eqs.values or type(step) in _WITHOUT_VALUES:
        return found
    if isinstance(step, Meet) and type(step.first) is type(step.second) is Circle:
        found = {step.first.radius.value, step.second.radius.value}
    elif isinstance(step, (Meet, Junction)):
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
    elif isinstance(step, Cluster):
        found |= _block_values(step, eqs)
    return found - {-1}


def _block_values(step: Cluster, eqs: Equations) -> set[int]:
    """Known values of the parts and ties behind a block's rows."""
    names = {step.system.row_names[k] for k in step.rows}
    found = {int(v) for part in (eqs.distances, eqs.lines, eqs.angles)
             for name, v in zip(part.names, part.value, strict=True) if name in names}
    for tie, row in zip(eqs.tie_names, eqs.ties, strict=True):
        if tie in names:
            found |= {int(v) for v in row.nonzero()[0]}
    return found & step.system.drives


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
    kind = type(step)
    return step.value if kind is Gauge or kind is Tied else -1  # type: ignore[attr-defined]


_TWO_WAY = frozenset({Meet, Junction, Swing, Level})


def has_choice(step: Step) -> bool:
    """Whether a step has more than one way."""
    kind = type(step)
    return (kind in _TWO_WAY and step.bit >= 0) or kind is Cluster  # type: ignore[attr-defined]


def alive_steps(steps: list[Step], joints: int) -> list[Step]:
    """The steps without those whose points come to no joint (points below ``joints``).

    A body's own frame may have choices that place nothing any more, because the ground placed
    those joints by other means; each would list every branch twice.
    """
    if all(_is_root(step, joints) for step in steps):
        return steps
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
    kind = type(step)
    if kind in _ONE:
        return step.dst < joints  # type: ignore[attr-defined, no-any-return]
    if isinstance(step, Check):
        return not step.points or min(step.points) < joints
    return kind is Gauge or kind is Tied or any(p < joints for p in writes(step))


def _needs(step: Step) -> set[Point]:
    return set(step.around) if isinstance(step, Cluster) else reads(step)
