"""A motion: one row of poses over frames, with what can be read off it."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field
from fractions import Fraction
from functools import cached_property

import numpy as np
from numpy.typing import NDArray

from rigpose.ground.errors import Problem
from rigpose.ground.words import Found, State
from rigpose.model.equations import Array
from rigpose.model.judge import judge
from rigpose.model.rig import Rig
from rigpose.motion.gauges import read_value
from rigpose.solve.knowns import Knowns


@dataclass(frozen=True, slots=True)
class Event:
    """Something that happens on a row.

    frame : its frame number, with fractions of a frame
    kind : passed (a dead centre, straight through), touched (a dead centre, back on the same
    side), gap (no pose for less than a frame)
    joints : the joints that are placed there; parts : the parts that meet
    """

    frame: float
    kind: str
    joints: tuple[str, ...]
    parts: tuple[str, ...]

    def __str__(self) -> str:
        what = {"passed": "passes a dead centre", "touched": "touches a dead centre and turns back",
                "gap": "opens for less than a frame"}.get(self.kind, self.kind)
        return f"frame {self.frame:.9g}: {', '.join(self.joints)} {what} ({', '.join(self.parts)})"


@dataclass(frozen=True, slots=True)
class Span:
    """Frames ``first`` … ``last`` that don't assemble, the parts that hold back, and why."""

    first: float
    last: float
    parts: tuple[str, ...]
    why: str

    def __str__(self) -> str:
        frames = (f"frame {self.first:g}" if self.first == self.last
                  else f"frames {self.first:g} … {self.last:g}")
        return f"{frames}: {self.why}"


@dataclass(frozen=True, eq=False, repr=False)
class Motion:
    """Poses over frames. All arrays are read-only.

    frames : (n_frames,) frame numbers; positions : (n_frames, n_joints, dim) in the rig's frame,
    NaN without a pose; state : (n_frames,) `State`; margin : (n_frames,) float32
    name, bends : of its branch at the first frame; spans : frames that don't assemble
    worst : the largest departure of any length but redundant ones, a fraction of the size
    """

    rig: Rig
    frames: Array
    positions: Array
    state: NDArray[np.uint8]
    margin: NDArray[np.float32]
    name: str
    bends: Mapping[str, str]
    knowns: Knowns
    size: float
    found: Found = Found.COMPLETE
    read: Mapping[str, Array] = field(default_factory=dict)
    events: tuple[Event, ...] = ()
    spans: tuple[Span, ...] = ()
    problems: tuple[Problem, ...] = ()
    redundant: frozenset[str] = frozenset()
    fps: Fraction = Fraction(24)
    title: str = ""
    notes: tuple[str, ...] = ()

    def __len__(self) -> int:
        return len(self.frames)

    def __repr__(self) -> str:
        return f"<Motion of {self.rig.name!r}: {len(self)} frames, branch {self.name!r}>"

    def __getitem__(self, joint: str) -> Array:
        """A joint's path, (n_frames, dim). Raises KeyError for an unknown joint."""
        path: Array = self.positions[:, self.rig.index[joint]]
        return path

    @property
    def joints(self) -> tuple[str, ...]:
        """Joint names in the order of the arrays."""
        return self.rig.joint_names

    @property
    def ok(self) -> bool:
        """Whether every frame has a pose and no problem was found."""
        return not self.problems and bool((self.state == State.MET).all())

    @cached_property
    def _verdict(self) -> tuple[float, str, float, str]:
        verdict = judge(self.rig, self.positions, self.size)
        kept, part = verdict.worst(self.redundant)
        every, surplus = verdict.worst()
        return kept, part, every, surplus

    @property
    def worst(self) -> float:
        """The largest departure of a length, redundant ones left out, as a part of the size."""
        return self._verdict[0]

    @property
    def beyond_floats(self) -> float:
        """As `worst`, less what float64 cannot hold so far from the origin."""
        return judge(self.rig, self.positions, self.size).worst(self.redundant, True)[0]

    @property
    def worst_part(self) -> str:
        """The part with that departure."""
        return self._verdict[1]

    @property
    def worst_redundant(self) -> float:
        """The largest departure of any length, redundant ones too."""
        return self._verdict[2]

    def value(self, name: str) -> Array:
        """A drive, a gauge or a limit's angle, (n_frames,), degrees or the rig's unit.

        Angles go on from frame to frame: two turns and five degrees are 725. Raises KeyError for
        an unknown name.
        """
        if name in self.knowns.drives:
            return self.knowns.drives[name]
        if name in self.read:
            return self.read[name]
        return read_value(self.rig, self.positions, name)

    @property
    def value_names(self) -> tuple[str, ...]:
        """All that `value` knows: cranks, rams, rails, then limits."""
        return (*self.rig.drive_names, *(m.name for m in self.rig.limits))

    def note(self) -> str:
        """What happened, in a few lines for a person."""
        missing = int((self.state == State.NONE).sum())
        row = f", branch {self.name}" if self.name else ", no branch taken"
        lines = [f"{len(self)} frames of {self.rig.name}{row}: "
                 + (f"{missing} without a pose" if missing else "every frame has a pose")]
        lines += [str(s) for s in self.spans]
        lines += [str(p) for p in self.problems]
        lines += self.notes
        lines += [str(e) for e in self.events[:12]]
        if len(self.events) > 12:
            lines.append(f"and {len(self.events) - 12} more events")
        return "\n".join(lines)
