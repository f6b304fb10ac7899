"""Choosing the row of a shot among the branches of its first frame."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from rigpose.ground.errors import Problem
from rigpose.model.equations import Array
from rigpose.motion.branchset import Branches
from rigpose.motion.shot import Shot

SAME = 1e-6
"""Two places nearer than this part of the size are one place, as far as a choice goes."""


@dataclass(frozen=True)
class Choice:
    """Which branch of the first frame a shot takes: its ``number``, -1 where none is taken, and
    the problems that say why; ``others`` fit as well."""

    number: int
    problems: tuple[Problem, ...] = ()
    notes: tuple[str, ...] = ()


def choose(shot: Shot, branches: Branches) -> Choice:
    """The branch that a shot's `branch` and `near` ask for; of several, the nearest to rest.

    Never picks silently: where bends and place disagree, or where two branches are equally near
    to the place, the choice is -1 and says so.
    """
    if not len(branches):
        return Choice(-1, (_nothing(shot, branches),))
    fitting = branches.fitting(asked(shot))
    if not len(fitting):
        return Choice(-1, (_no_such(shot, branches),))
    if not shot.near:
        return Choice(int(fitting[0]))
    away = _away(shot, branches.positions[:, 0])
    best = int(np.argmin(away))
    if best not in fitting and away[best] < away[fitting].min() - SAME * branches.size:
        return Choice(-1, (_disagree(shot, branches, best, fitting, away),))
    mine = int(fitting[np.argmin(away[fitting])])
    equal = fitting[away[fitting] <= away[mine] + SAME * branches.size]
    if len(equal) > 1:
        return Choice(-1, (_undecided(shot, branches, equal),))
    return Choice(mine)


def asked(shot: Shot) -> Mapping[str, str]:
    """The bends that a shot asks for, by joint."""
    if isinstance(shot.branch, str):
        return shot.rig.branches[shot.branch]
    return shot.branch or {}


def _away(shot: Shot, poses: Array) -> Array:
    """Root mean square distance ``(n_branches,)`` of the joints in `near` from their places."""
    joints = [shot.rig.index[j] for j in shot.near]
    places = np.array([shot.near[j] for j in shot.near])
    gap = poses[:, joints] - places
    away: Array = np.sqrt((gap * gap).sum(axis=(1, 2)) / len(joints))
    return away


def _told(shot: Shot) -> str:
    if isinstance(shot.branch, str):
        return f'"{shot.branch}"'
    return " ".join(f"{j}:{b}" for j, b in (shot.branch or {}).items())


def _nothing(shot: Shot, branches: Branches) -> Problem:
    return Problem(shot.source, "", "some frame assembles", "none",
                   "; ".join(branches.notes) or "look at the lengths, drives and targets")


def _no_such(shot: Shot, branches: Branches) -> Problem:
    names = ", ".join(branches.names[:6]) + (", …" if len(branches) > 6 else "")
    return Problem(shot.source, "branch", "some branch of the first frame has these bends",
                   _told(shot), f"there are {names}")


def _disagree(shot: Shot, branches: Branches, best: int, fitting: NDArray[np.intp],
              away: Array) -> Problem:
    mine = int(fitting[np.argmin(away[fitting])])
    return Problem(
        shot.source, "near", "the branch with these bends is the one nearest to the place",
        f"{branches.names[best]} is {away[best]:.6g} {shot.rig.unit} away and "
        f"{branches.names[mine]} {away[mine]:.6g}",
        "the rig has changed since this was chosen: choose again, and save bends and place anew")


def _undecided(shot: Shot, branches: Branches, equal: NDArray[np.intp]) -> Problem:
    names = " and ".join(branches.names[int(k)] for k in equal[:4])
    return Problem(shot.source, "near", "the place tells one branch from the others",
                   f"{names} are equally near", "add the place of a joint that differs")
