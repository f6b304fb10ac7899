"""Why nothing assembles: the parts that can't meet, where a set of branches is empty."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from rigpose.ground.budget import Budget
from rigpose.model.equations import Array
from rigpose.motion.branchset import Branches
from rigpose.motion.explain import explain
from rigpose.solve.clock import Clock, sampled
from rigpose.solve.flow import has_choice
from rigpose.solve.planner import plan_for
from rigpose.solve.rest import find_rest
from rigpose.solve.search import Context


def why_nothing(found: Branches) -> tuple[str, ...]:
    """What holds back where a set has no branches, a sentence each; none where it has some."""
    if len(found):
        return ()
    rest, knowns = find_rest(found.rig), found.knowns
    plan = plan_for(found.rig, knowns.drive_names, knowns.target_names)
    return reasons_at(Context(rest, plan, Budget()), sampled(rest.equations, knowns), found.frames)


def reasons_at(context: Context, clock: Clock, frames: Array) -> tuple[str, ...]:
    """Why no frame of a clock, with numbers ``frames (n_frames,)``, has a pose.

    Every choice is made to go left, then every one right: each way may fail at another part.
    Most often both say the same, and then it is said once.
    """
    choices = [sum(map(has_choice, group.steps)) for group in context.plan.groups]
    dead = np.zeros(len(frames), dtype=bool)

    def whys(sign: float) -> list[str]:
        def signs(group: int, which: NDArray[np.intp]) -> Array:
            return np.full((choices[group], len(which)), sign)

        return [span.why for span in explain(context, clock, frames, dead, signs)]

    return tuple(dict.fromkeys(whys(1.0) + whys(-1.0)))
