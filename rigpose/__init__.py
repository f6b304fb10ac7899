"""rigpose poses mechanical linkages for keyframed shots: every assembly, every length kept."""

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
from rigpose.solve.rest import Rest, find_rest

__version__ = "0.1.0"

__all__ = [
    "BadInput", "Branches", "Budget", "Count", "Difference", "Event", "Found", "Key", "Motion",
    "Problem", "Rest", "Rig", "RigposeError", "Shot", "Span", "State", "Unsolvable", "Watch",
    "bake", "branch_map", "branches_from_one", "channels", "choose", "compare", "count_branches",
    "find_branches", "find_rest", "flat_text", "flip", "judge", "load_motion", "load_rig",
    "load_shot", "make_rig", "nearest_branch", "save_motion", "save_values", "start_text",
    "stream_branches",
]
