"""Blocks of several joints: Newton's method from many seeded real starts, all at once.

What it finds is real and complete only with probability: the set is marked so. Starts are drawn
until whole rounds bring nothing new; a block of which one solution was seen just once draws on.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, field

import numpy as np
from numpy.typing import NDArray

from rigpose.ground.words import Found, weaker
from rigpose.model.equations import Array, Ints
from rigpose.solve.continua import free_poses
from rigpose.solve.descent import POLISHING, margins, newton, polished
from rigpose.solve.ownrows import OwnRows, own_rows
from rigpose.solve.plan import Cluster
from rigpose.solve.starts import starts
from rigpose.solve.table import Table

Mask = NDArray[np.bool_]

ROUND = 512
LEAST_ROUNDS = 4
MOST_ROUNDS = 40
QUIET_ROUNDS = 3
LONE_ROUNDS = 10
"""Rounds for which a solution that was seen only once keeps the search going."""
UNKNOWNS = 8192
SAME = 1e-6
CLOSE = 1e-4
"""Poses at dead centres nearer than this part of the reach are one: they are known no better."""
HOLD = 1e-13
"""Rows hold to this once polished: some hundred roundings of the size."""
LOOSE = 1e-3
"""A solution of the chosen rows that is off by more in the others is none of theirs."""
FOLLOWING = 12


@dataclass(frozen=True)
class Hung:
    """A block with what it hangs on: poses ``x (B, k, dim)`` of the joints that it touches, known
    ``values (B, v)`` and targets ``goal (B, k, dim)``."""

    step: Cluster
    own: OwnRows
    x: Array
    values: Array
    goal: Array
    reach: float
    slack: float
    wished: bool

    def settled(self, place: Array, owner: Ints, steps: int = POLISHING) -> (
            tuple[Array, Mask]):
        """Poses ``(N, k, dim)`` of branches ``owner (N,)`` polished, and which hold their rows.

        Where given numbers contradict each other, or the rig's own do, the chosen rows hold and
        the others are off by no more than slack.
        """
        own, v, g = self.own, self.values[owner], self.goal[owner]
        place, size = polished(own, place, v, g, own.agreed, steps)
        good: Mask = size < HOLD
        room = max(self.slack, 1e-11) * self.reach * 4
        if len(own.agreed) < len(own.rows):
            good &= np.abs(own.residual(place, v, g)).max(axis=1) < room
            return place, good
        some = np.flatnonzero(~good & np.isfinite(size))
        if self.wished and len(some):
            rough, size = polished(own, place[some], v[some], g[some], own.choice, steps)
            off = np.abs(own.residual(rough, v[some], g[some])).max(axis=1, initial=0.0)
            fine = (size < HOLD) & (off < room)
            place[some[fine]], good[some[fine]] = rough[fine], True
        return place, good

    def margin(self, place: Array, owner: Ints) -> Array:
        """The margins ``(N,)`` of poses of branches."""
        return margins(self.own, place, self.values[owner], self.goal[owner], self.own.agreed)


def _block(step: Cluster, table: Table) -> Hung:
    """The block in every cell: branch by branch, each frame by frame."""
    own, eqs = own_rows(step), table.eqs
    b, f = table.branches, table.inputs.frames
    x = np.repeat(eqs.at[own.keep][None], b * f, axis=0)
    at = {int(j): k for k, j in enumerate(own.keep)}
    for j in step.around:
        x[:, at[j]] = np.broadcast_to(table.point(j), (eqs.dim, b, f)).reshape(eqs.dim, b * f).T
    values = np.full((b * f, len(eqs.values)), np.nan)
    for v in step.system.drives:
        # What another group reads off, none of the block's rows asks for.
        if v in table.values or v in table.inputs.values:
            values[:, v] = np.broadcast_to(table.value(v), (b, f)).ravel()
    goal = np.zeros_like(x)
    for (j, axis), given in table.inputs.targets.items():
        if j in at:
            goal[:, at[j], axis] = np.broadcast_to(given, (b, f)).ravel()
    wished = own.wished or bool(table.inputs.targets)
    return Hung(step, own, x, values, goal, table.reach, table.slack, wished)


@dataclass
class _Poses:
    """The poses of one branch: places ``(joints, dim)``, which are at dead centres, how often each
    was seen, and the latest round that brought a new one."""

    known: list[Array] = field(default_factory=list)
    dead: list[bool] = field(default_factory=list)
    seen: list[int] = field(default_factory=list)
    latest: int = -1

    def search_on(self, rounds: int) -> bool:
        """Whether more starts are wanted after some rounds."""
        lone = 1 in self.seen and rounds < LONE_ROUNDS
        return rounds < LEAST_ROUNDS or rounds - 1 - self.latest < QUIET_ROUNDS or lone


def solve_block(block: Hung, table: Table) -> list[Array]:
    """For every branch the solutions ``(k, joints, dim)`` found."""
    own, b = block.own, len(block.x)
    rng = np.random.default_rng(1789)
    sets = [_Poses() for _ in range(b)]
    done = 0
    while done < MOST_ROUNDS:
        branches = np.array([k for k, s in enumerate(sets) if s.search_on(done)], dtype=np.intp)
        if not len(branches):
            break
        per = max(32, min(ROUND, 40_000 // len(branches), UNKNOWNS // own.width))
        # The least number of rounds is run in one go.
        rounds = max(LEAST_ROUNDS - done, 1)
        turn = np.repeat(np.arange(done, done + rounds), per * len(branches))
        owner = np.tile(np.repeat(branches, per), rounds)
        start = starts(own, block.x[owner], block.values[owner], block.reach, rng)
        if done == 0:
            start[: per * b : per] = block.x
        with np.errstate(all="ignore"):
            _sort_in(block, sets, *_near(block, start, owner, turn), table)
        done += rounds
    table.found = weaker(table.found, Found.PROBABLY)
    return [np.array(s.known).reshape(-1, len(own.inside), table.eqs.dim) for s in sets]


def _near(block: Hung, start: Array, owner: Ints, turn: Ints) -> tuple[Array, Ints, Ints]:
    """Poses near solutions, with their branches and rounds."""
    own, values, goal = block.own, block.values, block.goal
    place, near = newton(own, start, values[owner], goal[owner])
    place, owner, turn = place[near], owner[near], turn[near]
    off = np.abs(own.residual(place, values[owner], goal[owner])).max(axis=1, initial=0.0)
    some = off < LOOSE * block.reach
    return place[some], owner[some], turn[some]


def _sort_in(block: Hung, sets: Sequence[_Poses], place: Array, owner: Ints, turn: Ints,
             table: Table) -> None:
    """Count the solutions of some rounds; new ones that are poses apart become known."""
    if not len(place):
        return
    inside, same = block.own.inside, SAME * block.reach
    flat = place[:, inside].reshape(len(place), -1)
    # Branch by branch, as there may be a thousand.
    order = np.argsort(owner, kind="stable")
    kinds = [_kinds(flat, mine, sets[owner[mine[0]]], same)
             for mine in np.split(order, np.flatnonzero(np.diff(owner[order])) + 1)]
    # One of each kind is polished; those that are polished into one are one.
    first, count = np.array([n for k in kinds for n in k], dtype=np.intp).reshape(-1, 2).T
    polished, good = _apart(block, place[first], owner[first], table)
    first, count, polished = first[good], count[good], polished[good]
    dead = block.margin(polished, owner[first]) == 0 if len(first) else first
    for k, one in enumerate(first):
        _add(sets[owner[one]], polished[k, inside], bool(dead[k]), int(count[k]), int(turn[one]),
             block.reach)


def _kinds(flat: Array, mine: Ints, poses: _Poses, same: float) -> list[tuple[int, int]]:
    """Solutions ``mine`` of one branch, those that are known counted: the first of every new kind,
    and how many there are of it."""
    for number, old in enumerate(poses.known):
        hit = np.abs(flat[mine] - old.ravel()).max(axis=1, initial=0.0) < same
        poses.seen[number] += int(hit.sum())
        mine = mine[~hit]
    new = []
    while len(mine):
        hit = np.abs(flat[mine] - flat[mine[0]]).max(axis=1, initial=0.0) < same
        new.append((int(mine[0]), int(hit.sum())))
        mine = mine[~hit]
    return new


def _add(poses: _Poses, place: Array, dead: bool, count: int, turn: int, reach: float) -> None:
    """A polished pose into its branch's set."""
    for k, old in enumerate(poses.known):
        if np.abs(old - place).max() < (CLOSE if dead and poses.dead[k] else SAME) * reach:
            poses.seen[k] += count
            return
    poses.known.append(place)
    poses.dead.append(dead)
    poses.seen.append(count)
    poses.latest = max(poses.latest, turn)


def _apart(block: Hung, place: Array, owner: Ints, table: Table) -> tuple[Array, Mask]:
    """The poses polished, and which hold and don't move freely; what moves freely is told."""
    if not len(place):
        return place, np.zeros(0, dtype=bool)
    place, good = block.settled(place, owner)
    which = np.flatnonzero(good)
    place_, mine = place[which], owner[which]

    def settle(tried: Array, pose: Ints) -> tuple[Array, Mask]:
        return block.settled(tried, mine[pose])

    free = free_poses(block.own, place_, block.values[mine], block.goal[mine], block.reach, settle)
    for joint in set(free.values()):
        table.turning.add((block.step.joints[joint], block.step.parts))
    good[which[list(free)]] = False
    return place, good


def cluster_branches(step: Cluster, table: Table, number: int) -> None:
    """Every branch splits into the block's solutions; only for a single frame."""
    block = _block(step, table)
    found = solve_block(block, table)
    index = np.repeat(np.arange(table.branches), [len(k) for k in found])
    places = np.concatenate(found) if found else np.zeros((0, len(step.joints), table.eqs.dim))
    table.kill(np.array([[len(k) > 0] for k in found]), number)
    for name in ("alive", "margin", "killer"):
        array = getattr(table, name)
        if array is not None:
            setattr(table, name, np.broadcast_to(array, (table.branches, array.shape[-1])))
    table.sines = [np.broadcast_to(s, (table.branches, s.shape[-1])) for s in table.sines]
    table.renumber(index)
    order = np.concatenate([np.arange(len(k)) for k in found]) if len(index) else index
    table.codes.append((order.astype(np.int16), table.level))
    for k, j in enumerate(step.joints):
        table.put(j, np.ascontiguousarray(places[:, k].T[:, :, None]), table.rounding * 100)
    if len(index):
        x = block.x[index]
        x[:, block.own.inside] = places
        _narrow(block, table, x, index)


def _narrow(block: Hung, table: Table, x: Array, owner: Ints) -> None:
    margin = block.margin(x, owner).reshape(-1, table.inputs.frames)
    table.sines.append(margin**2)
    table.narrow(margin)


def cluster_follow(step: Cluster, table: Table, number: int) -> None:
    """The block's poses that are reached from the guess, in all cells at once."""
    if table.guess is None:
        raise ValueError("a block of several joints is followed from a pose")
    block, joints = _block(step, table), list(step.joints)
    x, owner = block.x.copy(), np.arange(len(block.x))
    x[:, block.own.inside] = table.guess[:, :, joints].reshape(len(x), len(joints), -1)
    with np.errstate(all="ignore"):
        place, good = block.settled(x, owner, FOLLOWING)
    shape = table.branches, table.inputs.frames
    table.kill(good.reshape(shape), number)
    for k, j in zip(block.own.inside, joints, strict=True):
        table.put(j, place[:, k].T.reshape(-1, *shape), table.rounding * 100)
    _narrow(block, table, place, owner)
