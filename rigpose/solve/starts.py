"""Starts for a block: joints thrown about one by one, and whole bodies thrown where they hang.

Bodies are thrown so that their own shape holds already: a body of which no joint stands yet gets
a random place and turn, one that hangs on a joint a random turn about it, on two a random turn
about their line, and on three it is carried; a joint on a bone goes to a random side at its
distance. Orders are drawn for a block once, arrays run over all starts.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from rigpose.model.equations import Array, Body, Equations
from rigpose.solve.ownrows import OwnRows

Mask = NDArray[np.bool_]

ORDERS = 4
"""Orders in which parts are thrown: which of two bones leads a joint differs between them, and in
every second one bones come before bodies that hang on one joint."""
WIDTH = 0.7
"""Joints that hang on nothing are thrown so far about the placed ones, as a part of the reach."""
FLAT = 1e-9


@dataclass(frozen=True)
class Throw:
    """One part thrown. A body's ``led`` are the joints that stand (places in its shape), ``dst``
    those that follow; a bone's are its two ends, ``row`` its row in the distances."""

    body: Body | None
    led: tuple[int, ...]
    dst: tuple[int, ...]
    row: int = -1


def scattered(own: OwnRows, x: Array, reach: float, rng: np.random.Generator) -> Array:
    """Poses ``(N, k, dim)`` whose joints are thrown about the placed ones one by one."""
    start = x.copy()
    start[:, own.inside] = _middle(own, x) + WIDTH * reach * rng.normal(
        size=(len(x), len(own.inside), x.shape[2]))
    return start


def _middle(own: OwnRows, x: Array) -> Array:
    """``(N, 1, dim)``: the middle of the placed joints."""
    placed = np.setdiff1d(np.arange(x.shape[1]), own.inside)
    middle: Array = x[:, placed if len(placed) else own.inside].mean(axis=1, keepdims=True)
    return middle


def hung(own: OwnRows, x: Array, values: Array, reach: float, rng: np.random.Generator) -> Array:
    """Poses ``(N, k, dim)`` with whole bodies thrown, by each of the orders in turn."""
    start = scattered(own, x, reach, rng)
    for k, order in enumerate(orders(own)):
        mine = slice(k, None, ORDERS)
        part = start[mine]
        for throw in order:
            if throw.body is None:
                _along_bone(own.system.eqs, throw, part, values[mine], rng)
            else:
                _body(throw, part, rng)
    return start


def orders(own: OwnRows) -> list[list[Throw]]:
    """Some orders in which the block's bodies and bones are thrown."""
    rng = np.random.default_rng(7)
    return [_order(own, rng, k % 2 == 0) for k in range(ORDERS)]


def _order(own: OwnRows, rng: np.random.Generator, whole: bool) -> list[Throw]:
    """What is settled most comes first, then what hangs on a joint that stands: bodies before
    bones (``whole``), or bones before bodies."""
    eqs = own.system.eqs
    stands = np.ones(eqs.n, dtype=bool)
    stands[own.inside] = False
    bodies = [eqs.bodies[k] for k in rng.permutation(len(eqs.bodies))]
    bones = [int(k) for k in rng.permutation(own.system.dist_rows)]
    order: list[Throw] = []
    while True:
        bodies = [b for b in bodies if not stands[b.joints].all()]
        bones = [k for k in bones if not stands[eqs.distances.ends[k]].all()]
        throw = _next(eqs, bodies, bones, stands, whole)
        if throw is None:
            return order
        order.append(throw)
        stands[list(throw.dst)] = True


def _next(eqs: Equations, bodies: list[Body], bones: list[int], stands: Mask,
          whole: bool) -> Throw | None:
    held = [int(stands[b.joints].sum()) for b in bodies]
    most = max(held, default=0)
    if most >= (1 if whole else 2):
        return _thrown(bodies[held.index(most)], stands)
    for k in bones:
        a, b = map(int, eqs.distances.ends[k])
        if stands[a] or stands[b]:
            return Throw(None, (a,) if stands[a] else (b,), (b,) if stands[a] else (a,), k)
    return _thrown(bodies[held.index(most)], stands) if bodies else None


def _thrown(body: Body, stands: Mask) -> Throw:
    """A body with up to three standing joints, which don't lie in one line if there are such."""
    shape = body.shape
    up = [k for k, j in enumerate(body.joints) if stands[j]]
    led = up[:1]
    if len(up) > 1:
        led.append(max(up, key=lambda k: float(np.linalg.norm(shape[k] - shape[led[0]]))))
    if shape.shape[1] == 3 and len(up) > 2:
        e = shape[led[1]] - shape[led[0]]
        off = [float(np.linalg.norm(np.cross(shape[k] - shape[led[0]], e))) for k in up]
        if max(off) > FLAT * float(e @ e):
            led.append(up[int(np.argmax(off))])
    return Throw(body, tuple(led), tuple(int(j) for j in body.joints if not stands[j]))


def _along_bone(eqs: Equations, throw: Throw, x: Array, values: Array,
                rng: np.random.Generator) -> None:
    d = eqs.distances
    way = rng.normal(size=(len(x), x.shape[2]))
    way /= np.linalg.norm(way, axis=1, keepdims=True)
    value = int(d.value[throw.row])
    long = values[:, value, None] if value >= 0 else d.length[throw.row]
    x[:, throw.dst[0]] = x[:, throw.led[0]] + way * long


def _body(throw: Throw, x: Array, rng: np.random.Generator) -> None:
    """Turn and move a body so that its standing joints, up to rounding, stay where they are."""
    body = throw.body
    assert body is not None
    dst = [body.where[j] for j in throw.dst]
    # Without a standing joint the first one stays where it was thrown.
    led = list(throw.led) or [dst[0]]
    stand = x[:, body.joints[led]]
    away = [stand[:, k] - stand[:, 0] for k in range(1, len(led))]
    own_away = [body.shape[k] - body.shape[led[0]] for k in led[1:]]
    dim = x.shape[2]
    while len(away) < dim - 1:
        away.append(rng.normal(size=(len(x), dim)))
        own_away.append(_across(own_away, dim))
    axes, own_axes = _frame(away), _frame([w[None] for w in own_away])[0]
    local = (body.shape[dst] - body.shape[led[0]]) @ own_axes.T
    x[:, throw.dst] = stand[:, :1] + local @ axes


def _across(edges: list[Array], dim: int) -> Array:
    """A direction that doesn't run along an edge, if there is one."""
    axis = int(np.argmin(np.abs(edges[0]))) if edges else 0
    direction: Array = np.eye(dim)[axis]
    return direction


def _frame(edges: list[Array]) -> Array:
    """Orthonormal right-handed axes ``(N, dim, dim)``, as rows, the first along the first edge."""
    first = edges[0] / np.linalg.norm(edges[0], axis=1, keepdims=True)
    if first.shape[1] == 2:
        flat: Array = np.stack([first, np.stack([-first[:, 1], first[:, 0]], axis=1)], axis=1)
        return flat
    across = np.cross(first, edges[1])
    across /= np.linalg.norm(across, axis=1, keepdims=True)
    axes: Array = np.stack([first, np.cross(across, first), across], axis=1)
    return axes


def starts(own: OwnRows, x: Array, values: Array, reach: float,
           rng: np.random.Generator) -> Array:
    """Starts from poses ``(N, k, dim)``: every second one thrown joint by joint."""
    start = x.copy()
    start[::2] = scattered(own, x[::2], reach, rng)
    with np.errstate(invalid="ignore", divide="ignore"):
        start[1::2] = hung(own, x[1::2], values[1::2], reach, rng)
    return start

