"""A set of branches over frames: what `find_branches` gives."""

from __future__ import annotations

from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass, field, replace
from functools import cached_property
from typing import Any

import numpy as np
from numpy.typing import NDArray

from rigpose.ground.errors import BadInput, Problem
from rigpose.ground.words import Found, State
from rigpose.model.bends import Signs, measure_bends
from rigpose.model.equations import Array
from rigpose.model.rig import Rig
from rigpose.motion.mirrors import mirror_images
from rigpose.motion.motion import Event, Motion
from rigpose.motion.naming import Names, name_by_sides, name_rows, wanted_signs
from rigpose.motion.sides import Sides
from rigpose.solve.knowns import Knowns

SOON = 256
"""Frames within which a row that begins at a dead centre is looked at for its bends."""


@dataclass(frozen=True, eq=False, repr=False)
class Branches:
    """Branches (rows) over frames, nearest to the rest pose first. All arrays are read-only.

    positions : (n_branches, n_frames, n_joints, dim) in the rig's frame, NaN without a pose
    state : (n_branches, n_frames) `State` as uint8
    margin : (n_branches, n_frames) float32, 0 at a dead centre, at most 1, NaN without a pose
    found : whether this is all there is
    groups : joints of each independent group; choice : (n_branches, n_groups) each group's branch
    count : how many branches there are altogether, the product over the groups
    meets : (n_branches,) two branches meet in this pose (of a single frame)
    """

    rig: Rig
    knowns: Knowns
    frames: Array
    positions: Array
    state: NDArray[np.uint8]
    margin: NDArray[np.float32]
    found: Found
    groups: tuple[tuple[str, ...], ...]
    choice: NDArray[np.intp]
    count: int
    size: float
    meets: NDArray[np.bool_]
    values: Mapping[str, Array] = field(default_factory=dict)
    events: tuple[tuple[Event, ...], ...] = ()
    notes: tuple[str, ...] = ()
    redundant: frozenset[str] = frozenset()
    sides: Sides | None = None

    def __len__(self) -> int:
        return len(self.positions)

    def __iter__(self) -> Iterator[Branches]:
        return (self.take([k]) for k in range(len(self)))

    def __repr__(self) -> str:
        return (f"<Branches of {self.rig.name!r}: {len(self)} over {len(self.frames)} frames, "
                f"{self.found.value}>")

    def __str__(self) -> str:
        frames = "" if len(self.frames) == 1 else f" over {len(self.frames)} frames"
        head = f"{self.rig.name}: {len(self)} branches{frames}, {self.found.value}"
        shown = [f"  {k + 1}. {name}" for k, name in enumerate(self.names[:20])]
        more = [f"  … and {len(self) - 20} more"] if len(self) > 20 else []
        return "\n".join([head, *shown, *more, *(f"  {note}" for note in self.notes)])

    @property
    def joints(self) -> tuple[str, ...]:
        """Joint names in the order of the arrays."""
        return self.rig.joint_names

    @cached_property
    def signs(self) -> Signs:
        """Bends ``(n_branches, n_bends)`` where each row begins.

        A row that begins at a dead centre has those of the first frame in which it has left it.
        """
        if self.sides is not None:
            return self.sides.all()
        signs = measure_bends(self.rig, self.first_poses)
        if len(self.frames) > 1:
            for row in np.flatnonzero((signs == 0).any(axis=1)):
                soon = measure_bends(self.rig, self.positions[row, :SOON])
                clear = np.flatnonzero((np.abs(soon) == 1).all(axis=1))
                if len(clear):
                    signs[row] = soon[clear[0]]
        return signs

    @cached_property
    def first_poses(self) -> Array:
        """``(n_branches, n_joints, dim)`` at each row's first frame with a pose."""
        if len(self.frames) == 1:
            only: Array = self.positions[:, 0]
            return only
        first = np.argmax(self.state > State.NONE, axis=1)
        poses: Array = self.positions[np.arange(len(self)), first]
        return poses

    @cached_property
    def names(self) -> Names:
        """One name a branch: the bends that tell it from the others."""
        inside = {j for group in self.groups for j in group}
        chosen = np.array([j in inside for j in self.joints], dtype=bool)
        if self.sides is not None:
            names = name_by_sides(self.rig, self.sides, self.meets, self._moved)
            if names is not None:
                return names
        return name_rows(self.rig, self.signs, self.meets, self._moved, chosen)

    @property
    def _moved(self) -> NDArray[np.bool_]:
        """(n_joints,) whether a joint's own place differs between branches."""
        moved = np.zeros(len(self.joints), dtype=bool)
        # Most that move do so within a few branches.
        for count in (16, 4096):
            still = np.flatnonzero(~moved)
            some = self.first_poses[:count, still]
            if some.size:
                moved[still] = np.ptp(some, axis=0).max(axis=1) > 1e-9 * self.size
        return moved

    @cached_property
    def mirror_of(self) -> tuple[int | None, ...]:
        """For each branch the number of the one that is its mirror image at the first frame."""
        pins = [k for k, j in enumerate(self.rig.joints) if j.pin]
        whole = [np.asarray(place[0]) for place in self.knowns.targets.values()
                 if not np.isnan(place[0]).any()]
        known = np.concatenate([self.positions[:1, 0, pins].reshape(-1, self.rig.dim),
                                np.array(whole).reshape(-1, self.rig.dim)])
        found = mirror_images(self.rig, self.positions[:, 0], known, self.size)
        return tuple(None if k < 0 else int(k) for k in found)

    def take(self, which: Sequence[int] | NDArray[np.intp]) -> Branches:
        """Some of the branches, in the given order."""
        k = np.asarray(which, dtype=np.intp)
        taken = replace(
            self, sides=None, positions=_sealed(self.positions[k]), state=_sealed(self.state[k]),
            margin=_sealed(self.margin[k]), choice=self.choice[k], meets=self.meets[k],
            values={n: a if len(a) == 1 else a[k] for n, a in self.values.items()},
            events=tuple(self.events[i] for i in k) if self.events else ())
        # A branch keeps the name that it has among all.
        taken.__dict__["signs"] = self.signs[k]
        taken.__dict__["names"] = Names(self.rig, self.signs[k], self.names.told,
                                        self.names._count[k], self.meets[k])
        return taken

    def pick(self, name: str | int | None = None, /, **bends: str) -> Branches:
        """The branches with these bends, e.g. ``pick(elbow="left")``.

        name : a branch's name, its number, or a name from the rig's [branches]

        Raises BadInput where no branch fits, with what there is.
        """
        if isinstance(name, int):
            return self.take([range(len(self))[name]])
        wanted = dict(bends)
        if name is not None and name in self.rig.branches:
            wanted |= dict(self.rig.branches[name])
        elif name is not None:
            return self.take([self._named(name)])
        fitting = self.fitting(wanted)
        if not len(fitting):
            asked = " ".join(f"{j}:{w}" for j, w in wanted.items())
            raise BadInput(Problem(self.rig.source, asked, "some branch has these bends", "none",
                                   f"there are {_some(self.names)}"))
        return self.take(fitting)

    def fitting(self, bends: Mapping[str, str]) -> NDArray[np.intp]:
        """Numbers of the branches with these bends; where two branches meet, with either's."""
        ok = np.ones(len(self), dtype=bool)
        for k, sign in wanted_signs(self.rig, bends).items():
            ok &= (self.signs[:, k] == sign) | (self.meets & (self.signs[:, k] == 0))
        return np.flatnonzero(ok)

    def _named(self, name: str) -> int:
        for k, mine in enumerate(self.names):
            if name in (mine, *mine.split(" = ")):
                return k
        raise BadInput(Problem(self.rig.source, f'branch "{name}"', "there is one of this name",
                               "none", f"there are {_some(self.names)}"))

    def motion(self) -> Motion:
        """The only row as a motion. Raises BadInput where there are none or several."""
        if len(self) != 1:
            what = f"there are {_some(self.names)}" if len(self) else "nothing assembles"
            raise BadInput(Problem(self.rig.source, "motion", "one branch is picked first",
                                   f"{len(self)} branches", f"{what}; use pick(…)"))
        return Motion(
            rig=self.rig, frames=self.frames, positions=self.positions[0], state=self.state[0],
            margin=self.margin[0], name=self.names[0], bends=self.names.bends(0),
            knowns=self.knowns, size=self.size, found=self.found,
            read={n: a[0] for n, a in self.values.items()},
            events=self.events[0] if self.events else (), redundant=self.redundant,
            notes=self.notes)


def _some(names: Names) -> str:
    shown = ", ".join(names[:6])
    return shown + (f", … ({len(names)} in all)" if len(names) > 6 else "")


def _sealed(array: Any) -> Any:
    array.flags.writeable = False
    return array
