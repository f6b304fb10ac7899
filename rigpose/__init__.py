"""rigpose poses mechanical linkages for keyframed shots: every assembly, every length kept.

Names are loaded when they are first asked for (PEP 562), so that `import rigpose` costs next to
nothing in a pipeline that may never pose anything.
"""

from importlib import import_module
from typing import TYPE_CHECKING

if TYPE_CHECKING:
    from rigpose.files.flat import flat_text
    from rigpose.files.motionfile import Difference, compare, load_motion, save_motion, save_values
    from rigpose.files.rigfile import load_rig
    from rigpose.files.shotfile import load_shot
    from rigpose.files.start import start_text
    from rigpose.ground.budget import Budget, Watch
    from rigpose.ground.errors import BadInput, Problem, RigposeError, Unsolvable
    from rigpose.ground.words import Found, State
    from rigpose.model.judge import judge
    from rigpose.model.make import make_rig
    from rigpose.model.rig import Rig
    from rigpose.motion.bake import bake, branch_map
    from rigpose.motion.branches import find_branches
    from rigpose.motion.branchset import Branches
    from rigpose.motion.channels import channels
    from rigpose.motion.choose import choose
    from rigpose.motion.counting import Count, branches_from_one, count_branches, flip
    from rigpose.motion.motion import Event, Motion, Span
    from rigpose.motion.nearest import nearest_branch
    from rigpose.motion.shot import Key, Shot
    from rigpose.motion.streaming import stream_branches
    from rigpose.solve.report import Report, check
    from rigpose.solve.rest import Rest, find_rest

__version__ = "0.1.0"

__all__ = [
    "BadInput", "Branches", "Budget", "Count", "Difference", "Event", "Found", "Key", "Motion",
    "Problem", "Report", "Rest", "Rig", "RigposeError", "Shot", "Span", "State", "Unsolvable",
    "Watch", "bake", "branch_map", "branches_from_one", "channels", "check", "choose", "compare",
    "count_branches", "find_branches", "find_rest", "flat_text", "flip", "judge", "load_motion",
    "load_rig", "load_shot", "make_rig", "nearest_branch", "save_motion", "save_values",
    "start_text", "stream_branches",
]

_HOMES = {
    "rigpose.files.flat": "flat_text",
    "rigpose.files.motionfile": "Difference compare load_motion save_motion save_values",
    "rigpose.files.rigfile": "load_rig",
    "rigpose.files.shotfile": "load_shot",
    "rigpose.files.start": "start_text",
    "rigpose.ground.budget": "Budget Watch",
    "rigpose.ground.errors": "BadInput Problem RigposeError Unsolvable",
    "rigpose.ground.words": "Found State",
    "rigpose.model.judge": "judge",
    "rigpose.model.make": "make_rig",
    "rigpose.model.rig": "Rig",
    "rigpose.motion.bake": "bake branch_map",
    "rigpose.motion.branches": "find_branches",
    "rigpose.motion.branchset": "Branches",
    "rigpose.motion.channels": "channels",
    "rigpose.motion.choose": "choose",
    "rigpose.motion.counting": "Count branches_from_one count_branches flip",
    "rigpose.motion.motion": "Event Motion Span",
    "rigpose.motion.nearest": "nearest_branch",
    "rigpose.motion.shot": "Key Shot",
    "rigpose.motion.streaming": "stream_branches",
    "rigpose.solve.report": "Report check",
    "rigpose.solve.rest": "Rest find_rest",
}
_HOME_OF = {name: module for module, names in _HOMES.items() for name in names.split()}


def __getattr__(name: str) -> object:
    if name not in _HOME_OF:
        raise AttributeError(f"module {__name__!r} has no attribute {name!r}")
    found: object = getattr(import_module(_HOME_OF[name]), name)
    globals()[name] = found
    return found


def __dir__() -> list[str]:
    return sorted({*globals(), *__all__})
