"""Which branches are mirror images of each other.

There are mirror images only where everything known lies on one line. Whether a branch's image is
a branch too is then seen from the places: a handed plate off the line or a driven angle leaves
none.
"""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from rigpose.model.equations import Array
from rigpose.model.rig import Rig

NEAR = 1e-8


def mirror_images(rig: Rig, poses: Array, known: Array, size: float) -> NDArray[np.intp]:
    """For poses ``(n_branches, n_joints, 2)`` of one frame the number of each one's image, -1 for
    none. ``known (k, 2)`` are the places of pins and whole targets."""
    none = np.full(len(poses), -1, dtype=np.intp)
    if rig.dim != 2:
        return none
    line = _line(known, size)
    if line is None or len(poses) < 2:
        return none
    through, d = line
    w = poses - through
    image = through + 2.0 * (w @ d)[..., None] * d - w
    return _matched(poses, image, size, none)


def _line(known: Array, size: float) -> tuple[Array, Array] | None:
    """A point and a unit direction of the line through all known places."""
    if len(known) < 2:
        return None
    far = known - known[0]
    k = int(np.argmax(np.linalg.norm(far, axis=1)))
    long = float(np.linalg.norm(far[k]))
    if long <= NEAR * size:
        return None
    d = far[k] / long
    off = np.abs(far[:, 0] * d[1] - far[:, 1] * d[0]).max()
    return (known[0], d) if off <= NEAR * size else None


def _matched(poses: Array, image: Array, size: float, none: NDArray[np.intp]) -> NDArray[np.intp]:
    """Looked up by one generic number a pose, then compared in full."""
    rng = np.random.default_rng(3)
    weight = rng.normal(size=poses.shape[1:])
    key = np.einsum("bnd,nd->b", poses, weight)
    want = np.einsum("bnd,nd->b", image, weight)
    order = np.argsort(key)
    place = np.searchsorted(key[order], want)
    for step in (-1, 0, 1):
        guess = order[np.clip(place + step, 0, len(order) - 1)]
        same = np.abs(poses[guess] - image).max(axis=(1, 2)) <= NEAR * size
        none = np.where(same & (none < 0), guess, none)
    return none
