"""Weighted least squares for one arm: position and slope, with every nuisance free.

Level of a pixel at distance u across and y along the arm:

    b + g u + C F(u - c (dx + dt y)),

background b and its slope g, contrast C, half width and blur inside F, and the two wanted ones,
shift dx and change of slope dt of the line. Gauss-Newton on the folded strip; the strip is cut
anew along the improved line until it no longer moves. The variance of a pixel is read from the
residuals as a straight line in the level (photon noise grows with the light: EMVA 1288, the
photon transfer method), used as weight, and gives the covariance: no noise figure is assumed.
"""

from __future__ import annotations

import math
from dataclasses import dataclass, replace

import numpy as np

from readout.model import F64, Pixels
from readout.sighting.fold import Fold, Line, Strip, cut_strip, fold_strip
from readout.sighting.profile import full_width_at_half_maximum, line_profile

QUANTISATION_VAR = 1 / 12
CUTS = 6
STEPS_PER_CUT = 3
SETTLED_PX = 0.01
DAMPING = np.array([1e-9, 1e-9, 1e-9, 0.01, 0.01, 1e-9, 1e-9])
"""Marquardt damping of half width and blur: of a line thinner than its blur only one is seen"""


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
class ArmFit:
    """A fitted arm: its line, the covariance of (middle_x, slope), its shape, and how it fits.

    ``explained``: share of the folded profile's variance that the model explains. ``row_sd``: sd of
    a pixel on the background, levels. ``rows``: rows used.
    """

    line: Line
    cov: F64
    shape: Shape
    explained: float
    pixel_sd: float
    rows: int
    strip: Strip

    def x_var_at(self, y: float) -> float:
        """Variance of the line's x at row ``y``, px^2."""
        along = np.array([1.0, y - self.line.middle_y])
        return float(along @ self.cov @ along)


@dataclass(frozen=True, slots=True)
class _Solution:
    shape: Shape
    shift: float
    turn: float
    cov: F64
    explained: float
    pixel_sd: float


def fit_arm(
    pixels: Pixels,
    line: Line,
    shape: Shape,
    *,
    skip_from: float = math.inf,
    skip_to: float = -math.inf,
) -> ArmFit | None:
    """Fit an upright arm near ``line``; for a level one pass the transposed picture.

    ``shape`` is a rough start. Rows from ``skip_from`` to ``skip_to`` are left out. Returns None
    where no arm can be fitted: never raises on a bad picture.
    """
    for _ in range(CUTS):
        half_columns = math.ceil(1.25 * shape.reach_px + 2)
        strip = cut_strip(pixels, line, half_columns, skip_from=skip_from, skip_to=skip_to)
        strip = None if strip is None else _lit(strip, shape)
        if strip is None:
            return None
        line = Line(float(line.x_at(strip.rows.mean())), line.slope, float(strip.rows.mean()))
        strip = Strip(line, strip.levels, strip.rows, strip.phase, strip.offsets)
        solution = _solve(fold_strip(strip), line.cosine, shape)
        if solution is None or abs(solution.shift) > half_columns:
            return None
        shape = solution.shape
        line = Line(line.middle_x + solution.shift, line.slope + solution.turn, line.middle_y)
        ends = np.abs(strip.along).max()
        if abs(solution.shift) + abs(solution.turn) * ends < SETTLED_PX:
            break
    return ArmFit(
        line,
        solution.cov,
        shape,
        solution.explained,
        solution.pixel_sd,
        len(strip.rows),
        strip,
    )


def _lit(strip: Strip, shape: Shape) -> Strip | None:
    """The rows in which the arm is there: a reticle may be shorter than the picture."""
    u = (strip.offsets[None, :] - strip.phase[:, None]) * strip.line.cosine
    core = np.abs(u) <= max(1.0, shape.half_width)
    away = np.abs(u) >= min(shape.reach_px, 0.8 * np.abs(u).max())
    counts = np.maximum(core.sum(axis=1), 1), np.maximum(away.sum(axis=1), 1)
    height = (strip.levels * core).sum(axis=1) / counts[0]
    height -= (strip.levels * away).sum(axis=1) / counts[1]
    width = min(15, len(height) // 2 * 2 - 1)
    smooth = np.convolve(np.pad(height, width // 2, mode="edge"), np.full(width, 1 / width), "valid")
    smooth *= math.copysign(1.0, shape.contrast)
    keep = smooth > 0.4 * np.percentile(smooth, 75)
    return strip.only(keep) if keep.sum() >= 8 else None


def _solve(fold: Fold, cosine: float, shape: Shape) -> _Solution | None:
    """Separable least squares for one cut (Golub and Pereyra, SIAM J. Numer. Anal. 10 (1973) 413).

    Background, gradient and contrast are linear and solved for at each step; width, blur, shift
    and turn follow by Gauss-Newton. Unweighted first, then with the variance the residuals show.
    """
    weight = np.ones_like(fold.level)
    shift = turn = 0.0
    for step in range(STEPS_PER_CUT + 1):
        profile = line_profile(fold.u - cosine * shift, shape.half_width, shape.blur, cosine)
        levels = _linear_part(fold, profile.value, weight)
        if levels is None:
            return None
        background, gradient, contrast = levels
        shape = replace(shape, background=background, gradient=gradient, contrast=contrast)
        model = background + gradient * fold.u + contrast * profile.value
        flank = -contrast * cosine * profile.by_u
        if step == STEPS_PER_CUT:
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
        change = inverse @ right
        size = max(shape.half_width, shape.blur)
        shape = replace(
            shape,
            half_width=_step(shape.half_width, change[3], size / 2, shape.blur / 4, 60.0),
            blur=_step(shape.blur, change[4], shape.blur / 2, 0.35, 30.0),
        )
        shift = _step(shift, change[5], 2 * size, -20 * size, 20 * size)
        turn += float(change[6])
    mean_level = fold.level / fold.n
    around = mean_level - fold.level.sum() / (fold.n.sum() * fold.u.shape[1])
    left = float((fold.n * (mean_level - model) ** 2).sum())
    return _Solution(
        shape,
        shift,
        turn,
        inverse[5:, 5:],
        1 - left / max(float((fold.n * around**2).sum()), 1e-300),
        math.sqrt(float(np.median(1 / weight))),
    )


def _step(value: float, change: float, longest: float, least: float, most: float) -> float:
    """``value`` after a change no longer than ``longest``, kept between the bounds."""
    return float(np.clip(value + np.clip(change, -longest, longest), least, most))


def _inverse(normal: F64, damping: F64 | float = 1e-9) -> F64 | None:
    """Inverse of normal equations with columns of very different size; None if not finite."""
    scale = np.sqrt(np.maximum(np.diag(normal), 1e-300))
    try:
        inverse = np.linalg.inv(
            normal / np.outer(scale, scale) + damping * np.eye(len(scale))
        )
    except np.linalg.LinAlgError:
        return None
    inverse = inverse / np.outer(scale, scale)
    return inverse if np.all(np.isfinite(inverse)) else None


def _linear_part(fold: Fold, value: F64, weight: F64) -> tuple[float, float, float] | None:
    """Background, gradient and contrast that fit best for a given profile."""
    columns = np.stack([np.ones_like(value), fold.u, value]).reshape(3, -1)
    inverse = _inverse((columns * (weight * fold.n).ravel()) @ columns.T)
    if inverse is None:
        return None
    background, gradient, contrast = inverse @ (columns @ (weight * fold.level).ravel())
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
        fold.level_along
        - fold.along * model
        - flank * (turn * fold.along2 + fold.phase_along)
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
