"""Which unknowns a set of known tilts has, and whether it can tell them apart.

Unknown are the matrix A of the calibration and the tilt (z_x, z_y) at which the stage reads zero.
An axis left empty in a row is unknown there. Where the rows with both axes do not suffice (a stage
with one axis, or one axis moved after the other), an empty axis is taken as *held still*: its tilt
is one more unknown, common to all such rows. With one axis alone only a square-pixel camera can be
fitted, A = k R(turn) M with the mounting M as given.
"""

from __future__ import annotations

import math
from collections.abc import Callable
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from readout.angle.nominal import mounting_matrix
from readout.angle.tilt_set import Camera, TiltSet
from readout.errors import BadInput
from readout.model import F64
from readout.units import ARCSEC_PER_RAD

LEAST_SPREAD = 0.005
"""smallest singular value of the scaled design over the largest, below which the points lie, but
for noise, on one line"""
SAME_ARCSEC = 1e-6
"""tilts nearer than this are one: what rounding leaves of the sine of half a turn"""


@dataclass(frozen=True, slots=True)
class TiltModel:
    """One way to read the set: which parameters make the matrix, and what empty axes mean.

    ``matrix`` (4,) of the first ``m`` parameters and its derivative (4, m); the zeros and held
    tilts follow as parameters, shared out by ``offset`` (n, 2): column of the parameter each value
    takes, -1 where the value is unknown. ``start`` holds all of them.
    """

    method: str
    start: F64
    matrix: Callable[[F64], tuple[F64, F64]]
    m: int
    offset: NDArray[np.int64]


def choose_model(tilts: TiltSet, camera: Camera, way: str = "known tilts") -> TiltModel:
    """The first way to read the set that has full rank.

    ``way`` is how the method is called, before what was moved. Raises BadInput, one line that says
    what is missing, where the rows do not determine a calibration.
    """
    given = np.isfinite(tilts.tilt_arcsec)
    if not given.any():
        raise BadInput("no tilt is given: fill in x_arcsec or y_arcsec")
    n = len(tilts.names)
    if n < 3:
        raise BadInput(
            f"{n} frame{'s' if n > 1 else ''} ({', '.join(tilts.names)}) cannot make a "
            "calibration: give at least three frames with different tilts"
        )
    d = tilts.position_px - camera.centre_px
    moved = [_reach(tilts.tilt_arcsec[given[:, axis], axis]) > SAME_ARCSEC for axis in (0, 1)]
    zeros = tilts.zeros
    own = 4 + 2 * zeros[:, None] + np.array([0, 1])
    unknown = np.where(given, own, -1)
    if not any(moved):
        raise BadInput(
            f"all {n} rows say the same tilt, from {tilts.names[0]} to {tilts.names[-1]}: "
            "give at least three frames with different tilts"
        )
    if all(moved):
        if _determined(d, unknown):
            return _full(f"{way}, both axes", tilts, d, unknown)
        _, held = np.unique(np.where(given, [4, 5], [6, 7]), return_inverse=True)
        held = held.reshape(given.shape) + 4
        if not given.all() and zeros.max() == 0 and _determined(d, held):
            return _full(f"{way}, one axis after the other", tilts, d, held)
        raise BadInput(_on_one_line(tilts, d))
    return _square(tilts, camera, d, moved.index(True), way)


def _reach(known_arcsec: F64) -> float:
    return float(np.ptp(known_arcsec)) if known_arcsec.size else 0.0


def _on_one_line(tilts: TiltSet, d: F64) -> str:
    """Why two moved axes do not determine the four elements of the matrix."""
    n = len(tilts.names)
    if np.ptp(d, axis=0).max() == 0:
        return (
            f"the image does not move from {tilts.names[0]} to {tilts.names[-1]}: "
            "check which frame is which"
        )
    return (
        f"the {n} points from {tilts.names[0]} to {tilts.names[-1]} lie on one line, so that they "
        "do not determine a calibration of both axes: add at least three frames with different "
        "tilts beside that line (or give the tilts of one axis only, for a square-pixel camera)"
    )


def _determined(d: F64, offset: NDArray[np.int64]) -> bool:
    """Rank of the small-angle problem: every matrix element and every zero can be told apart."""
    design = _design(d - d.mean(axis=0), offset)
    length = np.linalg.norm(design, axis=0)
    if len(design) < design.shape[1] or np.any(length == 0):
        return False
    singular = np.linalg.svd(design / length, compute_uv=False)
    return bool(singular[-1] > LEAST_SPREAD * singular[0])


def _design(d: F64, offset: NDArray[np.int64]) -> F64:
    """Small-angle design: one row for each value used, columns a_xx a_xy a_yx a_yy and zeros."""
    rows = []
    for axis in (0, 1):
        for i in np.flatnonzero(offset[:, axis] >= 0):
            row = np.zeros(int(offset.max()) + 1)
            row[2 * axis : 2 * axis + 2] = d[i]
            row[offset[i, axis]] = 2 / ARCSEC_PER_RAD
            rows.append(row)
    return np.array(rows).reshape(len(rows), -1)


def _full(method: str, tilts: TiltSet, d: F64, offset: NDArray[np.int64]) -> TiltModel:
    """All four matrix elements free, started from the small-angle solution."""
    known = tilts.known_arcsec
    values = np.concatenate([known[offset[:, axis] >= 0, axis] for axis in (0, 1)])
    start, *_ = np.linalg.lstsq(_design(d, offset), -2 * values / ARCSEC_PER_RAD, rcond=None)
    return TiltModel(method, np.asarray(start), lambda p: (p[:4], np.eye(4)), 4, offset)


def _square(tilts: TiltSet, camera: Camera, d: F64, axis: int, way: str) -> TiltModel:
    """Square pixels and one axis moved: scale and turn from how far and whither the image went."""
    rows = np.isfinite(tilts.tilt_arcsec[:, axis])
    zeros = tilts.zeros
    known = np.where(rows, tilts.tilt_arcsec[:, axis], np.nan)
    levels = np.unique(np.round(known[rows] / SAME_ARCSEC))
    if len(levels) < 3 and zeros.max() == 0:
        raise BadInput(
            f"{'xy'[axis]} was moved between {len(levels)} tilts only, which nothing checks: "
            "give at least three different tilts"
        )
    centred_known, centred = known.copy(), d.copy()
    for zero in np.unique(zeros):
        members = rows & (zeros == zero)
        centred_known[members] -= known[members].mean()
        centred[members] -= d[members].mean(axis=0)
    moved = centred_known[rows]
    per_arcsec = moved @ centred[rows] / (moved @ moved)
    if np.linalg.norm(per_arcsec) == 0:
        raise BadInput("the image does not move with the tilts: check which frame is which")
    nominal = np.linalg.inv(mounting_matrix(camera.mounting))[:, axis] * -1
    turn = math.atan2(per_arcsec[1], per_arcsec[0]) - math.atan2(nominal[1], nominal[0])
    scale = 2 / ARCSEC_PER_RAD / float(np.linalg.norm(per_arcsec))

    def matrix(p: F64) -> tuple[F64, F64]:
        """Matrix k M R(turn) and its derivatives by k and turn."""
        turned = mounting_matrix(camera.mounting, math.degrees(p[1]))
        quarter = mounting_matrix(camera.mounting, math.degrees(p[1]) + 90)
        columns = np.stack([turned.ravel(), p[0] * quarter.ravel()], axis=1)
        return p[0] * turned.ravel(), columns

    offset = np.full(tilts.tilt_arcsec.shape, -1, dtype=np.int64)
    offset[rows, axis] = 2 + 2 * zeros[rows]
    offset[rows, 1 - axis] = 3 + 2 * zeros[rows]
    start = np.zeros(int(offset.max()) + 1)
    start[:2] = scale, turn
    w = d @ matrix(start)[0].reshape(2, 2).T
    rest = -w / 2 * ARCSEC_PER_RAD
    for zero in np.unique(zeros[rows]):
        members = rows & (zeros == zero)
        start[2 + 2 * zero] = rest[members, axis].mean() - known[members].mean()
        start[3 + 2 * zero] = rest[members, 1 - axis].mean()
    return TiltModel(f"{way} in {'xy'[axis]} only, square pixels", start, matrix, 2, offset)
