"""How many branches a group can have at most."""

from __future__ import annotations

from math import comb

from rigpose.solve.flow import has_choice
from rigpose.solve.plan import Cluster, Group


def branch_bound(group: Group) -> int | None:
    """At most so many branches; None where no bound is known (a block with ties in it).

    Two for every joint with two ways. A block has at most as many as the degrees of its
    equations multiplied (Bézout's theorem); k joints tied by lengths alone to two placed ones
    also at most C(2k, k) (Borcea and Streinu 2004: C(2n - 4, n - 2) for n joints, from memory).
    """
    total = 1
    for step in group.steps:
        if isinstance(step, Cluster):
            block = _block_bound(step)
            if block is None:
                return None
            total *= block
        elif has_choice(step):
            total *= 2
    return total


def _block_bound(step: Cluster) -> int | None:
    system, eqs = step.system, step.system.eqs
    bones = len(system.dist_rows)
    ties = len(system.row_names) - len(eqs.tie_names)
    curved = {*eqs.angles.names}
    curved |= {n for n, a in zip(eqs.lines.names, eqs.lines.along, strict=True) if a[0] >= 0}
    total = 1
    for r in step.square:
        name = system.row_names[r]
        if r >= ties and name in eqs.tie_names:
            return None
        total *= 2 if r < bones + len(eqs.bodies) or name in curved else 1
    if all(r < bones for r in step.square) and len(step.around) <= 2:
        total = min(total, comb(2 * len(step.joints), len(step.joints)))
    return total
