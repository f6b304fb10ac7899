"""Freedoms by counting alone: coordinates of unpinned joints less the conditions on them.

Bodies count as bodies, 2k - 3 conditions for k joints of a plate (Maxwell 1864, Grübler 1917,
Laman 1970; from memory). What lies between pinned joints only is the ground and counts nothing.
"""

from __future__ import annotations

from collections.abc import Iterable

from rigpose.model.rig import Frozen, Rig


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
    single = sum(not joints <= pinned for joints in (*loose_bones, *rails)) + len(rig.ties)
    plates = sum(_body(p.joints, pinned) for p in rig.plates)
    groups = sum(_group(rig, group, pinned) for group in rig.frozen)
    return 2 * (len(rig.joints) - len(pinned)) - single - plates - groups


def _body(joints: Iterable[str], pinned: set[str]) -> int:
    """Conditions of a body, less those that its pinned joints have among themselves."""
    every = set(joints)
    held = len(every & pinned)
    return 2 * len(every) - 3 - max(2 * held - 3, 0)


def _group(rig: Rig, group: Frozen, pinned: set[str]) -> int:
    """A frozen group is a body where it has bones enough, else its bones count."""
    bones = [b for b in rig.bones if b.name in group.bones]
    count = sum(not set(b.ends) <= pinned for b in bones)
    return min(count, _body([e for b in bones for e in b.ends], pinned))
