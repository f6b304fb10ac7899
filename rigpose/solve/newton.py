"""Blocks of several joints: Newton's method from many seeded real starts, all at once.

What it finds is real and complete only with probability: the set is marked so. Starts are drawn
until a whole round brings nothing new; a block of which one solution was seen just once draws on.
"""

from __future__ import annotations

import numpy as np

from rigpose.ground.words import Found, weaker
from rigpose.model.equations import Array, Ints
from rigpose.solve.plan import Cluster
from rigpose.solve.table import Table

ROUND = 512
LEAST_ROUNDS = 4
MOST_ROUNDS = 40
QUIET_ROUNDS = 3
LONE_ROUNDS = 10
"""Rounds for which a solution that was seen only once keeps the search going."""
UNKNOWNS = 8192
PATIENCE, CLOSING = 12, 0.1
STEPS = 40
SAME = 1e-6


def _columns(step: Cluster, dim: int) -> Ints:
    return (np.array(step.joints)[:, None] * dim + np.arange(dim)).ravel()


def _surroundings(step: Cluster, table: Table) -> tuple[Array, Array, Array]:
    """Poses ``(B, n, 2)`` with the placed joints in, values ``(B, v)``, targets ``(B, n, 2)``."""
    eqs = table.eqs
    b = table.branches
    x = np.repeat(eqs.at[None], b, axis=0)
    for j in step.around:
        x[:, j] = np.broadcast_to(table.point(j)[:, :, 0], (eqs.dim, b)).T
    values = np.full((b, len(eqs.values)), np.nan)
    for v in step.system.drives:
        values[:, v] = table.value(v)[..., 0]
    goal = np.zeros_like(x)
    for (j, axis), given in table.inputs.targets.items():
        goal[:, j, axis] = given[0]
    return x, values, goal


def newton(
    step: Cluster, x: Array, values: Array, goal: Array, steps: int = STEPS
) -> tuple[Array, Array]:
    """Newton from poses ``(N, n, 2)``; returns the poses and their largest residuals ``(N,)``."""
    columns, square = _columns(step, step.system.eqs.dim), np.array(step.square)
    x = x.copy()
    flat = x.reshape(len(x), -1)
    active = np.arange(len(x))
    size = np.full(len(x), np.inf)
    for turn in range(steps):
        r, jac = step.system.both(x[active], values[active], goal[active])
        r = r[:, square]
        size[active] = np.abs(r).max(axis=1)
        going = np.isfinite(size[active]) & (size[active] > 1e-15) & (size[active] < 1e6)
        if turn >= PATIENCE:
            # Starts that wander are given up; others lie nearer to what they would find.
            going &= size[active] < CLOSING
        active, r = active[going], r[going]
        if not len(active):
            break
        a = jac[going][:, square][:, :, columns]
        try:
            move = np.linalg.solve(a, -r[..., None])[..., 0]
        except np.linalg.LinAlgError:
            move = np.einsum("nmr,nr->nm", np.linalg.pinv(a, rcond=1e-10), -r)
        # A step longer than the whole rig leaves the region in which the slopes mean anything.
        long = np.abs(move).max(axis=1, keepdims=True)
        move *= np.minimum(1.0, 1.0 / np.maximum(long, 1e-300))
        flat[np.ix_(active, columns)] += move
    r = step.system.residual(x, values, goal)
    return x, np.nan_to_num(np.abs(r[:, np.array(step.square)]).max(axis=1), nan=np.inf)


def _starts(step: Cluster, x: Array, reach: float, rng: np.random.Generator, n: int) -> Array:
    """``(B * n, n_joints, 2)``: joints of the block thrown about the placed ones."""
    b = len(x)
    start = np.repeat(x, n, axis=0)
    around = x[:, list(step.around)].mean(axis=1) if step.around else x.mean(axis=1)
    places = rng.normal(size=(b * n, len(step.joints), x.shape[2])) * reach * 0.7
    start[:, list(step.joints)] = places + np.repeat(around, n, axis=0)[:, None]
    return start


def _new_ones(known: list[Array], seen: list[int], found: Array, reach: float) -> int:
    """Sort solutions into the known ones of a branch; returns how many were new."""
    new = 0
    for place in found:
        for k, old in enumerate(known):
            if np.abs(old - place).max() < SAME * reach:
                seen[k] += 1
                break
        else:
            known.append(place)
            seen.append(1)
            new += 1
    return new


def solve_block(step: Cluster, table: Table) -> list[Array]:
    """For every branch the solutions ``(k, joints, 2)`` found."""
    x, values, goal = _surroundings(step, table)
    b, reach = len(x), table.reach
    rng = np.random.default_rng(1789)
    known: list[list[Array]] = [[] for _ in range(b)]
    seen: list[list[int]] = [[] for _ in range(b)]
    joints, rows = list(step.joints), np.array(step.rows)
    per = max(32, min(ROUND, 40_000 // b, UNKNOWNS // (len(joints) * x.shape[2])))
    quiet = 0
    for turn in range(MOST_ROUNDS):
        start = _starts(step, x, reach, rng, per)
        if turn == 0:
            start[::per] = x
        v, g = np.repeat(values, per, axis=0), np.repeat(goal, per, axis=0)
        with np.errstate(all="ignore"):
            place, size = newton(step, start, v, g)
            off = np.abs(step.system.residual(place, v, g)[:, rows]).max(axis=1)
        good = (size < 1e-12) & (off < max(table.slack, 1e-11) * reach * 4)
        new = 0
        for k in range(b):
            mine = place[k * per : (k + 1) * per][good[k * per : (k + 1) * per]][:, joints]
            new += _new_ones(known[k], seen[k], mine, reach)
        quiet = 0 if new else quiet + 1
        once = any(1 in s for s in seen)
        lone = once and turn + 1 < LONE_ROUNDS
        if turn + 1 >= LEAST_ROUNDS and quiet >= QUIET_ROUNDS and not lone:
            break
    table.found = weaker(table.found, Found.PROBABLY)
    return [np.array(k).reshape(-1, len(joints), x.shape[2]) for k in known]


def block_margin(step: Cluster, x: Array, values: Array, goal: Array) -> Array:
    """``(N,)``: one over the largest movement of a joint per unit change of a row."""
    dim = step.system.eqs.dim
    _, jac = step.system.both(x, values, goal)
    a = jac[:, np.array(step.square)][:, :, _columns(step, dim)]
    known = np.isfinite(a).all(axis=(1, 2))
    if not known.all():
        # What the block hangs on is dead in some of these.
        out = np.full(len(x), np.nan)
        if known.any():
            out[known] = block_margin(step, x[known], values[known], goal[known])
        return out
    move = np.linalg.pinv(a, rcond=1e-14)
    n, w, m = move.shape
    far = np.sqrt((move.reshape(n, w // dim, dim, m) ** 2).sum(axis=2)).max(axis=(1, 2))
    margin: Array = np.minimum(1.0, 1.0 / np.maximum(far, 1.0))
    return margin


def cluster_branches(step: Cluster, table: Table, number: int) -> None:
    """Every branch splits into the block's solutions; only for a single frame."""
    found = solve_block(step, table)
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
        _narrow(step, table, places)


def _narrow(step: Cluster, table: Table, places: Array) -> None:
    x, values, goal = _surroundings(step, table)
    x[:, list(step.joints)] = places
    margin = block_margin(step, x, values, goal)[:, None]
    table.sines.append(margin**2)
    table.narrow(margin)


def cluster_follow(step: Cluster, table: Table, number: int) -> None:
    """The block's pose that Newton reaches from the guess; only for a single frame."""
    x, values, goal = _surroundings(step, table)
    joints = list(step.joints)
    if table.guess is None:
        raise ValueError("a block of several joints is followed from a pose")
    x[:, joints] = table.guess[:, joints]
    with np.errstate(all="ignore"):
        place, size = newton(step, x, values, goal, 12)
    good = size < 1e-12
    table.kill(good[:, None], number)
    for j in joints:
        table.put(j, np.ascontiguousarray(place[:, j].T[:, :, None]), table.rounding * 100)
    _narrow(step, table, place[:, joints])
