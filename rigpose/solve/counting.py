"""Freedoms by counting alone: coordinates of unpinned joints less the conditions on them.

Bodies count as bodies, 2k - 3 conditions for k joints of a plate in the plane and 3k - 6 in space
(Maxwell 1864, Grübler 1917, Laman 1970; from memory). What lies between pinned joints only is the
ground and counts nothing.
"""

from __future__ import annotations

from collections import Counter
from itertools import combinations

import numpy as np
from numpy.typing import NDArray

from rigpose.model.rig import Frozen, Plate, Rig

STRAIGHT = 1e-9
"""A body thinner than this part of its length is a straight line."""


def counted_freedoms(rig: Rig) -> int:
    """Coordinates less conditions; negative where lengths are redundant.

    >>> from rigpose.model.make import make_rig
    >>> bar = make_rig({"a": {"at": [0, 0], "pin": True}, "b": [1, 0]}, {"bar": ["a", "b"]})
    >>> counted_freedoms(bar)
    1
    """
    pinned = {j.name for j in rig.joints if j.pin}
    frozen = {name for group in rig.frozen for name in group.bones}
    loose_bones = (set(b.ends) for b in rig.bones if b.name not in frozen)
    rails = ({r.joint, *(r.along or ())} for r in rig.rails)
    single = sum(not joints <= pinned for joints in loose_bones) + len(rig.ties)
    single += (rig.dim - 1) * sum(not joints <= pinned for joints in rails)
    single += sum(j not in pinned for p in rig.planes for j in p.joints)
    plates = sum(_plate(rig, p, pinned) for p in rig.plates)
    groups = sum(_group(rig, group, pinned) for group in rig.frozen)
    plates -= _hinges(rig, pinned) if rig.dim == 3 else 0
    return rig.dim * (len(rig.joints) - len(pinned)) - single - plates - groups


def _hinges(rig: Rig, pinned: set[str]) -> int:
    """Distances that two bodies have in common because they share a hinge's axis: one each.

    Counted once, a closed loop of four hinges has -2 freedoms, as the Kutzbach criterion has it.
    """
    shared: Counter[tuple[str, ...]] = Counter(
        pair for p in rig.plates for pair in combinations(sorted(p.joints), 2)
        if not set(pair) <= pinned)
    return sum(many - 1 for many in shared.values())


def _plate(rig: Rig, plate: Plate, pinned: set[str]) -> int:
    inside = [k for k, j in enumerate(plate.joints) if j in pinned]
    if rig.dim == 2:
        return 2 * len(plate.joints) - 3 - max(2 * len(inside) - 3, 0)
    shape = np.array(plate.shape)
    return _conditions(shape) - _conditions(shape[inside])


def _conditions(shape: NDArray[np.float64]) -> int:
    """Conditions that keep joints (k, dim) at rest to one another.

    In space a body that is a straight line has five freedoms, not six: its spin is none.
    """
    k, dim = (int(n) for n in shape.shape)
    if k < 2:
        return 0
    own = dim * (dim + 1) // 2
    if dim == 3:
        flat = np.linalg.svd(shape - shape.mean(axis=0), compute_uv=False)
        own -= int(k == 2 or flat[1] <= STRAIGHT * flat[0])
    return int(dim * k) - own


def _group(rig: Rig, group: Frozen, pinned: set[str]) -> int:
    """A frozen group is a body where it has bones enough, else its bones count."""
    bones = [b for b in rig.bones if b.name in group.bones]
    count = sum(not set(b.ends) <= pinned for b in bones)
    joints = {e for b in bones for e in b.ends}
    own = rig.dim * (rig.dim + 1) // 2
    held = max(rig.dim * len(joints & pinned) - own, 0)
    return min(count, rig.dim * len(joints) - own - held)
