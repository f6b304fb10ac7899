"""What `check` finds wrong, or nearly, each with its mend."""

from __future__ import annotations

from collections.abc import Iterator

from rigpose.ground.errors import Problem
from rigpose.model.judge import Verdict
from rigpose.model.rig import Rig
from rigpose.solve.closing import GROUND, Gap
from rigpose.solve.findings import Report
from rigpose.solve.rest import Rest
from rigpose.solve.rounded import LARGEST_SLACK
from rigpose.solve.words import amount, listed


def problems(rest: Rest, verdict: Verdict, report: Report) -> Iterator[Problem]:
    """All that is wrong, or nearly, the worst kinds first."""
    rig, unit = rest.rig, rest.rig.unit
    if not report.assembles:
        off = report.misfit * rest.size
        enough = max([report.misfit, *(abs(r.off) / rest.size for r in report.redundant)])
        yield Problem(rig.source, report.worst, "all lengths hold at rest within `slack`",
                      f"off by {amount(off)} {unit} at best",
                      "mend the lengths told below" + _slack(enough), off)
    yield from (_gap_problem(rig, g) for g in report.gaps)
    yield from _disagreements(rig, report)
    for name in report.loose:
        yield Problem(rig.source, name, "every joint is pinned or held by a part", "none",
                      "add a bone to it, or take it out")
    yield from _ranges(rig, rest, verdict)


def _slack(enough: float) -> str:
    """The slack that would pass, where it is no more than what rounding may need."""
    return f", or set slack to {amount(1.01 * enough)}" if enough < LARGEST_SLACK else ""


def _gap_problem(rig: Rig, g: Gap) -> Problem:
    mend = f"shorten '{g.part}'" if g.part != GROUND else "move the pinned joints together"
    mend += " or lengthen the others" if set(g.chain) != {GROUND} else " or move them apart"
    return Problem(
        rig.source, g.part, f"a chain from {g.ends[0]} to {g.ends[1]} is long enough to close",
        f"{amount(g.least, 6)} {rig.unit} apart, reached by {listed(g.chain)}: "
        f"{amount(g.reach, 6)} {rig.unit}",
        f"{mend} by {amount(g.short, 6)} {rig.unit}", g.short)


def _disagreements(rig: Rig, report: Report) -> Iterator[Problem]:
    lengths = {b.name: b.length for b in rig.bones}
    for r in report.redundant:
        if abs(r.off) > rig.slack * report.size:
            better = f", or make '{r.last}' {lengths[r.last] + r.off:.9g} {rig.unit} long" \
                if r.last in lengths else ""
            yield Problem(
                rig.source, r.last, f"redundant lengths ({listed(r.parts)}) agree within `slack`",
                f"off by {amount(abs(r.off))} {rig.unit}",
                f"take one of them out{better}", abs(r.off))


def _ranges(rig: Rig, rest: Rest, verdict: Verdict) -> Iterator[Problem]:
    """Ranges and limits that the rest pose passes."""
    limits = {x.name for x in rig.limits}
    angles = len(verdict.over_names) - len(rig.limits)
    for k, name in enumerate(verdict.over_names):
        over = float(verdict.over[k])
        angle = k >= angles and name in limits
        if over > (1e-6 if angle else rig.slack * rest.size):
            unit = "degrees" if angle else rig.unit
            yield Problem(rig.source, name, "the rest pose keeps within its range",
                          f"{amount(over)} {unit} beyond", "widen the range or move `at`", over)
