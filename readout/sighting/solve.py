"""Least squares on a folded strip: shift and turn of the line, with every nuisance free.

Level of a pixel at distance u across and y along the arm:

    b + g u + C F(u - c (dx + dt y)),

background b and its slope g, contrast C, half width and blur inside F, and the two wanted ones,
shift dx and change of slope dt of the line the strip was cut along. The variance of a pixel is
read from the residuals as a straight line in the light (photon noise grows with it: the photon
transfer method, EMVA 1288), used as weight, and gives the covariance: no noise is assumed.
"""

from __future__ import annotations

import math
from dataclasses import dataclass, replace

import numpy as np

from readout.least_squares import linear_least_squares
from readout.model import F64, QUANTISATION_VAR
from readout.sighting.fold import Fold
from readout.sighting.profile import full_width_at_half_maximum, line_profile

MOST_STEPS = 4
SETTLED = 0.02
"""pixels by which width, blur and line may still change in the step before the weighted one"""
DAMPING = np.array([1e-9, 1e-9, 1e-9, 0.01, 0.01, 1e-9, 1e-9])
"""Marquardt damping of half width and blur: of a line thinner than its blur only one is seen"""

LEAST_COLUMN = 1e-50
"""a column of the Jacobian this small against the largest says nothing"""


@dataclass(frozen=True, slots=True)
class Shape:
    """What an arm looks like across: levels and pixels."""

    background: float
    gradient: float
    contrast: float
    half_width: float
    blur: float

    @property
    def reach_px(self) -> float:
        """Distance from the middle at which the line has faded out."""
        return self.half_width + 4 * self.blur + 1

    @property
    def width_px(self) -> float:
        return full_width_at_half_maximum(self.half_width, self.blur)

    @property
    def peak_contrast(self) -> float:
        """Height of the profile at its middle: less than ``contrast`` for a thin line."""
        middle = line_profile(np.zeros(1), self.half_width, self.blur)
        return self.contrast * float(middle.value[0])


@dataclass(frozen=True, slots=True)
class Solution:
    """What one solution of a fold gives.

    ``shift`` (px, along x) and ``turn`` (slope) improve the line the strip was cut along;
    ``cov`` (2, 2) is their covariance. ``explained``: share of the folded profile's variance that
    the model explains. ``pixel_sd``: typical noise of a pixel, levels. ``model``, ``flank``,
    ``weight`` (phases, columns): expected level, its derivative by shift, 1 / variance.
    """

    shape: Shape
    shift: float
    turn: float
    cov: F64
    explained: float
    pixel_sd: float
    model: F64
    flank: F64
    weight: F64


def solve_fold(fold: Fold, cosine: float, shape: Shape) -> Solution | None:
    """Separable least squares for one fold (Golub and Pereyra, SIAM J. Numer. Anal. 10 (1973) 413).

    Background, gradient and contrast are linear and solved for at each step; width, blur, shift
    and turn follow by Gauss-Newton. Unweighted first, then with the variance the residuals show.
    """
    weight = np.ones_like(fold.level)
    shift = turn = 0.0
    weighted = False
    for step in range(MOST_STEPS):
        profile = line_profile(fold.u - cosine * shift, shape.half_width, shape.blur, cosine)
        levels = _linear_part(fold, profile.value, weight)
        if levels is None:
            return None
        background, gradient, contrast = levels
        shape = replace(shape, background=background, gradient=gradient, contrast=contrast)
        model = background + gradient * fold.u + contrast * profile.value
        flank = -contrast * cosine * profile.by_u
        if weighted:
            weight = 1 / _pixel_variance(fold, model, flank, contrast * profile.value)
        jacobian = np.stack(
            [
                np.ones_like(fold.u),
                fold.u,
                profile.value,
                contrast * profile.by_half_width,
                contrast * profile.by_blur,
                flank,
                flank,  # times the distance along the arm, which enters through the sums
            ]
        )
        normal, right = _normal_equations(fold, jacobian, model, flank, turn, weight)
        inverse = _inverse(normal, DAMPING)
        if inverse is None:
            return None
        change, cov = inverse @ right, inverse[5:, 5:]
        size = max(shape.half_width, shape.blur)
        shape = replace(
            shape,
            half_width=_step(shape.half_width, change[3], size / 2, shape.blur / 4, 60.0),
            blur=_step(shape.blur, change[4], shape.blur / 2, 0.35, 30.0),
        )
        shift = _step(shift, change[5], 2 * size, -20 * size, 20 * size)
        turn += float(change[6])
        if weighted:
            break
        weighted = step == MOST_STEPS - 2 or np.abs(change[3:6]).max() < SETTLED
    mean_level = fold.level / fold.n
    around = mean_level - fold.level.sum() / (fold.n.sum() * fold.u.shape[1])
    left = float((fold.n * (mean_level - model) ** 2).sum())
    return Solution(
        shape,
        shift,
        turn,
        cov,
        1 - left / max(float((fold.n * around**2).sum()), 1e-300),
        math.sqrt(float(np.median(1 / weight))),
        model,
        flank,
        weight,
    )


def _step(value: float, change: float, longest: float, least: float, most: float) -> float:
    """``value`` after a change no longer than ``longest``, kept between the bounds."""
    return float(np.clip(value + np.clip(change, -longest, longest), least, most))


def _inverse(normal: F64, damping: F64 | float = 1e-9) -> F64 | None:
    """Inverse of normal equations with columns of very different size; None if there is none."""
    scale = np.sqrt(np.diag(normal))
    if not scale.min() > LEAST_COLUMN * scale.max():
        return None
    try:
        inverse = np.linalg.inv(normal / np.outer(scale, scale) + damping * np.eye(len(scale)))
    except np.linalg.LinAlgError:
        return None
    inverse = inverse / np.outer(scale, scale)
    return inverse if np.all(np.isfinite(inverse)) else None


def _linear_part(fold: Fold, value: F64, weight: F64) -> tuple[float, float, float] | None:
    """Background, gradient and contrast that fit best for a given profile."""
    design = np.stack([np.ones_like(value), fold.u, value], axis=-1).reshape(-1, 3)
    try:
        fit = linear_least_squares(design, (fold.level / fold.n).ravel(), (weight * fold.n).ravel())
    except np.linalg.LinAlgError:
        return None
    background, gradient, contrast = fit.parameters
    return float(background), float(gradient), float(contrast)


def _normal_equations(
    fold: Fold, jacobian: F64, model: F64, flank: F64, turn: float, weight: F64
) -> tuple[F64, F64]:
    """J^T W J (7, 7) and J^T W r (7,), rebuilt from the sums.

    Within a phase group the line runs by (phase - mean) off the mean phase and by turn * along off
    the cut: both enter to first order, through the flank.
    """
    n = np.broadcast_to(fold.n, model.shape)
    residual = fold.level - n * model - flank * turn * fold.along
    residual_along = (
        fold.level_along - fold.along * model - flank * (turn * fold.along2 + fold.phase_along)
    )
    flat = jacobian.reshape(7, -1)
    normal = (flat * (weight * n).ravel()) @ flat.T
    crossed = (flat[:6] * (weight * fold.along).ravel()) @ flat[6]
    normal[:6, 6] = normal[6, :6] = crossed
    normal[6, 6] = float((weight * fold.along2 * flank**2).sum())
    right = flat @ (weight * residual).ravel()
    right[6] = float((weight * flank * residual_along).sum())
    return normal, right


def _pixel_variance(fold: Fold, model: F64, flank: F64, light: F64) -> F64:
    """Variance of one pixel as a straight line in its light, from the residuals, shape as model.

    The spread of the phases inside a group moves the flanks a little: known, taken out.
    """
    squares = fold.level2 - 2 * model * fold.level + fold.n * model**2 - flank**2 * fold.phase2
    n = np.broadcast_to(fold.n, model.shape)
    total = float(n.sum())
    mean, mean_light = float(squares.sum()) / total, float((n * light).sum()) / total
    spread = float((n * (light - mean_light) ** 2).sum())
    rise = float(((light - mean_light) * squares).sum()) / spread if spread > 0 else 0.0
    variance = (mean + rise * (light - mean_light)) * (total / max(total - 7, 1.0))
    return np.asarray(np.maximum(variance, max(QUANTISATION_VAR, 0.1 * mean)))
