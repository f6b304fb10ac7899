"""What `check` found out about a rig: for code as fields, for people as a note."""

from __future__ import annotations

from collections.abc import Callable, Iterator, Mapping
from dataclasses import asdict, dataclass, field
from typing import TypeVar

from rigpose.ground.errors import Problem
from rigpose.solve.closing import Gap
from rigpose.solve.redundant import Redundancy
from rigpose.solve.rounded import Rounding
from rigpose.solve.suggest import WEAK, Suggestion
from rigpose.solve.words import amount, count, large, listed

T = TypeVar("T")
SHOWN = 4
MOST_WRITTEN = 10**300
"""Counts from here on are written as text: what reads JSON would take them for infinite."""


@dataclass(frozen=True)
class Moving:
    """Joints that still move together, without the other groups; ``freedoms`` of them."""

    joints: tuple[str, ...]
    freedoms: int


@dataclass(frozen=True)
class BranchGroup:
    """Joints whose branches are chosen together, at most ``branches`` (None: no bound known)."""

    joints: tuple[str, ...]
    branches: int | None


@dataclass(frozen=True, kw_only=True)
class Report:
    """What a rig can do before anyone animates it. Lengths are in the rig's unit.

    joints, bones : how many; size : the largest distance between two joints at rest
    misfit : the largest departure of a length at rest, a fraction of the size; worst : its part
    moved : joints that rest moves from their written places, and how far
    unplaced : joints that have no written place; rest has found one
    freedoms : finite mobility; freedoms_first_order : by rank at rest; freedoms_counted :
    coordinates less conditions; why : how they come to differ, in words; None : not known
    moving : groups that still move; loose : joints that nothing holds
    redundant : sets of which any one part could go; rounding : motions that rounding has stopped
    gaps : lengths that can never close; suggestions : what makes the poses finite, best first
    groups : for a rig that doesn't move, its independent groups with their branches
    slack, close : the rig's tolerances, fractions of the size
    measured : whether redundant lengths were looked for (False: not all, as the rig is large)
    stopped : whether the caller stopped the work, so that the later fields are empty
    """

    name: str
    dim: int
    unit: str
    joints: int
    bones: int
    size: float
    misfit: float
    worst: str
    moved: Mapping[str, float]
    slack: float
    close: float
    unplaced: tuple[str, ...] = ()
    freedoms: int | None = 0
    freedoms_first_order: int | None = 0
    freedoms_counted: int = 0
    why: tuple[str, ...] = ()
    moving: tuple[Moving, ...] = ()
    loose: tuple[str, ...] = ()
    redundant: tuple[Redundancy, ...] = ()
    rounding: tuple[Rounding, ...] = ()
    gaps: tuple[Gap, ...] = ()
    suggestions: tuple[Suggestion, ...] = ()
    groups: tuple[BranchGroup, ...] = ()
    measured: bool = True
    stopped: bool = False
    problems: tuple[Problem, ...] = field(default=())

    @property
    def assembles(self) -> bool:
        """Whether all lengths hold at rest within `slack`."""
        return self.misfit <= self.slack

    @property
    def finite(self) -> bool:
        """Whether the rig has a finite number of poses as it is."""
        return self.assembles and self.freedoms == 0

    def as_dict(self) -> dict[str, object]:
        """Plain values for JSON; the keys are stable."""
        plain = asdict(self)
        plain["redundant"] = [{"any_one_of": list(r.parts), "last": r.last, "off": r.off}
                              for r in self.redundant]
        plain["gaps"] = [{**asdict(g), "short": g.short} for g in self.gaps]
        plain["suggestions"] = [{**asdict(s), "names": s.names} for s in self.suggestions]
        plain["moved"] = dict(self.moved)
        for told in (*plain["suggestions"], *plain["groups"]):
            if told["branches"] is not None and told["branches"] >= MOST_WRITTEN:
                told["branches"] = large(told["branches"])
        return plain

    def __str__(self) -> str:
        return "\n".join(self._note())

    def _note(self) -> Iterator[str]:
        yield (f"{self.name}: {count(self.joints, 'joint')}, {count(self.bones, 'bone')}, "
               f"{amount(self.size)} {self.unit} across.")
        yield self._rest()
        yield from self._short(self.gaps, self._gap, "lengths that can never close")
        if self.loose:
            yield f"Nothing holds {listed(self.loose)}."
        if self.freedoms is None:
            yield f"Freedoms: not known; counted {self.freedoms_counted}."
        else:
            yield (f"Freedoms: {self.freedoms}; to first order {self.freedoms_first_order}; "
                   f"counted {self.freedoms_counted}.")
        yield from (f"  {sentence}" for sentence in self.why)
        yield from self._short(self.moving, self._mover, "groups that move")
        yield from self._short(self.redundant, self._set, "redundant sets")
        yield from self._short(self.rounding, self._rounded, "motions stopped by rounding")
        yield from self._branches()
        yield (f"Tolerances: slack {amount(self.slack * self.size)} {self.unit} between numbers "
               f"of the file, close {amount(self.close * self.size)} {self.unit} to a target.")
        if self.stopped:
            yield "Stopped before the end; what stands above is all that was looked at."

    @staticmethod
    def _short(items: tuple[T, ...], say: Callable[[T], str], what: str) -> Iterator[str]:
        yield from map(say, items[:SHOWN])
        if len(items) > SHOWN:
            yield f"  and {len(items) - SHOWN} more {what}."

    def _rest(self) -> str:
        if not self.assembles:
            return (f"It does not assemble: at best '{self.worst}' is off by "
                    f"{amount(self.misfit * self.size)} {self.unit}.")
        if len(self.unplaced) == self.joints:
            return "At rest all lengths hold; the file gives no places, so they were found."
        found = "" if not self.unplaced else (
            f"; places were found for {listed(self.unplaced, SHOWN)}")
        if not self.moved:
            which = "placed joint" if self.unplaced else "joint"
            return f"At rest all lengths hold, with every {which} where the file puts it{found}."
        far = sorted(self.moved.items(), key=lambda pair: -pair[1])
        text = ", ".join(f"{name} by {amount(d)} {self.unit}" for name, d in far[:SHOWN])
        more = f" and {len(far) - SHOWN} more" if len(far) > SHOWN else ""
        return f"At rest all lengths hold once these joints move: {text}{more}{found}."

    def _gap(self, g: Gap) -> str:
        return (f"Can never close: '{g.part}' holds {g.ends[0]} and {g.ends[1]} "
                f"{amount(g.least)} {self.unit} apart, but {listed(g.chain)} "
                f"{'reaches' if len(g.chain) == 1 else 'reach'} {amount(g.reach)}: "
                f"{amount(g.short)} {self.unit} short.")

    @staticmethod
    def _mover(m: Moving) -> str:
        return f"Moves with {count(m.freedoms, 'freedom')}: {listed(m.joints)}."

    def _set(self, r: Redundancy) -> str:
        if len(r.parts) == 1:
            return f"Redundant: {r.last} lies between joints that are held without it."
        agree = "they agree" if abs(r.off) < 1e-12 * self.size else (
            f"'{r.last}' departs from the others by {amount(abs(r.off))} {self.unit}")
        return f"Redundant: any one of {listed(r.parts)}; {agree}."

    def _rounded(self, r: Rounding) -> str:
        text = (f"Nearly moves: with a slack of {amount(r.slack)} it would have "
                f"{count(r.freedoms, 'freedom')}.")
        if r.mends:
            mends = ", ".join(f"'{m.part}' from {amount(m.length, 7)} to {amount(m.better, 7)} "
                              f"{self.unit}" for m in r.mends)
            text += f" Or change {mends}"
            text += "." if r.left < 1e-9 else f"; a slack of {amount(r.left)} is enough then."
        return text

    def _branches(self) -> Iterator[str]:
        if self.suggestions:
            yield "To make its poses finite, best first:"
        best = self._best()
        for s in best:
            how = "joint by joint" if s.block == 1 else f"{s.block} joints at once"
            most = "" if s.branches is None else f", at most {count(s.branches, 'pose')}"
            weakly = ", but weakly" if s.margin is not None and s.margin < WEAK else ""
            yield f"  {listed(s.names, SHOWN)}: {how}{most}{weakly}."
        if len(self.suggestions) > len(best):
            yield f"  and {count(len(self.suggestions) - len(best), 'more way')}."
        yield from self._short(self.groups, self._group, "independent groups")

    def _best(self) -> list[Suggestion]:
        """The first of all, and the first of each kind after it."""
        first: dict[tuple[bool, bool, bool], Suggestion] = {}
        for s in self.suggestions:
            first.setdefault((bool(s.drives), bool(s.targets), bool(s.lengths)), s)
        return list(first.values())[:SHOWN]

    @staticmethod
    def _group(g: BranchGroup) -> str:
        most = "no bound is known" if g.branches is None else f"at most {large(g.branches)}"
        return f"Branches of {listed(g.joints)}: {most}."
