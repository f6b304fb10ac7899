"""Why frames don't assemble: which step fails there, and by how much."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from rigpose.kernels.meet import dot
from rigpose.model.equations import Array
from rigpose.model.rig import Rig
from rigpose.motion.motion import Span
from rigpose.solve.clock import Clock
from rigpose.solve.measure import misfit
from rigpose.solve.plan import Check, Circle, Cluster, Length, Meet, Plan, Step, Swing
from rigpose.solve.run import line_of, run_steps
from rigpose.solve.search import Context, base_table, group_table
from rigpose.solve.table import Table

SignsAt = Callable[[int, NDArray[np.intp]], Array]
MOST = 4096
"""Dead frames looked at; of more, evenly spread ones."""


@dataclass(frozen=True)
class _Cause:
    """The step that fails at a frame, and by how much (in the equations' frame)."""

    step: Step | None
    amount: float


def explain(context: Context, clock: Clock, frames: Array, alive: NDArray[np.bool_],
            signs: SignsAt) -> tuple[Span, ...]:
    """Spans of frames without a pose.

    frames : (n_frames,) numbers; alive : (n_frames,); signs : for a group's number and frames
    ``(m,)`` counted from 0 the signs ``(bits, m)`` with which the row is run
    """
    dead = np.flatnonzero(~alive)
    if not len(dead):
        return ()
    some = dead[:: max(1, len(dead) // MOST)]
    causes = dict(zip(some.tolist(), _causes(context, clock, some, signs), strict=True))
    cuts = np.flatnonzero(np.diff(dead) > 1) + 1
    return tuple(_span(context, frames, run, causes) for run in np.split(dead, cuts))


def _span(context: Context, frames: Array, run: NDArray[np.intp],
          causes: dict[int, _Cause]) -> Span:
    known = [causes[k] for k in run.tolist() if k in causes]
    parts = tuple(dict.fromkeys(p for c in known if c.step for p in c.step.parts))
    worst = max(known, key=lambda c: c.amount, default=_Cause(None, 0.0))
    first, last = float(frames[run[0]]), float(frames[run[-1]])
    return Span(first, last, parts, _why(context.plan, worst))


def _causes(context: Context, clock: Clock, which: NDArray[np.intp],
            signs: SignsAt) -> list[_Cause]:
    found: list[_Cause | None] = [None] * len(which)
    base = base_table(context, clock.at(which.astype(float)), True,
                      killer=np.full((1, len(which)), -1, dtype=np.int32))
    _collect(found, base, context.plan.base, 0)
    for number, group in enumerate(context.plan.groups):
        if all(c is not None for c in found) or not group.binary:
            continue
        table = group_table(base, 1)
        ways = {k: row[None] for k, row in enumerate(signs(number, which))}
        run_steps(group.steps, table, ways, len(context.plan.base))
        _collect(found, table, group.steps, len(context.plan.base))
    blocks = context.plan.clusters
    rest = _Cause(blocks[0] if blocks else None, 0.0)
    return [rest if c is None else c for c in found]


def _collect(found: list[_Cause | None], table: Table, steps: Sequence[Step], first: int) -> None:
    if table.killer is None:
        return
    killer = np.broadcast_to(table.killer, (1, len(found)))[0]
    for number in np.unique(killer[killer >= first]):
        if number - first >= len(steps):
            continue
        step = steps[number - first]
        amount = np.broadcast_to(_amount(step, table), (1, len(found)))[0]
        for k in np.flatnonzero(killer == number):
            if found[k] is None:
                found[k] = _Cause(step, float(np.nan_to_num(amount[k])))


def _amount(step: Step, table: Table) -> Array:
    """By how much a step fails, as a length ``(1, F)``; zero where that can't be said."""
    with np.errstate(invalid="ignore"):
        if isinstance(step, Check) and step.kind not in ("ram", "track", "fence", "hand"):
            return np.abs(misfit(step, table))
        if isinstance(step, Meet):
            return _short(step, table)
    return np.zeros((1, 1))


def _short(step: Meet, table: Table) -> Array:
    """How far two curves stay apart."""
    first, second = step.first, step.second
    if not isinstance(second, Circle):
        return np.zeros((1, 1))
    radius = _radius(table, second.radius)
    centre = table.point(second.centre)
    if isinstance(first, Circle):
        d = centre - table.point(first.centre)
        far, other = np.sqrt(dot(d, d)), _radius(table, first.radius)
        apart: Array = np.maximum(far - radius - other, np.abs(radius - other) - far)
        return apart
    p, d = line_of(table, first)
    w = centre - p
    off: Array = np.abs(d[0] * w[1] - d[1] * w[0])
    return off - radius


def _radius(table: Table, length: Length) -> Array | float:
    if length.points is not None:
        d = table.point(length.points[1]) - table.point(length.points[0])
        gap: Array = np.sqrt(dot(d, d))
        return gap
    return table.value(length.value) if length.value >= 0 else length.constant


def _why(plan: Plan, cause: _Cause) -> str:
    step, eqs = cause.step, plan.eqs
    if step is None:
        return "no pose was found"
    rig, amount = eqs.rig, cause.amount * eqs.scale
    parts = " and ".join(f'"{p}"' for p in dict.fromkeys(step.parts))
    length = f"{amount:.4g} {rig.unit}"
    if isinstance(step, Check):
        return _check_text(rig, step, parts, length)
    if isinstance(step, Meet):
        joint = rig.joint_names[step.dst] if step.dst < eqs.n else "a joint"
        small = 0.0 < amount <= rig.slack * plan.eqs.scale
        mend = "; less than the slack: change one of the two lengths by so much" if small else ""
        return f'{parts} can\'t meet at "{joint}", by up to {length}{mend}'
    if isinstance(step, Swing):
        return f"{parts}: the slot can't pass through its joint"
    if isinstance(step, Cluster):
        names = ", ".join(f'"{rig.joint_names[j]}"' for j in step.joints[:6])
        return f"no pose was found for {names} together ({parts})"
    return f"{parts} can't be placed"


def _check_text(rig: Rig, step: Check, parts: str, length: str) -> str:
    slack = f"{rig.slack:g} of the size is allowed"
    return {
        "fence": f"the limit {parts} stops it",
        "ram": f"the ram {parts} is at the end of its range",
        "track": f"the rail {parts} ends there",
        "hand": f"the frozen group {parts} would turn over",
        "target": f"the target {parts} is missed by up to {length}",
        "angle": f"the drive {parts} asks for another angle, by up to {length} at its end",
    }.get(step.kind, f"the surplus {parts} is off by up to {length}; {slack}")
