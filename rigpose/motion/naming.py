"""Names of branches: the bends that tell them apart, and a count where bends can't."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from typing import overload

import numpy as np
from numpy.typing import NDArray

from rigpose.ground.errors import BadInput, Problem
from rigpose.model.bends import ALONG, SIDES, Bend, Signs, bends_of
from rigpose.model.rig import Rig
from rigpose.motion.sides import Sides


class Names(Sequence[str]):
    """Branch names, made when they are asked for.

    told : numbers of the bends that are told; count (n_branches,) tells rows of equal bends
    apart, 0 where there is nothing to tell
    """

    def __init__(self, rig: Rig, signs: Signs | Sides, told: Sequence[int], count: NDArray[np.intp],
                 meets: NDArray[np.bool_]) -> None:
        self._bends = bends_of(rig)
        self._joints, self._helpers = rig.joint_names, rig.helper_joints
        self._signs, self.told, self._count, self._meets = signs, tuple(told), count, meets

    def __len__(self) -> int:
        return len(self._meets)

    @overload
    def __getitem__(self, k: int) -> str: ...
    @overload
    def __getitem__(self, k: slice) -> list[str]: ...
    def __getitem__(self, k: int | slice) -> str | list[str]:
        if isinstance(k, slice):
            return [self[i] for i in range(*k.indices(len(self)))]
        row = range(len(self))[k]
        if self._meets[row]:
            # Two branches meet in this pose: it has both names.
            return " = ".join(dict.fromkeys(self._text(row, side) for side in (1, -1)))
        return self._text(row, 0)

    def _of(self, row: int) -> Signs:
        return self._signs.of(row) if isinstance(self._signs, Sides) else self._signs[row]

    def _text(self, row: int, straight: int) -> str:
        signs = self._of(row)
        words = [f"{self._joints[self._bends[b].joint]}:"
                 f"{self._bends[b].word(signs[b] or straight)}" for b in self.told]
        count = int(self._count[row])
        return " ".join([*words, f"#{count}"] if count else words) or "only"

    def bends(self, row: int) -> dict[str, str]:
        """Joint to its bend: the rig's own joints that have one, and what names tell."""
        signs = self._of(row)
        return {self._joints[b.joint]: b.word(signs[k])
                for k, b in enumerate(self._bends)
                if k in self.told or self._joints[b.joint] not in self._helpers}


def name_rows(rig: Rig, signs: Signs, meets: NDArray[np.bool_], moved: NDArray[np.bool_],
              chosen: NDArray[np.bool_]) -> Names:
    """Names for rows with bends ``(n_branches, n_bends)``, in the order of the rows.

    moved : (n_joints,) whether the joint's own place differs; such joints are told first, and
    helper joints only where the rig's own leave branches alike
    chosen : (n_joints,) whether it hangs on a choice: where two branches meet, its straight bend
    is the one that they would have to either side
    """
    bends = bends_of(rig)
    varies = [k for k in range(signs.shape[1]) if len(signs) and np.ptp(signs[:, k])]
    helper = np.array([rig.joints[b.joint].helper for b in bends], dtype=bool)
    varies.sort(key=lambda k: (helper[k], not moved[bends[k].joint]))
    told, classes = _telling(signs, varies)
    if meets.any():
        hangs = np.array([chosen[b.joint] for b in bends], dtype=bool)
        straight = (signs[meets] == 0) & hangs
        told += _untold(straight & ~helper, told)
        alike = ~straight[:, told].any(axis=1)  # both branches of these have one name yet
        told += _untold(straight[alike], told)
    return Names(rig, signs, told, _counts(classes), meets)


def _untold(straight: NDArray[np.bool_], told: Sequence[int]) -> list[int]:
    """Bends that are ``straight (n_meets, n_bends)`` in some pose and aren't told yet."""
    return [k for k in np.flatnonzero(straight.any(axis=0)).tolist() if k not in told]


def name_by_sides(rig: Rig, sides: Sides, meets: NDArray[np.bool_],
                  moved: NDArray[np.bool_]) -> Names | None:
    """Names of many rows where every combination of the bends that vary is there just once, so
    that all of these are told; else None."""
    told = None if meets.any() else sides.told()
    if told is None:
        return None
    bends = bends_of(rig)
    told.sort(key=lambda k: not moved[bends[k].joint])
    return Names(rig, sides, told, np.zeros(len(meets), dtype=np.intp), meets)


def _telling(signs: Signs, varies: Sequence[int]) -> tuple[list[int], NDArray[np.int64]]:
    """Bends kept in order while each tells more rows apart; a class for every row."""
    n = len(signs)
    if 2 ** len(varies) == n:
        # As many rows as two ways each can give: if none is there twice, every bend is needed.
        packed = _packed(signs, varies)
        if (np.bincount(packed, minlength=n) == 1).all():
            return list(varies), packed
    told: list[int] = []
    classes = np.zeros(n, dtype=np.int64)
    different = 1
    for k in varies:
        if different == n:
            break
        _, finer = np.unique(classes * 4 + signs[:, k] + 1, return_inverse=True)
        count = int(finer.max()) + 1
        if count > different:
            told.append(k)
            classes, different = finer.ravel().astype(np.int64), count
    return told, classes


def _packed(signs: Signs, varies: Sequence[int]) -> NDArray[np.int64]:
    packed = np.zeros(len(signs), dtype=np.int64)
    for k in varies:
        packed += packed
        packed += signs[:, k] > 0
    return packed


def _counts(classes: NDArray[np.int64]) -> NDArray[np.intp]:
    """1, 2, … within each class of more than one row, else 0."""
    if len(classes) and int(classes.max()) == len(classes) - 1:
        return np.zeros(len(classes), dtype=np.intp)  # all differ
    order = np.argsort(classes, kind="stable")
    ordered = classes[order]
    fresh = np.ones(len(ordered), dtype=bool)
    fresh[1:] = ordered[1:] != ordered[:-1]
    start = np.maximum.accumulate(np.where(fresh, np.arange(len(ordered)), 0))
    ends = np.flatnonzero(fresh)
    length = np.diff(np.append(ends, len(ordered)))
    lone = np.repeat(length == 1, length)
    count = np.empty(len(classes), dtype=np.intp)
    count[order] = np.where(lone, 0, np.arange(len(ordered)) - start + 1)
    return count


def wanted_signs(rig: Rig, bends: Mapping[str, str]) -> dict[int, int]:
    """Number of a bend to its sign, from joint names and words.

    Raises BadInput for a joint without a bend and for a word that its bend can't be.
    """
    number = {rig.joint_names[b.joint]: (k, b) for k, b in enumerate(bends_of(rig))}
    wanted, problems = {}, []
    for joint, word in bends.items():
        part = f'branch "{joint}"'
        if joint not in number:
            own = [j for j in number if j not in rig.helper_joints]
            known = ", ".join(own or number) or "none"
            problems.append(Problem(rig.source, part, "names a joint that has a bend",
                                    f'"{joint}"', f"joints with bends are {known}"))
            continue
        k, bend = number[joint]
        words = {w: s for s, w in _words(bend).items()}
        if word not in words:
            problems.append(Problem(rig.source, part, f"is one of {', '.join(words)}",
                                    f'"{word}"'))
            continue
        wanted[k] = words[word]
    if problems:
        raise BadInput(problems)
    return wanted


def _words(bend: Bend) -> dict[int, str]:
    return ALONG if bend.rail >= 0 else SIDES
