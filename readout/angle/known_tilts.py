"""A calibration from mirror tilts known up to a common zero.

Unknown are the matrix A of the calibration and the tilt (z_x, z_y) at which the stage reads zero;
p0 stays at the picture's centre. For each row the tilt that the calibration gives for the image's
position must equal the stage's reading plus the zero:

    tilt(A (p_i - p0)) - (x_i + z_x, y_i + z_y) = 0,

weighted by the variance of the stage's reading plus that of the position. Weighted nonlinear least
squares (Levenberg-Marquardt), started from the linear solution for small angles, whose rank is
tested first. The stage thereby defines the axes.

An axis left empty in a row is unknown there. Where the rows with both axes do not suffice (a stage
with one axis, or one axis moved after the other), an empty axis is taken as *held still*: its tilt
is one more unknown, common to all such rows. With one axis alone only a square-pixel camera can be
fitted, A = k R(turn) M with the mounting M as given.
"""

from __future__ import annotations

import math
from collections.abc import Callable
from dataclasses import dataclass, replace

import numpy as np
from scipy.special import chdtri, ndtr, stdtrit

from readout.angle.calibration import Calibration, matrix_rows
from readout.angle.nominal import Mounting, mounting_matrix
from readout.angle.optics import tilt_jacobian, tilt_of_slopes
from readout.errors import BadInput
from readout.model import F64
from readout.units import ARCSEC_PER_RAD

LEAST_SPREAD = 0.005
"""smallest singular value of the scaled design over the largest, below which the points lie, but
for noise, on one line"""
WORST_SCALE_SD = 0.2
"""a focal length less certain than this share is no calibration"""
SUSPICIOUS_SD = 4.0
DOUBTFUL = 0.05
"""residuals this unlikely to be so large by chance widen the uncertainty"""


@dataclass(frozen=True, slots=True)
class TiltSet:
    """What is known of n frames.

    ``names``: of the frames. ``position_px`` (n, 2) and ``position_cov_px2`` (n, 3: xx, xy, yy)
    as sighted; ``tilt_arcsec`` (n, 2), NaN where empty; ``sd_arcsec`` (n,): standard uncertainty
    of one tilt, independent from row to row.
    """

    names: tuple[str, ...]
    position_px: F64
    position_cov_px2: F64
    tilt_arcsec: F64
    sd_arcsec: F64


@dataclass(frozen=True, slots=True)
class Camera:
    """What is known of the camera; the mounting counts only where one axis alone was moved."""

    image_width_px: int
    image_height_px: int
    pitch_um: float | None = None
    mounting: Mounting = Mounting.STRAIGHT

    @property
    def centre_px(self) -> tuple[float, float]:
        return (self.image_width_px - 1) / 2, (self.image_height_px - 1) / 2


@dataclass(frozen=True, slots=True)
class _Model:
    """One way to read the set: which parameters make the matrix, and what empty axes mean.

    ``matrix`` (4,) of the parameters and its derivative (4, m); the zeros and held tilts follow
    as parameters, shared out by ``offset`` (n, 2): column of the parameter each value takes, -1
    where the value is unknown.
    """

    method: str
    start: F64
    matrix: Callable[[F64], tuple[F64, F64]]
    m: int
    offset: np.ndarray


def calibrate_known_tilts(
    tilts: TiltSet,
    camera: Camera,
    *,
    scale_rel_sd: float = 0.0,
    created_utc: str = "",
    calibration_id: str = "",
) -> Calibration:
    """Fit the calibration to a set of known tilts.

    ``scale_rel_sd``: relative standard uncertainty of the stage's scale, common to all rows and
    therefore not averaged down. The covariance claimed is that of the weights; where the
    residuals scatter more than that allows (chi-square test at 5 %) it is widened by the Birge
    ratio (R. T. Birge, Phys. Rev. 40 (1932) 207), and a warning says so.

    Raises
    ------
    BadInput
        If the rows do not determine the calibration: the line says what is missing.
    """
    model = _choose(tilts, camera)
    parameters, cov, residual = _fit(tilts, camera, model)
    matrix, by_parameter = model.matrix(parameters)
    calibration = _bare(matrix, camera)
    variance = _variance(tilts, calibration)
    used = np.isfinite(residual)
    freedom = int(used.sum()) - len(parameters)
    widened = _widening(float(np.sum(residual[used] ** 2 / variance[used])), freedom)
    warnings = list(_warnings(tilts, model, residual / np.sqrt(variance), widened, freedom))
    full = np.zeros((7, 7))
    full[:4, :4] = by_parameter @ cov[: model.m, : model.m] @ by_parameter.T
    full[:4, :4] *= widened**2
    full[:4, :4] += scale_rel_sd**2 * np.outer(matrix, matrix)
    calibration = replace(
        calibration,
        id=calibration_id,
        created_utc=created_utc,
        method=model.method,
        n=len(tilts.names),
        param_cov=tuple(tuple(row) for row in full.tolist()),
        residuals=tuple(_residual_rows(tilts, residual)),
        residual_rms_arcsec=math.sqrt(float(np.mean(residual[used] ** 2))),
        warnings=tuple(warnings),
    )
    if calibration.focal_length_px_sd > WORST_SCALE_SD * calibration.focal_length_px:
        raise BadInput(
            "the tilts are too small for their uncertainty to give a scale: take points further "
            "apart, or know them better"
        )
    return calibration


def _choose(tilts: TiltSet, camera: Camera) -> _Model:
    """The first way to read the set that has full rank."""
    given = np.isfinite(tilts.tilt_arcsec)
    if not given.any(axis=0).any():
        raise BadInput("no tilt is given: fill in x_arcsec or y_arcsec")
    d = tilts.position_px - camera.centre_px
    moved = [np.unique(tilts.tilt_arcsec[given[:, axis], axis]).size > 1 for axis in (0, 1)]
    unknown = np.where(given, [4, 5], -1)
    if all(moved) and _determined(d, unknown):
        return _full("known tilts, both axes", tilts, d, unknown)
    if all(moved):
        _, held = np.unique(np.where(given, [4, 5], [6, 7]), return_inverse=True)
        held = held.reshape(given.shape) + 4
        if _determined(d, held):
            return _full("known tilts, one axis after the other", tilts, d, held)
    elif any(moved):
        return _square(tilts, camera, d, axis=moved.index(True))
    raise BadInput(
        "the points do not determine a calibration: give at least three frames with different "
        "tilts, not all in one direction (or tilts in one axis only, for a square-pixel camera)"
    )


def _determined(d: F64, offset: np.ndarray) -> bool:
    """Rank of the small-angle problem: every matrix element and every zero can be told apart."""
    design = _design(d - d.mean(axis=0), offset)
    length = np.linalg.norm(design, axis=0)
    if len(design) < design.shape[1] or np.any(length == 0):
        return False
    singular = np.linalg.svd(design / length, compute_uv=False)
    return bool(singular[-1] > LEAST_SPREAD * singular[0])


def _design(d: F64, offset: np.ndarray) -> F64:
    """Small-angle design: one row for each value used, columns a_xx a_xy a_yx a_yy and zeros."""
    rows = []
    for axis in (0, 1):
        for i in np.flatnonzero(offset[:, axis] >= 0):
            row = np.zeros(int(offset.max()) + 1)
            row[2 * axis : 2 * axis + 2] = d[i]
            row[offset[i, axis]] = 2 / ARCSEC_PER_RAD
            rows.append(row)
    return np.array(rows).reshape(len(rows), -1)


def _full(method: str, tilts: TiltSet, d: F64, offset: np.ndarray) -> _Model:
    """All four matrix elements free, started from the small-angle solution."""
    known = np.where(np.isfinite(tilts.tilt_arcsec), tilts.tilt_arcsec, 0.0)
    values = np.concatenate([known[offset[:, axis] >= 0, axis] for axis in (0, 1)])
    start, *_ = np.linalg.lstsq(_design(d, offset), -2 * values / ARCSEC_PER_RAD, rcond=None)
    return _Model(method, np.asarray(start), lambda p: (p[:4], np.eye(4)), 4, offset)


def _square(tilts: TiltSet, camera: Camera, d: F64, axis: int) -> _Model:
    """Square pixels and one axis moved: scale and turn from how far and whither the image went."""
    rows = np.isfinite(tilts.tilt_arcsec[:, axis])
    known = tilts.tilt_arcsec[rows, axis]
    if np.unique(known).size < 2 or rows.sum() < 3:
        raise BadInput("one axis was moved, in too few points: give at least three different tilts")
    centred = known - known.mean()
    per_arcsec = centred @ (d[rows] - d[rows].mean(axis=0)) / (centred @ centred)
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

    offset = np.full(tilts.tilt_arcsec.shape, -1)
    offset[rows, axis] = 2
    offset[rows, 1 - axis] = 3
    start = np.array([scale, turn, 0.0, 0.0])
    w = (d[rows] @ matrix(start)[0].reshape(2, 2).T).mean(axis=0)
    rest = -w / 2 * ARCSEC_PER_RAD
    start[2], start[3] = rest[axis] - known.mean(), rest[1 - axis]
    return _Model(f"known tilts in {'xy'[axis]} only, square pixels", start, matrix, 2, offset)


def _fit(tilts: TiltSet, camera: Camera, model: _Model) -> tuple[F64, F64, F64]:
    """Parameters, their covariance, and the residuals (n, 2) in arc-seconds, NaN where unused."""
    from scipy.optimize import least_squares  # a second to import: only where it is needed

    d = tilts.position_px - camera.centre_px
    used = model.offset >= 0
    known = np.where(np.isfinite(tilts.tilt_arcsec), tilts.tilt_arcsec, 0.0)

    def residual(p: F64) -> F64:
        w = d @ model.matrix(p)[0].reshape(2, 2).T
        tilt = np.stack(tilt_of_slopes(w[:, 0], w[:, 1]), axis=1)
        return np.asarray(tilt - known - np.where(used, p[model.offset], 0.0))

    def jacobian(p: F64) -> F64:
        flat, by_parameter = model.matrix(p)
        w = d @ flat.reshape(2, 2).T
        by_w = tilt_jacobian(w[:, 0], w[:, 1])
        dw = np.einsum("jkm,nk->njm", by_parameter.reshape(2, 2, -1), d)
        full = np.zeros((*d.shape, len(p)))
        full[..., : model.m] = by_w @ dw
        for n, axis in zip(*np.nonzero(used), strict=True):
            full[n, axis, model.offset[n, axis]] = -1.0
        return full

    def solve(start: F64) -> tuple[F64, F64]:
        """One weighted fit: parameters and their covariance."""
        flat, _ = model.matrix(start)
        weight = 1 / np.sqrt(_variance(tilts, _bare(flat, camera)))[used]

        def weighted_residual(p: F64) -> F64:
            return residual(p)[used] * weight

        def weighted_jacobian(p: F64) -> F64:
            return jacobian(p)[used] * weight[:, None]

        found = least_squares(
            weighted_residual,
            start,
            jac=weighted_jacobian,
            x_scale="jac",
            xtol=1e-14,
            ftol=1e-14,
            gtol=1e-14,
        ).x
        weighted = weighted_jacobian(found)
        length = np.linalg.norm(weighted, axis=0)
        inverse = np.linalg.inv((weighted / length).T @ (weighted / length))
        return np.asarray(found), inverse / np.outer(length, length)

    rough, _ = solve(model.start)
    parameters, cov = solve(rough)  # the weights need the scale, which hardly changes any more
    return parameters, cov, np.where(used, residual(parameters), np.nan)


def _bare(flat: F64, camera: Camera) -> Calibration:
    """A calibration with this matrix and nothing else."""
    return Calibration(
        id="",
        created_utc="",
        method="",
        matrix=matrix_rows(flat.reshape(2, 2)),
        p0_px=camera.centre_px,
        image_width_px=camera.image_width_px,
        image_height_px=camera.image_height_px,
        pitch_um=camera.pitch_um,
    )


def _variance(tilts: TiltSet, calibration: Calibration) -> F64:
    """Variance of each residual: the stage's reading and the position, (n, 2), arcsec^2."""
    noise = [
        np.diag(calibration.noise_cov(x, y, (xx, xy, yy)))
        for (x, y), (xx, xy, yy) in zip(tilts.position_px, tilts.position_cov_px2, strict=True)
    ]
    return np.asarray(np.array(noise) + tilts.sd_arcsec[:, None] ** 2)


def _widening(chi_square: float, freedom: int) -> float:
    """Factor on the claimed sd: 1 where the residuals are as large as their uncertainties allow.

    Else the Birge ratio times Student's factor for a scatter known from ``freedom`` values.
    """
    if freedom == 0 or chi_square <= chdtri(freedom, DOUBTFUL):
        return 1.0
    return math.sqrt(chi_square / freedom) * float(stdtrit(freedom, ndtr(1.0)))


def _residual_rows(tilts: TiltSet, residual: F64) -> list[dict[str, object]]:
    return [
        {
            "file": name,
            "x_px": float(place[0]),
            "y_px": float(place[1]),
            "x_residual_arcsec": None if math.isnan(left[0]) else float(left[0]),
            "y_residual_arcsec": None if math.isnan(left[1]) else float(left[1]),
        }
        for name, place, left in zip(tilts.names, tilts.position_px, residual, strict=True)
    ]


def _warnings(
    tilts: TiltSet, model: _Model, normalised: F64, widened: float, freedom: int
) -> list[str]:
    found = ["signs unproven: nudge the mirror and compare"]
    if model.m == 2:
        found.append("one axis only: square pixels and the mounting are taken for granted")
    if freedom == 0:
        found.append("as many unknowns as values: nothing checks this calibration")
    elif widened > 1:
        found.append(
            "residuals are larger than their uncertainties allow: "
            f"the claimed ones are widened {widened:.1f} times"
        )
    worst = np.nanmax(np.abs(normalised), axis=1)
    found += [
        f"{tilts.names[i]} is {worst[i]:.1f} sd off: look at this frame and its tilt"
        for i in np.flatnonzero(worst > SUSPICIOUS_SD * widened)
    ]
    return found
