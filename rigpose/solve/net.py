"""What the planner walks on: which parts touch which joints, and which bodies there are."""

from __future__ import annotations

from collections import defaultdict
from math import dist

from rigpose.model.equations import GROUND, Array, Equations
from rigpose.model.record import Record
from rigpose.solve.plan import Length, Local, Step


class Solid(Record, frozen=True, eq=False):
    """A rigid body as the planner sees it: a plate, a bone, or a group solved in its own frame.

    local : joint to its place (numbers, or a point of the group's frame)
    uses : names of equations that hold inside it, ``steps`` make its points
    """

    name: str
    local: dict[int, Local]
    uses: frozenset[tuple[str, int]]
    steps: tuple[Step, ...] = ()

    def length(self, i: int, j: int) -> Length:
        """Between two of its joints."""
        a, b = self.local[i], self.local[j]
        if isinstance(a, tuple) and isinstance(b, tuple):
            return Length(constant=dist(a, b))
        if isinstance(a, int) and isinstance(b, int):
            return Length(points=(a, b))
        raise TypeError("a body's places are all numbers or all points")


class Net:
    """Joint-to-part tables of a rig's equations; bodies may be added while planning."""

    def __init__(self, eqs: Equations) -> None:
        self.eqs = eqs
        d = eqs.distances
        self.ends: list[list[int]] = d.ends.tolist()
        self.value: list[int] = d.value.tolist()
        self.radius: list[float] = d.length.tolist()
        self.links: dict[int, list[tuple[int, int]]] = defaultdict(list)
        for k, (a, b) in enumerate(self.ends):
            self.links[a].append((k, b))
            self.links[b].append((k, a))
        self.rails_on: dict[int, list[int]] = defaultdict(list)
        for k, joint in enumerate(eqs.lines.joint):
            for j in {int(joint), *map(int, eqs.lines.along[k])} - {GROUND}:
                self.rails_on[j].append(k)
        self.slots = bool((eqs.lines.along[:, 0] != GROUND).any())
        self.cranks_on: dict[int, list[int]] = defaultdict(list)
        for k in range(len(eqs.angles.names)):
            for j in {*map(int, eqs.angles.line[k]), *map(int, eqs.angles.base[k])} - {GROUND}:
                self.cranks_on[j].append(k)
        self.absorbed: set[tuple[str, int]] = set()
        self._listed: tuple[Array, list[list[list[float]]]] | None = None
        self.solids: list[Solid] = []
        self.solids_on: dict[int, list[int]] = defaultdict(list)
        for k, body in enumerate(eqs.bodies):
            places = zip(body.joints.tolist(), map(tuple, body.shape.tolist()), strict=True)
            self.add(Solid(body.name, dict(places), frozenset({("body", k)})))
        for k, (a, b) in enumerate(self.ends if eqs.bodies else ()):
            # A bone inside a plate can only check the plate, never place a joint.
            if set(self.solids_on[a]) & set(self.solids_on[b]):
                self.absorbed.add(("distance", k))

    def listed(self, poses: Array) -> list[list[list[float]]]:
        """Poses ``(P, n_joints, dim)`` as plain numbers, kept: looking up one is then quick."""
        if self._listed is None or self._listed[0] is not poses:
            self._listed = (poses, poses.tolist())
        return self._listed[1]

    def add(self, solid: Solid) -> int:
        """Put a body in; it is offered to every frame from now on."""
        number = len(self.solids)
        self.solids.append(solid)
        for j in solid.local:
            self.solids_on[j].append(number)
        return number

    def merge(self, solid: Solid) -> int:
        """Put a group in; the bodies and bones that it is made of are not offered any more."""
        self.absorbed |= solid.uses
        for kind, k in solid.uses:
            if kind in ("solid", "body"):
                for j in self.solids[k].local:
                    if k in self.solids_on[j]:
                        self.solids_on[j].remove(k)
        return self.add(solid)

    def bone(self, k: int) -> Solid:
        """Distance row ``k`` seen as a body of two joints (bones only)."""
        a, b = map(int, self.eqs.distances.ends[k])
        length = float(self.eqs.distances.length[k])
        start, end = (0.0,) * self.eqs.dim, (length, *(0.0,) * (self.eqs.dim - 1))
        return Solid(self.eqs.distances.names[k], {a: start, b: end},
                     frozenset({("distance", k)}))
