"""Sliders in space, made into joints, rails and a tie: a part that moves along an axis only.

Two joints of the part on one line leave it its way and its spin; a third, on a parallel line, takes
the spin. All three could still lie mirrored along the axis, the part turned over: the tie between
the ways of the two on the line keeps them in order.
"""

from __future__ import annotations

import math
from dataclasses import dataclass
from functools import lru_cache

from rigpose.model.bench import DRIVES, REST, Common
from rigpose.model.bodies import GROUND, Table
from rigpose.model.decode import decode
from rigpose.model.fittings import Fittings
from rigpose.model.head import unit_vector
from rigpose.model.hinges import add_helper
from rigpose.model.names import KeyPath, shown
from rigpose.model.rig import Coordinates, Pair, Rail, Rig, Span, Tie
from rigpose.model.spec import SliderSpec
from rigpose.model.vectors import along, normal_to

ENDS = ("axis", "side", "start", "end", "side start", "side end")
"""What the names of a slider's helper joints end in."""


@dataclass(frozen=True)
class _Line:
    """What a joint of the sliding part runs along; ``ends`` are joints of the other part."""

    through: Coordinates
    direction: Coordinates
    ends: Pair | None


@dataclass(frozen=True)
class _Slider:
    """A slider that has been read: which part carries the rails, and which slides."""

    path: tuple[str, str]
    carrier: str
    slides: str
    joint: str
    place: Coordinates
    axis: Coordinates
    common: Common

    def named(self, end: str) -> str:
        return f"{self.path[1]} {end}"


def add_sliders(fit: Fittings, table: Table) -> None:
    """Read all sliders; the first rail of each has its name and is its drive."""
    for name, raw in table.items():
        spec = decode(fit.bench.notes, ("sliders", name), raw, SliderSpec)
        good = fit.bench.claim("sliders", name)
        if spec is None or not _slider(fit, name, spec) or not good:
            _lose(fit, name)


def _lose(fit: Fittings, name: str) -> None:
    for rail in (name, f"{name} axis", f"{name} side"):
        fit.bench.lose("drive", rail)
        fit.bench.lose("joint", rail)


def _slider(fit: Fittings, name: str, spec: SliderSpec) -> bool:
    path = ("sliders", name)
    before = len(fit.bench.notes)
    parts = fit.parts((*path, "parts"), spec.parts, "slider")
    at = fit.place((*path, "at"), spec.at, "slider")
    written = fit.bench.coordinates((*path, "axis"), spec.axis)
    axis = unit_vector(fit.bench, (*path, "axis"), written)
    span = fit.bench.span((*path, "range"), spec.range)
    common = fit.bench.common(path, spec)
    if parts is None or at is None or axis is None or len(fit.bench.notes) > before:
        return False
    carrier, slides = reversed(parts) if parts[1] == GROUND else parts
    slider = _Slider(path, carrier, slides, *at, axis, common)
    if not _slides(fit, slider) or not fit.stands_alone((*path, "at"), (slides,), at[0]):
        return False
    return _reserve(fit, slider) and _build(fit, slider, span)


def _slides(fit: Fittings, slider: _Slider) -> bool:
    """Whether the joint belongs to the part that slides, and to no other part of the slider."""
    pinned = fit.bench.parts.joints[slider.joint].pin
    carried = slider.joint in (*fit.joints(slider.carrier), *fit.extra.get(slider.carrier, ()))
    if not carried and not pinned:
        return True
    got = f"{shown(slider.joint)}, which is pinned" if pinned else (
        f"{shown(slider.joint)} of {shown(slider.carrier)}, along which it slides")
    fit.bench.notes.add((*slider.path, "at"), "a slider's joint moves with the part that slides",
                        got, f"name a joint of {shown(slider.slides)} alone")
    return False


def _reserve(fit: Fittings, slider: _Slider) -> bool:
    """Take the names of all rails and of the tie."""
    for rail in (slider.path[1], slider.named("axis"), slider.named("side")):
        if rail in fit.bench.parts.rails:
            fit.bench.notes.add(slider.path, "its rails have names that no other slider's has",
                                shown(rail), "rename one of them")
            return False
    names = [(DRIVES, slider.named("axis")), (DRIVES, slider.named("side")),
             (REST, slider.named("axis"))]
    return all(fit.bench.reserve(space, name, "sliders", slider.path) for space, name in names)


def _build(fit: Fittings, slider: _Slider, span: Span | None) -> bool:
    s = slider
    reach = [s.slides, s.carrier]
    far = fit.reach(reach, s.place, s.axis)
    ahead = math.dist(far, s.place)
    beside = fit.reach(reach, along(s.place, s.axis, ahead / 2), normal_to(s.axis))
    path: KeyPath = s.path
    axis = add_helper(fit, path, s.named("axis"), far, s.common)
    side = add_helper(fit, path, s.named("side"), beside, s.common)
    if axis is None or side is None:
        return False
    for joint in (s.joint, axis, side):
        fit.carry(s.slides, joint, s.joint)
    first, second = _line(fit, s, s.place, ""), _line(fit, s, beside, "side ")
    if first is None or second is None:
        return False
    _add_rail(fit, s, s.path[1], s.joint, first, span)
    _add_rail(fit, s, axis, axis, first, None)
    _add_rail(fit, s, side, side, second, None)
    fit.bench.parts.ties[axis] = Tie(name=axis, sum=((axis, 1.0), (s.path[1], -1.0)), equals=ahead,
                                     **s.common)
    return True


def _line(fit: Fittings, s: _Slider, start: Coordinates, kind: str) -> _Line | None:
    if s.carrier == GROUND:
        return _Line(start, s.axis, None)
    first = _seat(fit, s, s.named(f"{kind}start"), start, None)
    if first is None:
        return None
    end = fit.reach([s.carrier], start, s.axis)
    second = _seat(fit, s, s.named(f"{kind}end"), end, first)
    return None if second is None else _Line(start, s.axis, (first, second))


def _seat(fit: Fittings, s: _Slider, name: str, place: Coordinates, measured_from: str | None) -> (
    str | None
):
    """A joint of the carrier at a place: its own, if it has one there, since no two joints of a
    plate stand at one place."""
    own = fit.joint_at(s.carrier, place)
    if own is not None:
        return own
    helper = add_helper(fit, s.path, name, place, s.common)
    if helper is not None:
        fit.carry(s.carrier, helper, measured_from)
    return helper


def _add_rail(fit: Fittings, s: _Slider, name: str, joint: str, line: _Line,
              span: Span | None) -> None:
    fixed = line.ends is None
    fit.bench.parts.rails[name] = Rail(
        name=name, joint=joint, along=line.ends, through=line.through if fixed else None,
        direction=line.direction if fixed else None, range=span, **s.common)


def stands_at(rig: Rig, helper: str) -> str:
    """The rig's own joint at which a helper joint holds an axis; the helper where none can be
    told, as on an axis that stands at another helper."""
    return _stands(rig).get(helper, helper)


def sliders_of(rig: Rig) -> dict[str, str]:
    """The sliders of a rig, and the joint of each, told by the rails that a slider makes."""
    rails = {r.name: r.joint for r in rig.rails}
    return {name: joint for name, joint in rails.items()
            if f"{name} axis" in rails and f"{name} axis" in rig.helper_joints}


@lru_cache(maxsize=16)
def _stands(rig: Rig) -> dict[str, str]:
    """Helper joint to the joint at which it stands."""
    carriers: dict[str, list[tuple[str, ...]]] = {h: [] for h in rig.helper_joints}
    for plate in rig.plates if carriers else ():
        for joint in rig.helper_joints.intersection(plate.joints):
            carriers[joint].append(plate.joints)
    found = {h: _shared(rig, h, plates) for h, plates in carriers.items()}
    for name, joint in sliders_of(rig).items():
        found |= {f"{name} {end}": joint for end in ENDS if f"{name} {end}" in carriers}
    return found


def _shared(rig: Rig, helper: str, plates: list[tuple[str, ...]]) -> str:
    """All parts that carry the axis of a hinge or a cross share its joint. On the ground that is
    pinned, and what a part has pinned besides its hinge lies on the axis as well."""
    pinned = rig.joints[rig.index[helper]].pin
    return next((j for j in (plates[0] if plates else ())
                 if all(j in p for p in plates) and j not in rig.helper_joints
                 and (rig.joints[rig.index[j]].pin or not pinned)), helper)
