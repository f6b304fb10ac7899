"""Rails, cranks, limits and ties: from a file's tables to checked parts."""

from __future__ import annotations

from typing import Literal

from msgspec import UNSET

from rigpose.model.bench import Bench, joints_of
from rigpose.model.bodies import GROUND, Table
from rigpose.model.decode import decode
from rigpose.model.head import unit_vector
from rigpose.model.names import KeyPath, shown
from rigpose.model.planes import add_plane_of_rail
from rigpose.model.rig import Body, Coordinates, Crank, Limit, Pair, Plate, Rail, Span, Tie
from rigpose.model.spec import CrankSpec, LimitSpec, RailSpec, TieSpec
from rigpose.model.turns import limit_axis, limit_lines, space_crank

WHOLE_TURN = 360.0


def add_rails(bench: Bench, table: Table) -> None:
    """Add all rails."""
    for name, raw in table.items():
        spec = decode(bench.notes, ("rails", name), raw, RailSpec)
        good = bench.claim("rails", name)
        if spec is not None and spec.normal is not None:
            add_plane_of_rail(bench, name, spec)
            continue
        rail = None if spec is None else _rail(bench, name, spec)
        if rail is None or not good:
            bench.lose("drive", name)
        else:
            bench.parts.rails[name] = rail


def _rail(bench: Bench, name: str, spec: RailSpec) -> Rail | None:
    path = ("rails", name)
    before = len(bench.notes)
    joint = bench.joint((*path, "joint"), spec.joint)
    span = bench.span((*path, "range"), spec.range)
    common = bench.common(path, spec)
    along = None if spec.along is None else _slot(bench, path, spec, spec.along)
    through, direction = (None, None) if spec.along is not None else (
        _ground_line(bench, path, spec))
    if joint is None or (along is None and direction is None) or len(bench.notes) > before:
        return None
    return Rail(name=name, joint=joint, along=along, through=through, direction=direction,
                range=span, **common)


def _ground_line(bench: Bench, path: KeyPath, spec: RailSpec) -> (
    tuple[Coordinates | None, Coordinates | None]
):
    if spec.through is None or spec.direction is None:
        have = [k for k in ("through", "direction") if getattr(spec, k) is not None]
        point = "[x, y]" if bench.dim == 2 else "[x, y, z]"
        bench.notes.add(path, "a rail needs `through` and `direction`, or `along`",
                        f"`{have[0]}` alone" if have else "none of them",
                        f"write through = {point}, direction = {point}, or along = [joint, joint]")
        return None, None
    through = bench.coordinates((*path, "through"), spec.through)
    way = bench.coordinates((*path, "direction"), spec.direction)
    return through, unit_vector(bench, (*path, "direction"), way)


def _slot(bench: Bench, path: KeyPath, spec: RailSpec, joints: list[str]) -> Pair | None:
    if spec.through is not None or spec.direction is not None:
        bench.notes.add(path, "a rail has `along`, or `through` and `direction`, not both", "both",
                        "take one of them out")
        return None
    along = bench.pair((*path, "along"), joints)
    if along is None:
        return None
    if spec.joint in along:
        bench.notes.add((*path, "joint"), "the joint that slides is none of the two of `along`",
                        shown(spec.joint), "name the joint that slides")
        return None
    return along


def add_cranks(bench: Bench, table: Table) -> None:
    """Add all cranks."""
    for name, raw in table.items():
        spec = decode(bench.notes, ("cranks", name), raw, CrankSpec)
        good = bench.claim("cranks", name)
        read = _crank if bench.dim == 2 else space_crank
        crank = None if spec is None else read(bench, name, spec)
        if crank is None or not good:
            bench.lose("drive", name)
        else:
            bench.parts.cranks[name] = crank


def _crank(bench: Bench, name: str, spec: CrankSpec) -> Crank | None:
    path = ("cranks", name)
    before = len(bench.notes)
    about = None if spec.about is None else bench.joint((*path, "about"), spec.about)
    line = _line(bench, path, ("turns", "line"), spec.turns, written=spec.line, about=about)
    base = None
    if spec.from_ != GROUND:
        base = _line(bench, path, ("from", "from_line"), spec.from_, written=spec.from_line,
                     about=about)
    elif spec.from_line is not None:
        bench.notes.add((*path, "from_line"), "the ground has no line: its x axis counts",
                        shown(spec.from_line), "take it out, or say `from`")
    if spec.from_ == spec.turns:
        bench.notes.add((*path, "from"), "a crank's angle is between two different parts",
                        f"{shown(spec.turns)} twice", 'write from = "ground" or another part')
    _refuse_axis(bench, path, spec)
    zero = _zero(bench, path, spec)
    span = bench.span((*path, "range"), spec.range)
    common = bench.common(path, spec)
    if line is None or zero is None or len(bench.notes) > before:
        return None
    if spec.from_ != GROUND and base is None:
        return None
    return Crank(name=name, turns=spec.turns, line=line, base=base, about=about, zero=zero,
                 range=span, base_part=spec.from_, **common)


def _zero(bench: Bench, path: KeyPath, spec: CrankSpec) -> float | Literal["rest"] | None:
    if isinstance(spec.zero, list):
        bench.notes.add((*path, "zero"), "in the plane an angle counts as 0, no direction",
                        shown(spec.zero), 'write degrees, or "rest"')
        return None
    if spec.zero is UNSET:
        return 0.0
    return "rest" if spec.zero == "rest" else bench.number((*path, "zero"), spec.zero)


def _refuse_axis(bench: Bench, path: KeyPath, spec: CrankSpec | LimitSpec) -> None:
    """Note what only a rig in space has."""
    for key in ("axis", "toward"):
        value = getattr(spec, key, None)
        if value is not None:
            bench.notes.add((*path, key), f"a plane rig turns in its plane: it has no `{key}`",
                            shown(value), f"take `{key}` out")


def _line(bench: Bench, path: KeyPath, key: tuple[str, str], part: str, *,
          written: list[str] | None, about: str | None) -> Pair | None:
    """The directed line of a part whose angle counts: as written, or the bone's own ends."""
    body = bench.body((*path, key[0]), part)
    if body is None:
        return None
    if written is not None:
        return _line_of(bench, (*path, key[1]), body, written)
    ends = bench.rods.get(body.name)
    if ends is None and not isinstance(body, Plate):
        ends = body.ends
    if ends is None:
        bench.notes.add(path, f"`{key[0]}` is the plate {shown(part)}, so `{key[1]}` is needed",
                        "none", f"write {key[1]} = [joint, joint], two joints of the plate")
        return None
    first, second = ends
    return (second, first) if about == second else (first, second)


def _line_of(bench: Bench, path: KeyPath, body: Body, written: list[str]) -> Pair | None:
    line = bench.pair(path, written)
    if line is None:
        return None
    own = joints_of(body)
    if not set(line) <= set(own):
        some = ", ".join(list(own)[:6])
        bench.notes.add(path, f"the line must run between joints of {shown(body.name)}",
                        shown(list(line)), f"its joints are {some}")
        return None
    return line


def add_limits(bench: Bench, table: Table) -> None:
    """Add all limits."""
    for name, raw in table.items():
        spec = decode(bench.notes, ("limits", name), raw, LimitSpec)
        good = bench.claim("limits", name)
        limit = None if spec is None else _limit(bench, name, spec)
        if limit is not None and good:
            bench.parts.limits[name] = limit


def _limit(bench: Bench, name: str, spec: LimitSpec) -> Limit | None:
    path = ("limits", name)
    before = len(bench.notes)
    if spec.from_ == spec.to and spec.from_line == spec.to_line:
        bench.notes.add((*path, "to"), "a limit is between two different lines",
                        f"{shown(spec.to)} twice", "name another part")
        return None
    span = _limit_range(bench, (*path, "range"), spec)
    common = bench.common(path, spec)
    seen = len(bench.notes)
    axis = limit_axis(bench, path, spec) if bench.dim == 3 else None
    if bench.dim == 2:
        _refuse_axis(bench, path, spec)
    lines = limit_lines(bench, path, spec, axis) if axis is not None else (
        _lines_at(bench, path, spec) if len(bench.notes) == seen else None)
    if lines is None or span is None or len(bench.notes) > before:
        return None
    return Limit(name=name, first=lines[0], second=lines[1], at=lines[0][0], range=span,
                 either=spec.either, axis=axis, first_part=spec.from_, second_part=spec.to,
                 **common)


def _lines_at(bench: Bench, path: KeyPath, spec: LimitSpec) -> tuple[Pair, Pair] | None:
    """Both lines of a limit at a joint."""
    if bench.is_lost("hinge", spec.at):
        return None
    if bench.dim == 3 and not spec.either:
        bench.notes.add(path, "in space a limit has a sign about a hinge or an `axis` only",
                        f"at = {shown(spec.at)}", "name a hinge, or write either = true and a "
                        "range between 0 and 180")
    at = bench.joint((*path, "at"), spec.at)
    if at is None:
        return None
    first = _seen(bench, path, "from", spec.from_, written=spec.from_line, at=at)
    second = _seen(bench, path, "to", spec.to, written=spec.to_line, at=at)
    return None if first is None or second is None else (first, second)


def _limit_range(bench: Bench, path: KeyPath, spec: LimitSpec) -> Span | None:
    span = bench.span(path, spec.range)
    if span is None:
        return None
    if spec.either and not 0 <= span[0] <= span[1] <= WHOLE_TURN / 2:
        bench.notes.add(path, "with either = true a range lies between 0 and 180 degrees",
                        shown(list(span)), "mend the range, or take `either` out")
        return None
    if span[1] - span[0] > WHOLE_TURN:
        bench.notes.add(path, "a range of more than a whole turn limits nothing",
                        f"{span[1] - span[0]:.9g} degrees", "write at most 360 degrees")
        return None
    return span


def _seen(bench: Bench, path: KeyPath, key: str, part: str, *, written: list[str] | None,
          at: str) -> Pair | None:
    """A line of a part seen from a joint outwards."""
    line_key = f"{key}_line"
    body = bench.body((*path, key), part)
    if body is None:
        return None
    if at not in joints_of(body):
        bench.notes.add((*path, "at"), f"must be a joint of {shown(part)}", shown(at),
                        f"its joints are {', '.join(list(joints_of(body))[:6])}")
        return None
    line = _line(bench, path, (key, line_key), part, written=written, about=at)
    if line is not None and line[0] != at:
        bench.notes.add((*path, line_key), f"must start at {shown(at)}, the limit's `at`",
                        shown(list(line)), f"write {shown([at, line[0]])}")
        return None
    return line


def add_ties(bench: Bench, table: Table) -> None:
    """Add all ties; they come last of all, as they speak of every kind of drive."""
    for name, raw in table.items():
        spec = decode(bench.notes, ("ties", name), raw, TieSpec)
        good = bench.claim("ties", name)
        tie = None if spec is None else _tie(bench, name, spec)
        if tie is not None and good:
            bench.parts.ties[name] = tie


def _tie(bench: Bench, name: str, spec: TieSpec) -> Tie | None:
    path = ("ties", name)
    factors: list[tuple[str, float]] = []
    for drive, value in spec.sum.items():
        factor = _factor(bench, (*path, "sum", drive), drive, value)
        if factor is not None:
            factors.append((drive, factor))
    equals = bench.number((*path, "equals"), spec.equals)
    if not spec.sum:
        bench.notes.add((*path, "sum"), "a tie adds up one drive or more", "none",
                        "write sum = { drive = factor, … }")
    if equals is None or not factors or len(factors) < len(spec.sum):
        return None
    return Tie(name=name, sum=tuple(factors), equals=equals, **bench.common(path, spec))


def _factor(bench: Bench, path: KeyPath, drive: str, value: object) -> float | None:
    factor = bench.number(path, value)
    if bench.parts.drive(drive) is None:
        if not bench.is_lost("drive", drive):
            bench.notes.unknown(path, "crank, ram or rail", drive, bench.parts.drive_names())
        return None
    if factor == 0:
        bench.notes.add(path, "a factor of a tie is not 0", shown(value),
                        "take the drive out of the sum")
        return None
    return factor


