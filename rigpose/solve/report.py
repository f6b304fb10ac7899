"""`check`: what a rig can do before anyone animates it."""

from __future__ import annotations

from dataclasses import replace

from rigpose.ground.budget import Watch, go_on
from rigpose.model.judge import Verdict, judge
from rigpose.model.record import all_kept
from rigpose.model.rig import Rig
from rigpose.solve.bounds import branch_bound
from rigpose.solve.closing import open_gaps
from rigpose.solve.counting import counted_freedoms
from rigpose.solve.findings import BranchGroup, Moving, Report
from rigpose.solve.planner import plan_for
from rigpose.solve.problems import problems
from rigpose.solve.reasons import reasons
from rigpose.solve.redundant import redundant_sets
from rigpose.solve.rest import Rest, find_rest
from rigpose.solve.rounded import rounding_of
from rigpose.solve.study import DENSE, Study
from rigpose.solve.suggest import suggestion_of, suggestions

__all__ = ["BranchGroup", "Moving", "Report", "check"]

STAGES = ("lengths", "motions", "rounding", "suggestions")


def check(rig: Rig, *, watch: Watch | None = None) -> Report:
    """Look a rig over: rest, freedoms, redundancy, lengths that can't close, and what to drive.

    ``watch`` is called between stages with (what, done, total); when it answers false the report
    holds what was found so far and says so. Raises BadInput for a rig that can't be posed at
    all; one that doesn't assemble is a result.

    >>> from rigpose.model.make import make_rig
    >>> joints = {"post": {"at": [0, 0], "pin": True}, "tip": [3, 4]}
    >>> report = check(make_rig(joints, {"arm": ["post", "tip"]}))
    >>> report.freedoms, report.moving[0].joints
    (1, ('tip',))
    """
    with all_kept():
        return _checked(rig, watch)


def _checked(rig: Rig, watch: Watch | None) -> Report:
    rest = find_rest(rig)
    verdict = judge(rig, rest.equations.outward(rest.scaled), rest.size)
    report = _at_rest(rest, verdict)
    found = Study(rest)
    for done, stage in enumerate((_lengths, _freedoms, _rounding, _suggestions)):
        if not go_on(watch, STAGES[done], done, len(STAGES)):
            return replace(report, stopped=True, problems=tuple(problems(rest, verdict, report)))
        report = stage(report, found)
    go_on(watch, "done", len(STAGES), len(STAGES))
    return replace(report, problems=tuple(problems(rest, verdict, report)))


def _at_rest(rest: Rest, verdict: Verdict) -> Report:
    rig = rest.rig
    misfit, worst = verdict.worst()
    if misfit <= rig.slack < rest.misfit:  # a tie, which the judge has no length for
        misfit, worst = rest.misfit, rest.worst
    moved = {j.name: float(d) for j, d in zip(rig.joints, rest.moved, strict=True)
             if d > 1e-12 * rest.size}
    return Report(
        name=rig.name, dim=rig.dim, unit=rig.unit, joints=len(rig.joints), bones=len(rig.bones),
        size=rest.size, misfit=misfit, worst=worst,
        moved=moved, slack=rig.slack, close=rig.close,
        unplaced=tuple(j.name for j in rig.joints if j.at is None))


def _lengths(report: Report, found: Study) -> Report:
    rig, rest = found.rest.rig, found.rest
    good = rest.misfit * (len(rig.joints) + 1) <= rig.slack
    gaps = open_gaps(rig, rig.slack * report.size, rest.positions if good else None)
    return replace(report, gaps=gaps, loose=_loose(rig))


def _loose(rig: Rig) -> tuple[str, ...]:
    """Joints that no part touches."""
    touched = {j for b in rig.bones for j in b.ends} | {j for r in rig.rams for j in r.ends}
    touched |= {j for plate in rig.plates for j in plate.joints}
    touched |= {j for r in rig.rails for j in (r.joint, *(r.along or ()))}
    touched |= {j for c in rig.cranks for j in (*c.line, *(c.base or ()))}
    return tuple(j.name for j in rig.joints if not j.pin and j.name not in touched)


def _freedoms(report: Report, found: Study) -> Report:
    rest = found.rest
    names = rest.rig.joint_names
    moving = tuple(Moving(tuple(names[j] for j in g.joints), g.freedoms) for g in found.groups)
    unknown = any(m.unknown for m in found.motions)
    report = replace(
        report, freedoms=None if unknown else sum(m.finite for m in found.motions),
        freedoms_first_order=None if unknown else sum(m.first for m in found.motions),
        freedoms_counted=counted_freedoms(rest.rig),
        moving=() if unknown else moving,
        redundant=redundant_sets(found.system, found.cut, found.motions, rest.scaled),
        measured=not any(m.structural for m in found.motions))
    return replace(report, why=tuple(reasons(found, report)))


def _rounding(report: Report, found: Study) -> Report:
    at, reach = found.rest.scaled, found.rest.reach
    hits = (rounding_of(m, at, found.zero, reach) for m in found.motions)
    return replace(report, rounding=tuple(r for r in hits if r is not None))


def _suggestions(report: Report, found: Study) -> Report:
    if not report.assembles or report.freedoms is None:
        return report
    if any(m.finite and len(m.piece.columns) > DENSE for m in found.motions):
        found_one = suggestion_of(found.rest, found.order)
        return replace(report, suggestions=() if found_one is None else (found_one,))
    if report.freedoms:
        loose = {found.rest.rig.index[j] for j in report.loose}
        groups = [g for g in found.groups if not set(map(int, g.joints)) <= loose]
        return replace(report, suggestions=suggestions(found.rest, groups))
    plan = plan_for(found.rest.rig, frozenset(), frozenset())
    names = found.rest.rig.joint_names
    held = [BranchGroup(tuple(names[j] for j in g.joints), branch_bound(g)) for g in plan.groups]
    if plan.loose:
        held.append(BranchGroup(tuple(names[j] for j in plan.loose), None))
    return replace(report, groups=tuple(held))


