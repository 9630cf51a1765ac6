"""Least squares on a folded strip: shift and turn of the line, with every nuisance free.

Level of a pixel at distance u across and a along the arm, in a slice of relative contrast c:

    b + g u + C F(u) + c C [F(u - k (dx + dt a)) - F(u)],

background b and its slope g, contrast C, half width and blur inside F, k the width of a pixel
across the arm, and the two wanted ones, shift dx and change of slope dt of the line the strip was
cut along. The variance of a pixel is read from the scatter of slices that see the same phase, as a
straight line in the light (photon noise grows with it: the photon transfer method, EMVA 1288); it
gives weights and covariance: no noise is assumed.
"""

from __future__ import annotations

import math
from dataclasses import dataclass, replace

import numpy as np

from readout.model import F64, QUANTISATION_VAR
from readout.sighting.fold import Fold
from readout.sighting.profile import line_profile

MOST_STEPS = 8
SETTLED = 0.02
"""pixels by which width, blur and line may still change in the last step: the next one's change
goes with its square"""
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
    def fades_px(self) -> float:
        """Distance from the middle at which 0.1 per cent of the line is left."""
        return self.half_width + 3 * self.blur + 0.5

    @property
    def reach_px(self) -> float:
        """Distance from the middle at which the line has faded out."""
        return self.half_width + 4 * self.blur + 1


@dataclass(frozen=True, slots=True)
class Solution:
    """What one solution of a fold gives.

    ``shift`` (px, along x) and ``turn`` (slope) improve the line the strip was cut along;
    ``cov`` (2, 2) is their covariance. ``explained``: share of the folded profile's variance, less
    that of its noise, that the model explains. ``model``, ``profile``, ``flank``, ``weight``
    (phases, columns): expected level, F, its derivative by shift in levels per pixel, and
    1 / variance of a slice's pixel.
    """

    shape: Shape
    shift: float
    turn: float
    cov: F64
    explained: float
    model: F64
    profile: F64
    flank: F64
    weight: F64

    @property
    def slice_sd(self) -> float:
        """Typical noise of a slice's pixel, levels."""
        return 1 / math.sqrt(max(float(np.median(self.weight)), 1e-300))


def solve_fold(fold: Fold, cosine: float, shape: Shape, depth: int = 1) -> Solution | None:
    """Separable least squares for one fold (Golub and Pereyra, SIAM J. Numer. Anal. 10 (1973) 413).

    Background, gradient and contrast are linear and solved for at each step; width, blur, shift
    and turn follow by Gauss-Newton. Unweighted first, then with the variance the slices show;
    ``depth`` rows were averaged to each. Returns None where the pixels say nothing.
    """
    weight = fold.seen
    started = _started(fold, cosine, shape)
    if started is None:
        return None
    shape, shift, turn = started, 0.0, 0.0
    for step in range(MOST_STEPS):
        profile = line_profile(fold.u - cosine * shift, shape.half_width, shape.blur, cosine)
        model = shape.background + shape.gradient * fold.u + shape.contrast * profile.value
        flank = (-shape.contrast * cosine) * profile.by_u
        if step > 0:
            weight = fold.seen / _slice_variance(fold, model, flank, turn, depth)
        columns = np.stack(
            [
                np.ones_like(fold.u),
                fold.u,
                profile.value,
                shape.contrast * profile.by_half_width,
                shape.contrast * profile.by_blur,
            ]
        )
        normal, right = _normal_equations(fold, columns, model, flank, turn, weight)
        inverse = _inverse(normal)
        if inverse is None:
            return None
        cov = inverse[5:, 5:]
        change = inverse @ right
        *_, dh, ds, dx, dt = change.tolist()
        shape, shift, turn = _moved(shape, change), _limited(shift, dx, shape), turn + dt
        if step > 0 and max(abs(dh), abs(ds), abs(dx)) < SETTLED:
            break
    model += (change[:5] @ columns.reshape(5, -1)).reshape(model.shape) + dx * flank
    return Solution(
        shape,
        shift,
        turn,
        cov,
        _explained(fold, model, weight),
        model,
        profile.value,
        flank,
        weight,
    )


def _started(fold: Fold, cosine: float, shape: Shape) -> Shape | None:
    """The shape with the background, gradient and contrast that fit it best, unweighted."""
    value = line_profile(fold.u, shape.half_width, shape.blur, cosine).value
    columns = np.stack([np.ones_like(value), fold.u, value]).reshape(3, -1)
    normal = (columns * (fold.seen * fold.n).ravel()) @ columns.T
    try:
        linear = np.linalg.solve(normal, columns @ (fold.seen * fold.level).ravel()).tolist()
    except np.linalg.LinAlgError:
        return None
    if not all(map(math.isfinite, linear)):
        return None
    return replace(shape, background=linear[0], gradient=linear[1], contrast=linear[2])


def _moved(shape: Shape, change: F64) -> Shape:
    """The shape after a step, its width and blur within what can be."""
    background, gradient, contrast, half_width, blur = change[:5].tolist()
    longest = max(shape.half_width, shape.blur) / 2
    return Shape(
        shape.background + background,
        shape.gradient + gradient,
        shape.contrast + contrast,
        _step(shape.half_width, half_width, longest, shape.blur / 4, 60.0),
        _step(shape.blur, blur, shape.blur / 2, 0.35, 30.0),
    )


def _limited(shift: float, change: float, shape: Shape) -> float:
    size = max(shape.half_width, shape.blur)
    return _step(shift, change, 2 * size, -20 * size, 20 * size)


def _step(value: float, change: float, longest: float, least: float, most: float) -> float:
    """``value`` after a change no longer than ``longest``, kept between the bounds."""
    return min(max(value + min(max(change, -longest), longest), least), most)


def _inverse(normal: F64) -> F64 | None:
    """Inverse of normal equations with columns of very different size; None if there is none."""
    scale = np.sqrt(normal.diagonal())
    if not scale.min() > LEAST_COLUMN * scale.max():
        return None
    scales = scale[:, None] * scale
    try:
        inverse = np.linalg.inv(normal / scales + np.diag(DAMPING)) / scales
    except np.linalg.LinAlgError:
        return None
    return inverse if math.isfinite(float(inverse.sum())) else None


def _normal_equations(
    fold: Fold, columns: F64, model: F64, flank: F64, turn: float, weight: F64
) -> tuple[F64, F64]:
    """J^T W J (7, 7) and J^T W r (7,), rebuilt from the sums.

    ``columns`` are alike in all slices of a phase. Within a phase the line runs by p off the mean
    phase and by turn * a off the cut: both enter to first order, through the flank, as the shift.
    """
    flat, line = columns.reshape(5, -1), weight * flank
    weighted = columns * weight
    steep = (line * flank).sum(axis=1)
    normal = np.empty((7, 7))
    normal[:5, :5] = (weighted * fold.n).reshape(5, -1) @ flat.T
    normal[:5, 5] = normal[5, :5] = flat @ (line * fold.c).ravel()
    normal[:5, 6] = normal[6, :5] = flat @ (line * fold.ca).ravel()
    normal[5, 5] = steep @ fold.c2[:, 0]
    normal[5, 6] = normal[6, 5] = steep @ fold.c2a[:, 0]
    normal[6, 6] = steep @ fold.c2a2[:, 0]
    turned = turn * flank
    right = np.empty(7)
    right[:5] = weighted.reshape(5, -1) @ (fold.level - fold.n * model - turned * fold.ca).ravel()
    right[5] = np.vdot(line, fold.level_c - fold.c * model - turned * fold.c2a)
    right[6] = np.vdot(
        line, fold.level_ca - fold.ca * model - turned * fold.c2a2 - flank * fold.c2pa
    )
    return normal, right


def _slice_variance(fold: Fold, model: F64, flank: F64, turn: float, depth: int) -> F64:
    """Variance of a slice's pixel as a straight line in its level, shape as ``model``.

    From the scatter of slices of one phase about their mean: what the model does not describe
    moves them all alike and does not count. The known spread of their places is taken out.
    """
    freedom = (fold.n - 1) * fold.seen
    places = fold.c2p2 + turn**2 * (fold.c2a2 - fold.ca**2 / fold.n)
    squares = (fold.level2 - fold.level**2 / fold.n - flank**2 * places) * fold.seen
    total = float(freedom.sum())
    if total < 1:
        return np.ones_like(model)
    mean = float(squares.sum()) / total
    light = model - float((freedom * model).sum()) / total
    spread = float((freedom * light**2).sum())
    rise = float((light * squares).sum()) / spread if spread > 0 else 0.0
    return np.maximum(mean + rise * light, max(QUANTISATION_VAR / depth, 0.1 * mean))


def _explained(fold: Fold, model: F64, weight: F64) -> float:
    """Share of the folded profile's variance that the model explains, both without the noise."""
    seen = weight > 0
    n = fold.n * seen
    mean_level = fold.level / fold.n
    around = mean_level - float((n * mean_level).sum()) / float(n.sum())
    noise = float((1 / weight[seen]).sum())
    left = float((n * (mean_level - model) ** 2).sum()) - noise
    there = float((n * around**2).sum()) - noise
    return 1 - max(left, 0.0) / there if there > 0 else 0.0
