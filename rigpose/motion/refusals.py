"""Saying what still moves, and which targets ask for what a joint can't do."""

from __future__ import annotations

from typing import NoReturn

import numpy as np

from rigpose.ground.errors import BadInput, Problem
from rigpose.model.equations import Array
from rigpose.model.gauges import measure
from rigpose.model.system import System
from rigpose.solve.knowns import AXES, Knowns
from rigpose.solve.nearby import nearby
from rigpose.solve.plan import Plan
from rigpose.solve.rest import DENSE, Rest

STILL = 1e-7


def refuse_loose(rest: Rest, plan: Plan, knowns: Knowns) -> NoReturn:
    """Raise BadInput with the joints that still move, and what would hold them."""
    names = rest.rig.joint_names
    loose = [names[j] for j in plan.loose]
    told = ", ".join(loose[:8]) + (f" and {len(loose) - 8} more" if len(loose) > 8 else "")
    open_drives = [d for d in rest.rig.drive_names if d not in knowns.drives]
    mend = (f"drive {' or '.join(open_drives[:4])}, or give a joint a target" if open_drives
            else f"give a target, for one of {told}")
    problems = [Problem(rest.rig.source, "", "drives and targets leave nothing that moves",
                        f"{told} still move{'' if len(loose) > 1 else 's'}", mend)]
    problems += [Problem(rest.rig.source, f'target "{t}"', "asks for a way that its joint can go",
                         "a way along which it can't move", "target another coordinate")
                 for t in _useless(rest, knowns.drives.keys(), plan.targets)]
    raise BadInput(problems)


def useless_targets(rest: Rest, plan: Plan) -> tuple[str, ...]:
    """A sentence for each target along which its joint can't move."""
    if not plan.targets:
        return ()
    return tuple(f"target {t}: the joint can't move that way, so this only checks where it is"
                 for t in _useless(rest, plan.drives, plan.targets))


def _useless(rest: Rest, drives: object, targets: tuple[tuple[int, int], ...]) -> list[str]:
    """Targets whose coordinate no motion changes, at rest and close by, drives being held."""
    if rest.scaled.size > DENSE or not targets:
        return []
    eqs = rest.equations
    known = frozenset(eqs.value_index[str(d)] for d in drives)  # type: ignore[attr-defined]
    system = System(eqs, known)
    most = np.zeros(len(targets))
    columns = [j * eqs.dim + axis for j, axis in targets]
    for x in nearby(rest):
        most = np.maximum(most, _movement(system, x)[columns])
    joints = rest.rig.joint_names
    return [f"{joints[j]}.{AXES[axis]}" for (j, axis), m in zip(targets, most, strict=True)
            if m < STILL]


def _movement(system: System, x: Array) -> Array:
    """How much each coordinate takes part in the motions of first order."""
    values = np.full((1, len(system.eqs.values)), np.nan)
    numbers = np.arange(len(system.eqs.values))
    values[0] = measure(system.eqs, x[None], numbers)[0]
    _, jacobian = system.both(x[None], values)
    _, s, vt = np.linalg.svd(jacobian[0][:, system.free], full_matrices=True)
    rank = int((s > STILL).sum())
    out = np.zeros(x.size)
    out[system.free] = np.abs(vt[rank:]).max(axis=0, initial=0.0)
    return out
