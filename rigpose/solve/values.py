"""Which joints a value hangs on."""

from __future__ import annotations

import numpy as np

from rigpose.model.equations import GROUND, Equations


def joints_of_value(eqs: Equations, value: int) -> list[int]:
    """The joints whose places give the value of a crank, ram or rail."""
    if value in eqs.ram_of:
        return [int(j) for j in eqs.distances.ends[eqs.ram_of[value]]]
    for c in np.flatnonzero(eqs.angles.value == value):
        k = int(c)
        if eqs.dim == 3:
            ends = (*eqs.angles.axis[k], eqs.angles.line[k, 1], eqs.angles.base[k, 1])
            return [int(j) for j in ends if j != GROUND]
        both = (*eqs.angles.line[k], *eqs.angles.base[k])
        return [int(j) for j in both if j != GROUND]
    k = int(np.flatnonzero(eqs.lines.value == value)[0])
    return [int(j) for j in (*eqs.lines.along[k], eqs.lines.joint[k]) if j != GROUND]
