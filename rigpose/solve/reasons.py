"""In words: how the three numbers of freedoms come to differ, and what they stand on."""

from __future__ import annotations

from collections.abc import Iterator

import numpy as np

from rigpose.solve.findings import Report
from rigpose.solve.mobility import Motions
from rigpose.solve.study import DENSE, Study
from rigpose.solve.words import count, listed

SHAKES = 1e-3


def reasons(found: Study, report: Report) -> Iterator[str]:
    """Sentences on how the three numbers of freedoms come to differ, and what they stand on."""
    rig, names = found.rest.rig, found.rest.rig.joint_names
    if not report.assembles:
        yield "Measured where the lengths come closest, as the rig does not assemble."
    if len(rig.joints) > 1 and not any(j.pin for j in rig.joints) and not rig.rails:
        whole = rig.dim * (rig.dim + 1) // 2
        yield f"Nothing is pinned: {whole} of the freedoms move the rig as a whole."
    for m in found.motions:
        joints = listed([names[j] for j in m.piece.joints])
        if m.unknown:
            yield (f"{joints}: over {DENSE} coordinates hang together, and the order in which they "
                   "can be placed does not tell how many freedoms they have.")
        elif m.structural:
            yield (f"{joints}: over {DENSE} coordinates hang together, so redundant lengths, "
                   "which show to first order only, are not looked for.")
        elif m.first > m.finite:
            yield _first_order_only(m, names)
    if report.freedoms is None:
        return
    spare = [r for r in report.redundant if len(r.parts) > 1]
    if spare and report.freedoms > report.freedoms_counted:
        yield (f"Counting misses {report.freedoms - report.freedoms_counted}, as "
               f"{count(len(spare), 'length')} more than needed hold"
               f"{'s' if len(spare) == 1 else ''} what is held already.")
    if report.freedoms < report.freedoms_counted:
        yield ("Counting promises more: the rig is drawn where its lengths only just reach, and "
               "slightly longer ones would let it move.")


def _first_order_only(m: Motions, names: tuple[str, ...]) -> str:
    if m.ways > 1:
        return (f"Rest is a dead centre where {m.ways} motions meet: {m.first} to first order, "
                f"{m.finite} as soon as it moves.")
    over = m.first - m.finite
    shaky = _shaking(m, names)
    if not shaky:
        return f"Rest is a dead centre: of {m.first} motions to first order {m.finite} goes on."
    return (f"{count(over, 'motion')} at rest {'is' if over == 1 else 'are'} of first order only: "
            f"{listed(shaky)} would shake but can't go anywhere.")


def _shaking(m: Motions, names: tuple[str, ...]) -> list[str]:
    """Joints that only first-order motions move."""
    if not m.lame.shape[1]:
        return []
    far = np.linalg.norm(m.lame.reshape(len(m.piece.joints), -1), axis=1)
    return [names[j] for j, d in zip(m.piece.joints, far, strict=True) if d > SHAKES * far.max()]
