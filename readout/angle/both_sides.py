"""Least squares with residuals on both sides: of the positions and of the known tilts.

For each row a true position q and a true tilt are sought, as near as possible to the position p
that was sighted and to the tilt that is known,

    tilt(A (q - p0)) = known + zero,

each residual weighted by its own covariance. Solved by repeated linearisation at the true
positions found so far (H. I. Britt and R. H. Luecke, Technometrics 15 (1973) 233): each step is
one linear least-squares problem with the covariance C = C_tilt + J C_position J^T, J being the
derivative of the tilt with the position, after which the positions move by their share of the
residual.

What is shared by several rows (the scale of a stage, the length of a lever) is propagated to the
parameters whole, by the change it makes in them (JCGM 100:2008, 5.2): no number of rows reduces
it. It takes no part in the estimate itself, for a factor common to all rows, left free, is drawn
to whatever makes the residuals small; but what it explains of them is not held against the rows.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from readout.angle.optics import tilt_jacobian, tilt_of_slopes
from readout.angle.tilt_model import TiltModel
from readout.angle.tilt_set import Camera, TiltSet
from readout.errors import BadInput
from readout.least_squares import linear_least_squares
from readout.model import F64

MOST_STEPS = 50
MOST_BENT = 0.1
"""a distortion that shifts a point of the picture by more than this share is none"""
SMALLEST_STEP = 1e-9
"""in standard uncertainties of the parameters"""


@dataclass(frozen=True, slots=True)
class BothSides:
    """The solution for n rows and p parameters: those of the model, then k1 if it was asked for.

    ``residual_arcsec`` (n, 2): tilt of the sighted position minus what is known of it, NaN where
    unused. ``whitened`` (n, 2) the same in its own uncertainty, ``design`` (n, 2, p) its
    derivatives with the parameters and ``shared`` (n, 2, k) with the shared inputs, all 0 where
    unused; ``root`` (n, 2, 2) the Cholesky factor of its covariance. ``cofactor`` (p, p):
    covariance of the parameters if the uncertainties of the rows are as stated, without what they
    share.
    """

    parameters: F64
    cofactor: F64
    residual_arcsec: F64
    whitened: F64
    design: F64
    shared: F64
    root: F64
    used: NDArray[np.bool_]
    k1_at: int | None

    @property
    def freedom(self) -> int:
        """Values less unknowns."""
        return int(self.used.sum()) - len(self.parameters)

    @property
    def shared_cov(self) -> F64:
        """Covariance of the parameters from what the rows share, (p, p)."""
        change = self.cofactor @ self.design[self.used].T @ self.shared[self.used]
        return np.asarray(change @ change.T)


def fit_both_sides(
    tilts: TiltSet, camera: Camera, model: TiltModel, *, with_k1: bool = False
) -> BothSides:
    """The least-squares solution, k1 free or 0.

    Raises BadInput where the rows do not determine it.
    """
    used = model.offset >= 0
    p_px = tilts.position_px - camera.centre_px
    xx, xy, yy = tilts.position_cov_px2.T
    place_cov = np.stack([np.stack([xx, xy], -1), np.stack([xy, yy], -1)], -2)
    k1_at = len(model.start) if with_k1 else None
    theta = np.append(model.start, 0.0) if with_k1 else model.start
    q_px = p_px.copy()
    for _ in range(MOST_STEPS):
        step = _linearised(tilts, model, theta, q_px, p_px, place_cov, k1_at)
        try:
            fit = linear_least_squares(step.design[used], -step.whitened[used])
        except np.linalg.LinAlgError:
            raise BadInput(
                "the rows do not determine a calibration: add frames with other tilts"
            ) from None
        left = step.whitened + step.design @ fit.parameters
        pull = np.linalg.solve(np.swapaxes(step.root, 1, 2), left[..., None])
        theta = theta + fit.parameters
        if k1_at is not None and _bends(model, theta, k1_at, p_px) > MOST_BENT:
            raise BadInput("no distortion of a lens makes these tilts of these positions")
        q_px = p_px - (place_cov @ np.swapaxes(step.per_px, 1, 2) @ pull)[..., 0]
        if np.max(np.abs(fit.parameters) / np.sqrt(np.diag(fit.cofactor))) < SMALLEST_STEP:
            break
    else:
        raise BadInput("the tilts and the positions do not go together: check which frame is which")
    last = _linearised(tilts, model, theta, q_px, p_px, place_cov, k1_at)
    by_shared = np.zeros((len(q_px), 2, len(tilts.shared)))
    for k, item in enumerate(tilts.shared):
        by_shared[..., k] = np.where(used, item.tilt_arcsec, 0.0)
    return BothSides(
        parameters=theta,
        cofactor=fit.cofactor,
        residual_arcsec=np.where(used, last.residual_arcsec, np.nan),
        whitened=last.whitened,
        design=last.design,
        shared=_solve(last.root, by_shared),
        root=last.root,
        used=used,
        k1_at=k1_at,
    )


@dataclass(frozen=True, slots=True)
class _Linearised:
    residual_arcsec: F64
    whitened: F64
    design: F64
    root: F64
    per_px: F64


def _linearised(
    tilts: TiltSet,
    model: TiltModel,
    theta: F64,
    q_px: F64,
    p_px: F64,
    place_cov: F64,
    k1_at: int | None,
) -> _Linearised:
    """Residuals at the positions sighted, seen from the tangent at ``q_px``, and derivatives."""
    used = model.offset >= 0
    flat, by_parameter = model.matrix(theta)
    matrix = flat.reshape(2, 2)
    k1 = 0.0 if k1_at is None else theta[k1_at]
    slope = q_px @ matrix.T
    r2 = np.sum(slope**2, axis=1)
    stretch = (1 + k1 * r2)[:, None, None] * np.eye(2)
    stretch = stretch + 2 * k1 * slope[:, :, None] * slope[:, None, :]
    w = slope * (1 + k1 * r2)[:, None]
    by_w = tilt_jacobian(w[:, 0], w[:, 1])
    by_slope = by_w @ stretch
    per_px = by_slope @ matrix
    n, p = len(q_px), len(theta)
    design = np.zeros((n, 2, p))
    design[..., : model.m] = by_slope @ np.einsum(
        "jkm,nk->njm", by_parameter.reshape(2, 2, -1), q_px
    )
    rows, axes = np.nonzero(used)
    design[rows, axes, model.offset[rows, axes]] = -1.0
    if k1_at is not None:
        design[..., k1_at] = (by_w @ (slope * r2[:, None])[..., None])[..., 0]
    known = tilts.known_arcsec + np.where(used, theta[model.offset], 0.0)
    tilt = np.stack(tilt_of_slopes(w[:, 0], w[:, 1]), axis=1)
    residual = tilt - known + (per_px @ (p_px - q_px)[..., None])[..., 0]
    cov = tilts.tilt_cov_arcsec2 + per_px @ place_cov @ np.swapaxes(per_px, 1, 2)
    both = used[:, :, None] & used[:, None, :]
    cov = np.where(both, cov, np.eye(2))
    root = np.linalg.cholesky(cov)
    held = np.where(used, residual, 0.0)
    whitened = _solve(root, held[..., None])[..., 0]
    whitened_design = _solve(root, np.where(used[..., None], design, 0.0))
    return _Linearised(residual, whitened, whitened_design, root, per_px)


def _bends(model: TiltModel, theta: F64, k1_at: int, p_px: F64) -> float:
    """Largest share by which the distortion shifts a point."""
    slope = p_px @ model.matrix(theta)[0].reshape(2, 2).T
    return float(abs(theta[k1_at]) * np.max(np.sum(slope**2, axis=1)))


def _solve(root: F64, values: F64) -> F64:
    return np.asarray(np.linalg.solve(root, values), dtype=np.float64)
