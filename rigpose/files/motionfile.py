"""Motions as CSV, written and read back; and how far two motions lie apart."""

from __future__ import annotations

from dataclasses import dataclass
from fractions import Fraction
from pathlib import Path

import numpy as np

from rigpose.files.csvfile import Layout, RigWriter, ValuesWriter, read_positions
from rigpose.files.scene import Outlet, from_scene, outlet, to_scene
from rigpose.ground.errors import BadInput, Problem
from rigpose.ground.words import Found, State
from rigpose.model.equations import Array
from rigpose.model.judge import size_of
from rigpose.model.rig import Rig
from rigpose.model.spacerows import third_of
from rigpose.motion.motion import Motion
from rigpose.solve.hanging import carried
from rigpose.solve.knowns import Knowns


def save_motion(motion: Motion, path: str | Path, *, unit: str | None = None,
                up: str | None = None, fps: Fraction | float | None = None,
                offset: Fraction | float = 0, layout: Layout = "tall") -> None:
    """Write joint positions as CSV (RFC 4180) in the scene's frame.

    unit, up, fps, offset : the file's; what isn't given stays as rig and shot have it
    layout : "tall" is frame,joint,x,y,z, "wide" one row a frame

    Helper joints of hinges and sliders are left out. Nothing is rounded but by the change of unit.
    The file appears whole or not at all. Raises
    BadInput for an unknown unit, axis or layout and where the file can't be written.
    """
    way = outlet(motion.rig, motion.fps, unit=unit, up=up,
                 to_fps=None if fps is None else Fraction(fps), offset=Fraction(offset))
    with RigWriter(path, motion.rig, layout=layout) as writer:
        writer.block(way.number(motion.frames), to_file(motion.rig, way, motion.positions))


def to_file(rig: Rig, way: Outlet, positions: Array) -> Array:
    """Positions (..., dim) of the rig's frame in the file's, (..., 3)."""
    return way.convert(to_scene(rig, positions))


def save_values(motion: Motion, path: str | Path, *, unit: str | None = None,
                fps: Fraction | float | None = None, offset: Fraction | float = 0) -> None:
    """Write drives, gauges and limit angles as CSV: frame,name,value (degrees or the unit)."""
    way = outlet(motion.rig, motion.fps, unit=unit,
                 to_fps=None if fps is None else Fraction(fps), offset=Fraction(offset))
    with ValuesWriter(path, motion.value_names) as writer:
        writer.block(way.number(motion.frames), values_table(motion, way))


def values_table(motion: Motion, way: Outlet) -> Array:
    """``(n_frames, n_values)`` in the file's unit."""
    angles = {p.name for p in (*motion.rig.cranks, *motion.rig.limits)}
    columns = [motion.value(n) if n in angles else way.lengths(motion.value(n))
               for n in motion.value_names]
    return np.stack(columns, axis=1) if columns else np.zeros((len(motion), 0))


def load_motion(path: str | Path, rig: Rig, *, unit: str | None = None, up: str | None = None,
                fps: Fraction | float = 24) -> Motion:
    """Read a CSV of joint positions, in either layout, as a motion of a rig.

    unit, up : the file's (the rig's where not given). Joints that the file doesn't have are NaN,
    but for helper joints of a plate three of whose others, not in line, tell where they are; so
    the state of a frame says only whether some joint has a place. Raises BadInput for a file
    that is no table of positions and for one with several branches.
    """
    table = read_positions(path, names=rig.names)
    if len(table.branches) > 1:
        raise BadInput(Problem(str(path), "branch", "a motion is one branch",
                               f"{len(table.branches)} branches", "write one of them"))
    way = outlet(rig, Fraction(fps), unit=unit, up=up)
    known = [k for k, j in enumerate(table.joints) if j in rig.index]
    if not known:
        raise BadInput(Problem(str(path), "joint", f"some joint is one of {rig.name}", "none",
                               "is it the right rig?"))
    places, _ = from_scene(rig, way.revert(table.positions[0]))
    positions = np.full((len(table.frames), len(rig.joints), rig.dim), np.nan)
    positions[:, [rig.index[table.joints[k]] for k in known]] = places[:, known]
    _fill_helpers(rig, positions)
    alive = ~np.isnan(positions).all(axis=(1, 2))
    for array in (positions,):
        array.flags.writeable = False
    first = positions[int(np.argmax(alive))]
    return Motion(rig=rig, frames=table.frames, positions=positions,
                  state=np.where(alive, np.uint8(State.MET), np.uint8(State.NONE)),
                  margin=np.full(len(positions), np.nan, dtype=np.float32), name="", bends={},
                  knowns=Knowns(len(positions), {}, {}), size=size_of(first), found=Found.SOME,
                  fps=Fraction(fps), title=Path(path).stem)


def _fill_helpers(rig: Rig, positions: Array) -> None:
    """Put helper joints where their plates carry them, in place ``(n_frames, n_joints, dim)``."""
    helpers = {rig.index[j] for j in rig.helper_joints}
    if not helpers:
        return
    for plate in rig.plates:
        joints = [rig.index[j] for j in plate.joints]
        shape = np.array(plate.shape)
        mine = [k for k, j in enumerate(joints) if j not in helpers]
        three = third_of(shape[mine], 0, 1) if len(mine) > 2 else None
        if three is None:
            continue
        base = [mine[0], mine[1], mine[three]]
        placed = [positions[:, joints[k]].T for k in base]
        for k in set(range(len(joints))) - set(mine):
            gone = np.isnan(positions[:, joints[k], 0])
            spot = carried(placed, [shape[b][:, None] for b in base], shape[k][:, None]).T
            positions[gone, joints[k]] = spot[gone]


@dataclass(frozen=True)
class Difference:
    """How far two motions lie apart at the frames that both have.

    worst : the largest distance of a joint, in the first rig's unit; ``joint`` and ``frame`` say
    where (NaN and empty where nothing can be compared)
    missing : frames in which only one of them has a pose
    """

    worst: float
    joint: str
    frame: float
    missing: tuple[float, ...]


def compare(one: Motion, other: Motion) -> Difference:
    """The largest distance between two motions, joint by joint, frame by frame."""
    frames, first, second = np.intersect1d(one.frames, other.frames, return_indices=True)
    joints = [j for j in one.joints if j in other.rig.index]
    a = one.positions[first][:, [one.rig.index[j] for j in joints]]
    b = other.positions[second][:, [other.rig.index[j] for j in joints]]
    gap = np.linalg.norm(a - b, axis=-1)
    alone = np.isnan(a).all(axis=(1, 2)) != np.isnan(b).all(axis=(1, 2))
    missing = tuple(map(float, frames[alone]))
    if not gap.size or np.isnan(gap).all():
        return Difference(float("nan"), "", float("nan"), missing)
    f, j = np.unravel_index(int(np.nanargmax(gap)), gap.shape)
    return Difference(float(gap[f, j]), joints[int(j)], float(frames[f]), missing)
