"""Which branches are mirror images of each other.

There are mirror images only where everything known lies on one line, in space in one plane. Whether
a branch's image is a branch too is then seen from the places: a handed plate off the line or a
driven angle leaves none.
"""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from rigpose.model.equations import Array
from rigpose.model.rig import Rig

NEAR = 1e-8


def mirror_images(rig: Rig, poses: Array, known: Array, size: float) -> NDArray[np.intp]:
    """For poses ``(n_branches, n_joints, dim)`` of one frame the number of each one's image, -1 for
    none. ``known (k, dim)`` are the places of pins and whole targets."""
    none = np.full(len(poses), -1, dtype=np.intp)
    normal = _normal(known, size)
    if normal is None or len(poses) < 2:
        return none
    w = poses - known[0]
    image = poses - 2.0 * (w @ normal)[..., None] * normal
    return _matched(poses, image, size, none)


def _normal(known: Array, size: float) -> Array | None:
    """The unit normal of the line (in space: the plane) through all known places, None where
    they lie on none, or on many."""
    if len(known) < known.shape[1]:
        return None
    _, spread, axes = np.linalg.svd(known - known[0], full_matrices=True)
    wide = np.zeros(known.shape[1])
    wide[:len(spread)] = spread
    if wide[-1] > NEAR * size or wide[-2] <= NEAR * size:
        return None
    normal: Array = axes[-1]
    return normal


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
