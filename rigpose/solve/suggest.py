"""What would make a moving rig's poses finite, best first.

Of all sets that hold a group, a few of each kind with the largest margins are planned; they are
ordered by the largest block that must be solved together, then by branches, then as in the file.
"""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from dataclasses import dataclass, replace

from rigpose.model.rig import Bone, Pair, Rig
from rigpose.solve.bounds import branch_bound
from rigpose.solve.candidates import Candidate, Choice, candidates, choices
from rigpose.solve.moving import Mover
from rigpose.solve.plan import Group, Plan
from rigpose.solve.planner import plan_for
from rigpose.solve.rest import Rest
from rigpose.solve.structure import Order

WEAK = 1e-2
"""A margin below this is told as weak and comes last."""
AXES = "xyz"
PER_KIND = 8
MOST_NAMED = 64
"""Drives and targets that a person would still read."""
PLANS = 1500
"""Joints times plans: a larger rig gets fewer plans."""


@dataclass(frozen=True)
class Suggestion:
    """Drives, target coordinates and extra lengths that together make the poses finite.

    block : how many joints must be solved together at most (1: each has a closed form)
    branches : how many poses at most (None: no bound is known)
    margin : the least margin that they give where the rig was tried, 0 to 1 (None: not measured)
    """

    drives: tuple[str, ...]
    targets: tuple[tuple[str, int], ...]
    lengths: tuple[Pair, ...]
    block: int
    branches: int | None
    margin: float | None

    @property
    def names(self) -> tuple[str, ...]:
        """Each of them in words."""
        return (*(f"drive {d}" for d in self.drives),
                *(f"target {j}.{AXES[a]}" for j, a in self.targets),
                *(f"a length from {a} to {b}" for a, b in self.lengths))

    def __str__(self) -> str:
        return " and ".join(self.names)


def suggestions(rest: Rest, groups: Sequence[Mover], most: int = 24) -> tuple[Suggestion, ...]:
    """Sets that hold all groups, at most ``most``, best first; none where a group has none."""
    ranked = [_for_group(rest, group) for group in groups]
    if not ranked or not all(ranked):
        return ()
    longest = min(most, max(map(len, ranked)))
    return tuple(_joined([r[min(k, len(r) - 1)] for r in ranked]) for k in range(longest))


def _joined(parts: list[Suggestion]) -> Suggestion:
    branches: int | None = 1
    for p in parts:
        branches = None if branches is None or p.branches is None else branches * p.branches
    return Suggestion(
        tuple(d for p in parts for d in p.drives), tuple(t for p in parts for t in p.targets),
        tuple(x for p in parts for x in p.lengths), max(p.block for p in parts), branches,
        min((p.margin for p in parts if p.margin is not None), default=None))


def _for_group(rest: Rest, group: Mover) -> list[Suggestion]:
    eqs = rest.equations
    every = choices(group, candidates(eqs, group), eqs.dim)
    per_kind = max(1, min(PER_KIND, PLANS // (4 * eqs.n)))
    found = [(place, _planned(rest, group, choice)) for place, choice in _few(every, per_kind)]
    found.sort(key=lambda pair: _rank(pair[1], pair[0]))
    return [s for _, s in found]


def _rank(s: Suggestion, place: int) -> tuple[bool, int, bool, int, int]:
    weak = s.margin is not None and s.margin < WEAK
    return (weak, s.block, s.branches is None, s.branches or 0, place)


def _few(every: list[Choice], most: int) -> Iterator[tuple[int, Choice]]:
    """Of each mixture of kinds those with the largest margins, with their place in the order."""
    numbered = list(enumerate(every))
    for kinds in dict.fromkeys(c.kinds for c in every):
        same = [(k, c) for k, c in numbered if c.kinds == kinds]
        same.sort(key=lambda pair: (-round(pair[1].margin, 2), pair[0]))
        yield from same[:most]


def _planned(rest: Rest, group: Mover, choice: Choice) -> Suggestion:
    drives = tuple(c.drive for c in choice.members if c.kind == "drive")
    targets = tuple(c.target for c in choice.members if c.kind == "target")
    lengths = tuple(c.ends for c in choice.members if c.kind == "length")
    rig = _braced(rest, [c for c in choice.members if c.kind == "length"])
    plan = plan_for(rig, frozenset(drives), frozenset(targets))
    joints = {int(j) for j in group.joints}
    return Suggestion(drives, targets, lengths, _block(plan, joints), _bound(plan, joints),
                      choice.margin)


def _braced(rest: Rest, lengths: list[Candidate]) -> Rig:
    """The rig at its rest pose with bones added; their lengths are those at rest."""
    if not lengths:
        return rest.rig
    rig, bones = rest.rig, list(rest.rig.bones)
    places = rest.equations.outward(rest.scaled)
    for c in lengths:
        a, b = (places[rig.index[j]] for j in c.ends)
        name = "from {} to {}".format(*c.ends)
        bones.append(Bone(name=name, ends=c.ends, length=float(((a - b) ** 2).sum() ** 0.5)))
    return replace(rig, bones=tuple(bones))


def _mine(plan: Plan, joints: set[int]) -> list[Group]:
    return [g for g in plan.groups if joints & set(g.joints)]


def _block(plan: Plan, joints: set[int]) -> int:
    """The most joints solved together; what the plan leaves loose counts as a block."""
    mine = [len(c.joints) for c in plan.clusters if joints & set(c.joints)]
    loose = len(joints & set(plan.loose))
    return max([1, *mine, loose + 1 if loose else 1])


def _bound(plan: Plan, joints: set[int]) -> int | None:
    if joints & set(plan.loose):
        return None
    total: int | None = 1
    for group in _mine(plan, joints):
        bound = branch_bound(group)
        total = None if total is None or bound is None else total * bound
    return total


def suggestion_of(rest: Rest, order: Order) -> Suggestion | None:
    """For a rig too large to try many: the joints that were taken as given, as drives where one
    moves such a joint, else as targets."""
    eqs = rest.equations
    drives, targets = [], []
    for start in order.starts:
        if start.drive >= 0:
            drives.append(eqs.values[start.drive])
        elif start.free in (1, eqs.dim):
            axes = range(eqs.dim) if start.free > 1 else (start.axis,)
            targets += [(eqs.rig.joint_names[start.joint], axis) for axis in axes]
        else:
            return None
    if len(drives) + len(targets) > MOST_NAMED:
        return None
    return Suggestion(tuple(drives), tuple(targets), (), 1, 1 << order.choices, None)
