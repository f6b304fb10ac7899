"""Rows that begin later: poses of a survey that no followed row holds."""

from __future__ import annotations

from dataclasses import replace
from typing import Any

import numpy as np
from numpy.typing import NDArray

from rigpose.model.equations import Array
from rigpose.solve.clock import Clock, part_of_clock
from rigpose.solve.plan import Group
from rigpose.solve.rows import Rows, follow
from rigpose.solve.search import Context

Mask = NDArray[np.bool_]
DEAD = 1e-9
"""Cells with less margin are dead centres, where a pose belongs to several signs."""
MOST_ROUNDS = 64


def follow_all(context: Context, group: Group, clock: Clock, survey: Rows) -> Rows:
    """Rows through every pose of a survey of all signs.

    A row through a dead centre takes other signs from there on. Where those signs belonged to no
    row of the first frame, the row begins at the first frame that is not covered yet.
    """
    rows = follow(context, group, clock, survey.codes)
    for _ in range(MOST_ROUNDS):
        missing = survey.alive & (survey.margin > DEAD) & ~_covered(survey, rows)
        if not missing.any():
            break
        frame = int(np.argmax(missing.any(axis=0)))
        codes = survey.codes[missing[:, frame]]
        late = follow(context, group, part_of_clock(clock, frame, clock.count), codes)
        rows = _together(rows, _delayed(late, frame, clock.count))
    return rows


def _covered(survey: Rows, rows: Rows) -> Mask:
    """Which cells of the survey some row holds, ``(n_codes, F)``."""
    frames = survey.alive.shape[1]
    known = {c.tobytes(): k for k, c in enumerate(np.ascontiguousarray(survey.codes))}
    covered = np.zeros(survey.alive.shape, dtype=bool)
    for row in range(len(rows.codes)):
        passed = sorted((p.time, p.choice) for p in rows.passes
                        if p.row == row and p.kind == "passed")
        code, start = rows.codes[row].copy(), 0
        for time, choice in [*passed, (float(frames), -1)]:
            stop = min(int(np.ceil(time)), frames)
            where = known.get(code.tobytes())
            if where is not None:
                covered[where, start:stop] |= rows.alive[row, start:stop]
            start = stop
            if choice >= 0:
                code[choice] *= -1
    return covered


def _delayed(rows: Rows, frame: int, frames: int) -> Rows:
    """Rows of a later part, dead before it."""

    def longer(array: Any, fill: float) -> Any:
        out = np.full((*array.shape[:-1], frames), fill, dtype=array.dtype)
        out[..., frame:] = array
        return out

    b = len(rows.codes)
    return replace(
        rows, places=[longer(np.broadcast_to(p, (len(p), b, frames - frame)), np.nan)
                      for p in rows.places],
        alive=longer(rows.alive, 0).astype(bool), margin=longer(rows.margin, np.nan),
        values={v: longer(np.broadcast_to(a, (b, frames - frame)), np.nan)
                for v, a in rows.values.items()},
        passes=[p.moved(frame) for p in rows.passes])


def _together(a: Rows, b: Rows) -> Rows:
    n, m = len(a.codes), len(b.codes)
    frames = a.alive.shape[1]

    def both(x: Array, y: Array) -> Array:
        lead = x.shape[:-2]
        return np.concatenate([np.broadcast_to(x, (*lead, n, frames)),
                               np.broadcast_to(y, (*lead, m, frames))], axis=-2)

    moved = [p.moved(rows=n) for p in b.passes]
    return replace(
        a, signs=np.concatenate([a.codes, b.codes]),
        places=[both(x, y) for x, y in zip(a.places, b.places, strict=True)],
        alive=np.concatenate([a.alive, b.alive]), margin=np.concatenate([a.margin, b.margin]),
        values={v: both(a.values[v], b.values[v]) for v in a.values},
        passes=[*a.passes, *moved], turning=a.turning | b.turning)
