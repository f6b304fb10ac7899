"""Partial reflections: all branches from one, by turning over what hangs on two joints.

Where everything placed after a crossing hangs on its joint and the two that it was placed from,
that part may be turned over about the line through the two; every length is kept (Liberti,
Masson, Lee, Lavor and Mucherino 2014 for distance geometry). A side that holds a handed plate, a
rail, a driven angle, a target or a check can't be turned over alone.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from rigpose.model.equations import Array, Equations
from rigpose.solve.flow import has_choice, reads, writes
from rigpose.solve.plan import Check, Circle, Group, Junction, Meet, Step


@dataclass(frozen=True)
class Cut:
    """One choice as a reflection: the two joints of the line (in space the three of the plane),
    and the joints that turn over."""

    choice: int
    line: tuple[int, ...]
    side: tuple[int, ...]


def cuts_of(eqs: Equations, group: Group) -> tuple[Cut, ...] | None:
    """The reflection of every choice of a group, or None where some choice has none."""
    cuts: list[Cut] = []
    for k, step in enumerate(group.steps):
        if isinstance(step, Check):
            return None
        if has_choice(step):
            cut = _cut(eqs, group.steps, k, len(cuts))
            if cut is None:
                return None
            cuts.append(cut)
        elif writes(step):
            return None  # a body carried along is handed
    return tuple(cuts)


def _cut(eqs: Equations, steps: Sequence[Step], k: int, choice: int) -> Cut | None:
    step = steps[k]
    curves: tuple[object, ...] = ()
    if isinstance(step, Meet):
        curves = (step.first, step.second)
    elif isinstance(step, Junction):
        curves = step.curves
    if not curves or not all(isinstance(c, Circle) for c in curves):
        return None
    line = tuple(c.centre for c in curves if isinstance(c, Circle))
    assert isinstance(step, (Meet, Junction))  # only these have curves
    if max(*line, step.dst) >= eqs.n or _bodied(eqs, step):
        return None
    side = {step.dst}
    for later in steps[k + 1:]:
        read = reads(later)
        if read & side:
            if not read <= side | set(line) or _bodied(eqs, later):
                return None
            side.update(writes(later))
    return Cut(choice, line, tuple(sorted(side)))


def _bodied(eqs: Equations, step: Step) -> bool:
    """Whether a step places a joint of a handed plate."""
    made = set(writes(step))
    return any(made & set(map(int, b.joints)) for b in eqs.bodies)


def reflected(poses: Array, cut: Cut) -> Array:
    """Poses ``(n_poses, n_joints, dim)`` with one side turned over."""
    a = poses[:, cut.line[0]]
    e = poses[:, cut.line[1]] - a
    if len(cut.line) == 3:
        normal = np.cross(e, poses[:, cut.line[2]] - a)
    else:
        normal = np.stack([-e[:, 1], e[:, 0]], axis=1)
    normal /= np.sqrt((normal * normal).sum(axis=1, keepdims=True))
    out = poses.copy()
    side = list(cut.side)
    off = ((poses[:, side] - a[:, None]) * normal[:, None]).sum(axis=2, keepdims=True)
    out[:, side] -= 2.0 * off * normal[:, None]
    return out


def all_reflected(pose: Array, cuts: Sequence[Cut]) -> Array:
    """All ``2 ** len(cuts)`` poses ``(m, n_joints, 2)`` from one ``(n_joints, 2)``."""
    poses = pose[None]
    for cut in cuts:
        poses = np.concatenate([poses, reflected(poses, cut)])
    return poses
