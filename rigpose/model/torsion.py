"""The angle about an axis between two joints that lie off it, with its derivatives.

Signed by the right hand about the axis from its first joint to its second. Derivatives as for
torsion angles (Blondel and Karplus, "New formulation for derivatives of torsion angles", J.
Comput. Chem. 17, 1996; from memory, checked against differences in the tests).
"""

from __future__ import annotations

import numpy as np

from rigpose.model.equations import Array


def torsion(f: Array, p: Array, q: Array, s: Array) -> Array:
    """Angles ``(...)`` in radians about the axis p to q, from f to s; points ``(..., 3)``."""
    u, a, b = _parts(f, p, q, s)
    sine = (u * np.cross(a, b)).sum(axis=-1)
    angle: Array = np.arctan2(sine, (a * b).sum(axis=-1))
    return angle


def _parts(f: Array, p: Array, q: Array, s: Array) -> tuple[Array, Array, Array]:
    """The axis' unit vector and what of both joints is square to it."""
    u = q - p
    u = u / np.sqrt((u * u).sum(axis=-1, keepdims=True))
    a, b = f - p, s - p
    return (u, a - (a * u).sum(axis=-1, keepdims=True) * u,
            b - (b * u).sum(axis=-1, keepdims=True) * u)


def torsion_slopes(f: Array, p: Array, q: Array, s: Array) -> tuple[Array, Array, Array, Array]:
    """Derivatives ``(..., 3)`` of `torsion` by each of its four points."""
    big_f, g, h = f - p, p - q, s - q
    a, b = np.cross(big_f, g), np.cross(h, g)
    a2 = (a * a).sum(axis=-1, keepdims=True)
    b2 = (b * b).sum(axis=-1, keepdims=True)
    long = np.sqrt((g * g).sum(axis=-1, keepdims=True))
    fg = (big_f * g).sum(axis=-1, keepdims=True) / (a2 * long)
    hg = (h * g).sum(axis=-1, keepdims=True) / (b2 * long)
    at_f, at_s = -long / a2 * a, long / b2 * b
    at_p = -at_f + fg * a - hg * b
    at_q = -at_s - fg * a + hg * b
    return at_f, at_p, at_q, at_s
