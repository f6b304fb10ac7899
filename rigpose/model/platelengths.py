"""A plate's shape from the lengths between its joints and the side of its first three.

The first two joints lie on a line, the third by its two lengths to the side that the hand says,
every further one by three lengths from joints already placed: two would leave a mirror image.
"""

from __future__ import annotations

import math
from collections.abc import Mapping, Sequence

from rigpose.model.bench import Bench
from rigpose.model.names import KeyPath, shown
from rigpose.model.rig import Coordinates

Lengths = dict[frozenset[str], float]
Placed = dict[str, Coordinates]


def shape_from_lengths(bench: Bench, path: KeyPath, joints: Sequence[str], lengths: Lengths,
                       left: bool) -> tuple[Coordinates, ...] | None:
    """The joints' places, the first at the origin, or None after noting what is wrong."""
    path = (*path, "lengths")
    placed = _first_three(bench, path, joints, lengths, left)
    if placed is None or not _place_others(bench, path, joints, lengths, placed):
        return None
    if not _all_agree(bench, path, joints, lengths, placed):
        return None
    return tuple(placed[name] for name in joints)


def _first_three(bench: Bench, path: KeyPath, joints: Sequence[str], lengths: Lengths,
                 left: bool) -> Placed | None:
    a, b, c = joints[:3]
    lacking = [p for p in ((a, b), (b, c), (a, c)) if frozenset(p) not in lengths]
    if lacking:
        bench.notes.add(path, "the first three joints of a plate need all three lengths",
                        f"none for {shown(list(lacking[0]))}", "add it as [joint, joint, length]")
        return None
    ab, bc, ac = (lengths[frozenset(p)] for p in ((a, b), (b, c), (a, c)))
    longest = max(ab, bc, ac)
    over = 2 * longest - (ab + bc + ac)
    if over > 1e-12 * longest:
        got = f"{ab:.9g}, {bc:.9g} and {ac:.9g}"
        bench.notes.add(path, "the longest side of a triangle is at most the two others together",
                        f"{got}, too long by {over:.9g}", f"mend the lengths of {a}, {b} and {c}")
        return None
    along = (ab * ab + ac * ac - bc * bc) / (2 * ab)
    height = math.sqrt(max(0.0, (ac - along) * (ac + along)))
    flat = 0.0 if over >= -1e-12 * longest else height
    return {a: (0.0, 0.0), b: (ab, 0.0), c: (along, flat if left else -flat)}


def _place_others(bench: Bench, path: KeyPath, joints: Sequence[str], lengths: Lengths,
                  placed: Placed) -> bool:
    """Place all that can be placed from those placed so far, until nothing is left."""
    near = _neighbours(lengths)
    left = [n for n in joints if n not in placed]
    while left:
        waiting = []
        for name in left:
            place = _meeting(name, near.get(name, {}), placed)
            if place is None:
                waiting.append(name)
            else:
                placed[name] = place
        if len(waiting) == len(left):
            return _tell_loose(bench, path, waiting[0], near.get(waiting[0], {}), placed)
        left = waiting
    return True


def _neighbours(lengths: Lengths) -> dict[str, dict[str, float]]:
    near: dict[str, dict[str, float]] = {}
    for pair, length in lengths.items():
        a, b = pair
        near.setdefault(a, {})[b] = length
        near.setdefault(b, {})[a] = length
    return near


def _tell_loose(bench: Bench, path: KeyPath, name: str, near: Mapping[str, float],
                placed: Placed) -> bool:
    known = [n for n in near if n in placed]
    rule = "every further joint of a plate needs three lengths, from joints that are not in line"
    got = f"{shown(name)} has {len(known)}" + (f", from {', '.join(known)}" if known else "")
    bench.notes.add(path, rule, got, "add a length, or give the joints' places with `at` instead")
    return False


def _meeting(name: str, near: Mapping[str, float], placed: Placed) -> Coordinates | None:
    """Where two circles meet, the side by a third; None where the lengths leave it open."""
    known = [(placed[n], length) for n, length in near.items() if n in placed]
    for k, (p, r) in enumerate(known):
        for q, s in known[k + 1:]:
            found = _two_circles(p, r, q, s)
            if len(found) == 1:
                return found[0]
            place = _sided(found, known, math.dist(p, q))
            if place is not None:
                return place
    return None


def _two_circles(p: Coordinates, r: float, q: Coordinates, s: float) -> list[Coordinates]:
    apart = math.dist(p, q)
    x, y = (q[0] - p[0]) / apart, (q[1] - p[1]) / apart
    along = (apart * apart + (r - s) * (r + s)) / (2 * apart)
    square = (r - along) * (r + along)
    foot = (p[0] + along * x, p[1] + along * y)
    # Circles that don't meet give their foot too: the check of all lengths then tells by how much.
    if square <= 1e-12 * max(r, s) ** 2:
        return [foot]
    height = math.sqrt(square)
    return [(foot[0] - h * y, foot[1] + h * x) for h in (height, -height)]


def _sided(found: Sequence[Coordinates], known: Sequence[tuple[Coordinates, float]],
           apart: float) -> Coordinates | None:
    """The meeting that the other lengths agree with, if they tell the two apart."""
    misses = [max(abs(math.dist(c, p) - r) for p, r in known) for c in found]
    if abs(misses[0] - misses[1]) <= 1e-9 * apart:
        return None
    return found[0] if misses[0] < misses[1] else found[1]


def _all_agree(bench: Bench, path: KeyPath, joints: Sequence[str], lengths: Lengths,
               placed: Placed) -> bool:
    """Whether every length is met within slack."""
    slack = bench.slack * (bench.size or max(lengths.values()))
    good = True
    for pair, length in lengths.items():
        a, b = sorted(pair, key=joints.index)
        made = math.dist(placed[a], placed[b])
        if abs(made - length) > slack:
            rule = "the lengths of a plate must agree with one another"
            got = f"{length:.9g} for {shown([a, b])}, where the others make it {made:.9g}"
            bench.notes.add(path, rule, got, f"write {made!r}, or leave it out")
            good = False
    return good
