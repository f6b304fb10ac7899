"""Why nothing assembles: the parts that can't meet, for a person who asked for one pose."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from rigpose.ground.budget import Budget
from rigpose.motion.branches import choice_steps, plan_of
from rigpose.motion.branchset import Branches
from rigpose.motion.explain import explain
from rigpose.solve.clock import sampled
from rigpose.solve.rest import find_rest
from rigpose.solve.search import Context


def why_nothing(found: Branches) -> tuple[str, ...]:
    """What holds back when every choice goes left, and when every one goes right.

    ``found`` has no branches. Most often both say the same, and then it is said once.
    """
    rest = find_rest(found.rig)
    context = Context(rest, plan_of(rest, found.knowns), Budget())
    clock = sampled(rest.equations, found.knowns)
    choices = [len(choice_steps(group)) for group in context.plan.groups]
    dead = np.zeros(len(found.frames), dtype=bool)

    def whys(sign: float) -> list[str]:
        def signs(group: int, frames: NDArray[np.intp]) -> NDArray[np.float64]:
            return np.full((choices[group], len(frames)), sign)

        return [span.why for span in explain(context, clock, found.frames, dead, signs)]

    return tuple(dict.fromkeys(whys(1.0) + whys(-1.0)))
