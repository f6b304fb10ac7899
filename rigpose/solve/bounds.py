"""How many branches a group can have at most."""

from __future__ import annotations

from math import comb, prod

from rigpose.solve.flow import has_choice
from rigpose.solve.plan import Cluster, Group


def branch_bound(group: Group) -> int | None:
    """At most so many branches; None where no bound is known (a block with ties in it).

    Two for every joint with two ways. A block has at most as many as the degrees of its
    equations multiplied (Bézout's theorem); k joints tied by lengths only also at most
    C(2k, k) (Borcea and Streinu 2004: C(2n - 4, n - 2) for n joints, two of them held).
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
    bodies = {b.name for b in eqs.bodies}
    lengths = len(system.dist_rows) + len(bodies)
    sliding = {n for n, along in zip(eqs.lines.names, eqs.lines.along, strict=True) if along[0] >= 0}
    names = [system.row_names[r] for r in step.square]
    if any(n in eqs.tie_names for n in names):
        return None
    curved = {*sliding, *eqs.angles.names}
    degrees = [2 if r < lengths or n in curved else 1
               for r, n in zip(step.square, names, strict=True)]
    bound = prod(degrees)
    if all(r < len(system.dist_rows) for r in step.square):
        bound = min(bound, comb(2 * len(step.joints), len(step.joints)))
    return bound
