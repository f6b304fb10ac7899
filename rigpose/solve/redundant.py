"""Redundant lengths as sets of which any one could be taken away.

A redundancy is a self-stress: a combination of rows whose slopes cancel (Maxwell 1864; Whiteley
1996). Of each set the last in the file gives way, bones before all else, and the others hold; so
the sets are the fundamental circuits of the rows that stay (Oxley 2011, section 1.2; all
three from memory).
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, replace

import numpy as np

from rigpose.model.equations import Array, Ints
from rigpose.model.system import System
from rigpose.solve.mobility import Motions
from rigpose.solve.pieces import Cut, unknown
from rigpose.solve.rest import DENSE, assemble

ABSENT = 1e-5
"""A part that bears less than this fraction of a set's largest stress does not belong to it."""
DIFFERENT = 1e-6


@dataclass(frozen=True)
class Redundancy:
    """Parts of which any one could be taken away; the rest would hold the same.

    off : by how much ``last`` departs from closing when the others hold exactly, rig's unit,
    with sign: what would have to be added to its length
    """

    parts: tuple[str, ...]
    last: str
    off: float

    def __str__(self) -> str:
        return " | ".join(self.parts)


def redundant_sets(system: System, pieces: Cut, found: Sequence[Motions], rest: Array) -> tuple[
    Redundancy, ...
]:
    """All redundant sets; their departures are measured at ``rest (n, dim)``."""
    residual = departures(system, rest)
    sets: list[Redundancy] = []
    for motion in found:
        rows = motion.piece.rows
        for e, circuit in circuits(system, rows, motion.stresses):
            off = float(circuit @ residual[rows]) * system.eqs.scale
            share = np.abs(circuit) > ABSENT * np.abs(circuit).max()
            names = tuple(dict.fromkeys(system.row_names[r] for r in rows[share]))
            sets.append(Redundancy(names, system.row_names[rows[e]], off))
    sets = _measured(system, sets, rest)
    for r in pieces.fixed:
        name = system.row_names[r]
        sets.append(Redundancy((name,), name, float(residual[r]) * system.eqs.scale))
    # Some rows of one body or of one slot in space say a thing twice by their making.
    lines = system.eqs.lines
    bodies = {b.name for b in system.eqs.bodies}
    bodies |= {n for n, along in zip(lines.names, lines.along, strict=True)
               if system.eqs.dim == 3 and along[0] >= 0}
    real = (s for s in sets if len(s.parts) > 1 or s.last not in bodies)
    return tuple(dict.fromkeys(real))


def departures(system: System, x: Array) -> Array:
    """How far each row is from holding at one pose; of a bone, measured less wanted length."""
    residual: Array = system.residual(x[None], unknown(system, 1))[0]
    bones = len(system.dist_rows)
    length = system.eqs.distances.length[system.dist_rows]
    off = 2 * length * residual[:bones]
    residual[:bones] = off / (np.sqrt(np.maximum(length**2 + off, 0.0)) + length)
    return residual


def _measured(system: System, sets: list[Redundancy], rest: Array) -> list[Redundancy]:
    """The same sets, with departures of bones measured where all others hold exactly."""
    d = system.eqs.distances
    number = {d.names[k]: int(k) for k in system.dist_rows}
    lasts = frozenset(s.last for s in sets if s.last in number)
    least = 1e-12 * system.eqs.scale
    if rest.size > DENSE or not any(s.last in lasts and abs(s.off) > least for s in sets):
        return sets
    others = replace(system, without=lasts)
    x, size = assemble(others, rest[None], unknown(system, 1))
    if size[0] > 1e-12:
        return sets
    ends = {name: d.ends[number[name]] for name in lasts}
    gap = {name: np.linalg.norm(x[0, a] - x[0, b]) - d.length[number[name]]
           for name, (a, b) in ends.items()}
    return [replace(s, off=float(gap[s.last]) * system.eqs.scale) if s.last in lasts else s
            for s in sets]


def giving_way(system: System, rows: Ints) -> Ints:
    """Positions in ``rows`` in the order in which they would give way."""
    bones = len(system.dist_rows)
    return np.array(sorted(range(len(rows)), key=lambda k: (rows[k] >= bones, -rows[k])),
                    dtype=np.intp)


def circuits(system: System, rows: Ints, stresses: Array) -> list[tuple[int, Array]]:
    """Minimal dependent sets: the row that gives way and the combination ``(m,)``, one there."""
    count = stresses.shape[1]
    if not count:
        return []
    chosen: list[int] = []
    span = np.zeros((0, count))
    scale = np.abs(stresses).max()
    for k in giving_way(system, rows):
        row = stresses[k] - (stresses[k] @ span.T) @ span
        row -= (row @ span.T) @ span
        long = float(np.linalg.norm(row))
        if long > DIFFERENT * scale:
            chosen.append(int(k))
            span = np.vstack([span, row / long])
        if len(chosen) == count:
            break
    if len(chosen) < count:
        return []
    table = stresses @ np.linalg.inv(stresses[chosen])
    return sorted(((e, table[:, j]) for j, e in enumerate(chosen)), key=lambda pair: pair[0])
