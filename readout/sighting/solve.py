"""Least squares on a folded strip: shift and turn of the line, with every nuisance free.

Level of a pixel at distance u across and a along the arm, in a slice of relative contrast c:

    b + g u + c C P(u - k (dx + dt a)),   P(u) = F(u) + r F(u - d),

background b and its slope g, contrast C, half width and blur inside F, k the width of a pixel
across the arm, and the two wanted ones, shift dx and change of slope dt of the line the strip was
cut along. A fainter line beside the arm, if one was found, has the relative height r at distance d.
The variance of a pixel is read from the scatter of slices that see the same phase, as a straight
line in the light (photon noise grows with it: the photon transfer method, EMVA 1288); it gives
weights and covariance: no noise is assumed.
"""

from __future__ import annotations

import math
from dataclasses import dataclass, replace

import numpy as np

from readout.model import F64, QUANTISATION_VAR
from readout.sighting.fold import Fold
from readout.sighting.profile import line_profile
from readout.sighting.shape import Shape

MOST_STEPS = 20
NEAR = 0.5
"""pixels by which width, blur and line may still change before weights come in"""
SETTLED = 0.02
"""the same before the last step: the next one's change goes with its square"""
DAMPING = 0.01
"""of shape and place in the first step: a rough start is far off"""
CALM = 1e-6
"""a step this little damped tells how far there is to go"""
TINY = 1e-9
ROUNDING = 1e-9
LEAST_COLUMN = 1e-50
"""a column of the Jacobian this small against the largest says nothing"""


@dataclass(frozen=True, slots=True)
class Solution:
    """What one solution of a fold gives.

    ``shift`` (px, along x) and ``turn`` (slope) improve the line the strip was cut along;
    ``cov`` (2, 2) is their covariance. ``explained``: share of the folded profile's variance, less
    that of its noise, that the model explains. ``misfit``: reduced chi-square of the folded
    profile, ``freedom`` its degrees of freedom. ``lean``: shift, px along x, for a contrast that
    rises by its own size per pixel across the arm. ``ground``, ``line``, ``flank``, ``weight``
    (phases, columns): b + g u, C P, its derivative by shift in levels per pixel, and 1 / variance
    of a slice's pixel. ``left``: what is left of the sums of levels.
    """

    shape: Shape
    shift: float
    turn: float
    cov: F64
    explained: float
    misfit: float
    freedom: int
    lean: float
    ground: F64
    line: F64
    flank: F64
    weight: F64
    left: F64

    @property
    def slice_sd(self) -> float:
        """Typical noise of a slice's pixel, levels."""
        return 1 / math.sqrt(max(float(np.median(self.weight)), 1e-300))


@dataclass(frozen=True, slots=True)
class _Model:
    """The model at one step: what is expected, and its derivatives, (phases, columns) each.

    ``ground``: b + g u. ``line``: C P. ``columns`` (n, phases, columns): by the parameters of
    ``Shape.changed``, of which the first two are the ground's. ``flank``: by shift.
    """

    ground: F64
    line: F64
    flank: F64
    columns: F64


@dataclass(frozen=True, slots=True)
class _State:
    """Where the search for the best parameters stands, and what the model says there."""

    shape: Shape
    shift: float
    turn: float
    model: _Model

    def left(self, fold: Fold) -> F64:
        """What is left of the sums of levels, (phases, columns)."""
        model = self.model
        off = self.turn * fold.ca + fold.cp
        return fold.level - fold.n * model.ground - fold.c * model.line - off * model.flank

    def cost(self, fold: Fold, weight: F64) -> float:
        """Weighted sum of squares of what is left of the folded profile."""
        return float(np.vdot(weight / fold.n, self.left(fold) ** 2))


def solve_fold(fold: Fold, cosine: float, shape: Shape, depth: int = 1) -> Solution | None:
    """Least squares for one fold: unweighted until near, then with the variance found there.

    ``shape`` is a rough start, of which only the sign of the contrast, width and blur matter;
    ``depth`` rows were averaged to each slice. Returns None where the pixels say nothing.
    """
    state = _started(fold, cosine, shape)
    near = None if state is None else _descended(fold, cosine, state, fold.seen, NEAR, DAMPING)
    if near is None:
        return None
    weight = fold.seen / _slice_variance(fold, near[0], depth)
    settled = _descended(fold, cosine, near[0], weight, 0.0, TINY)
    inverse = None if settled is None else _inverse(settled[2], TINY)
    if settled is None or inverse is None:
        return None
    state, change, _ = settled
    shape, model, count = state.shape.changed(change[:-2]), state.model, len(state.model.columns)
    ground = shape.background + shape.gradient * fold.u
    line = model.line + np.tensordot(change[2:count], model.columns[2:], 1)
    line += float(change[-2]) * model.flank
    turn = state.turn + float(change[-1])
    off = turn * fold.ca + fold.cp
    left = fold.level - fold.n * ground - fold.c * line - off * model.flank
    leaning = (weight * fold.u * line).ravel()
    lean = inverse[-2, :2] @ (model.columns[:2].reshape(2, -1) @ (leaning * _flat(fold.c, line)))
    by_line = np.concatenate([model.columns[2:], model.flank[None]]).reshape(count - 1, -1)
    lean += inverse[-2, 2:-1] @ (by_line @ (leaning * _flat(fold.c2, line)))
    freedom = max(int(fold.seen.sum()) - count - 2, 1)
    return Solution(
        shape,
        state.shift + float(change[-2]),
        turn,
        inverse[-2:, -2:],
        _explained(fold, left, weight),
        float((weight * left**2 / fold.n).sum()) / freedom,
        freedom,
        float(lean),
        ground,
        line,
        model.flank,
        weight,
        left,
    )


def _flat(per_phase: F64, like: F64) -> F64:
    return np.broadcast_to(per_phase, like.shape).ravel()


def _descended(
    fold: Fold, cosine: float, state: _State, weight: F64, near: float, damping: float
) -> tuple[_State, F64, F64] | None:
    """The state near the least squares, the last step towards it and its normal equations.

    It is the one after a step of less than ``near`` px, or before one that changes nothing much.

    Levenberg 1944, Marquardt 1963: a step that makes the fit worse is taken back and damped.
    """
    cost = state.cost(fold, weight)
    normal, right = _normal_equations(fold, state, weight)
    change = right
    for _ in range(MOST_STEPS):
        inverse = _inverse(normal, damping)
        if inverse is None:
            return None
        change = inverse @ right
        if _largest(state, change) < SETTLED and damping < CALM:
            break
        if _largest(state, change) < near:
            return _moved(fold, cosine, state, change), change, normal
        trial = _moved(fold, cosine, state, change)
        trial_cost = trial.cost(fold, weight)
        if trial_cost <= cost * (1 + ROUNDING):
            state, cost, damping = trial, trial_cost, damping / 100
            normal, right = _normal_equations(fold, state, weight)
        else:
            damping = max(damping * 30, DAMPING)
    return state, change, normal


def _largest(state: _State, change: F64) -> float:
    """How far a step moves line and profile, px."""
    return max(abs(float(change[-2])), state.shape.change_px(change[:-2]))


def _moved(fold: Fold, cosine: float, state: _State, change: F64) -> _State:
    """The state after a step."""
    shape = state.shape.changed(change[:-2])
    shift = state.shape.shifted(state.shift, float(change[-2]))
    turn = state.turn + float(change[-1])
    return _State(shape, shift, turn, _model(fold, cosine, shape, shift))


def _started(fold: Fold, cosine: float, shape: Shape) -> _State | None:
    """The background, gradient and contrast that fit best for a width, blur and place.

    They are linear: separable least squares (Golub and Pereyra, SIAM J. Numer. Anal. 10 (1973)
    413), without weights.
    """
    shape = replace(shape, contrast=1.0).changed(np.zeros(7))
    value = _model(fold, cosine, shape, 0.0).line
    columns = np.stack([np.ones_like(value), fold.u, value])
    normal, right = np.empty((3, 3)), np.empty(3)
    flat = columns.reshape(3, -1)
    seen = fold.seen.ravel()
    normal[:2] = (flat[:2] * seen * _flat(fold.n, value)) @ flat.T
    normal[:2, 2] = normal[2, :2] = (flat[:2] * seen * _flat(fold.c, value)) @ flat[2]
    normal[2, 2] = float((flat[2] * seen * _flat(fold.c2, value)) @ flat[2])
    right[:2] = flat[:2] @ (seen * fold.level.ravel())
    right[2] = float(flat[2] @ (seen * fold.level_c.ravel()))
    try:
        linear = np.linalg.solve(normal, right).tolist()
    except np.linalg.LinAlgError:
        return None
    if not all(map(math.isfinite, linear)):
        return None
    levels = dict(zip(("background", "gradient", "contrast"), linear, strict=True))
    shape = replace(shape, **levels)
    return _State(shape, 0.0, 0.0, _model(fold, cosine, shape, 0.0))


def _model(fold: Fold, cosine: float, shape: Shape, shift: float) -> _Model:
    """What the shape makes one expect at a shift."""
    at = fold.u - cosine * shift
    arm = line_profile(at, shape.half_width, shape.blur, cosine)
    value, by_u, by_half_width, by_blur = arm.value, arm.by_u, arm.by_half_width, arm.by_blur
    extra: list[F64] = []
    if shape.beside is not None:
        height = shape.beside.height
        line = line_profile(at - shape.beside.distance, shape.half_width, shape.blur, cosine)
        value, by_u = value + height * line.value, by_u + height * line.by_u
        by_half_width = by_half_width + height * line.by_half_width
        by_blur = by_blur + height * line.by_blur
        extra = [shape.contrast * line.value, (-shape.contrast * height) * line.by_u]
    contrast = shape.contrast
    by_spread = by_blur * (contrast / (2 * shape.blur))
    by_fourth = by_half_width - by_blur * (shape.half_width / (3 * shape.blur))
    by_fourth = (by_fourth - value / shape.half_width) * (contrast / (4 * shape.half_width**3))
    columns = [np.ones_like(at), fold.u, value / (2 * shape.half_width), by_spread, by_fourth]
    return _Model(
        shape.background + shape.gradient * fold.u,
        contrast * value,
        (-contrast * cosine) * by_u,
        np.stack(columns + extra),
    )


def _inverse(normal: F64, damping: float) -> F64 | None:
    """Inverse of normal equations with columns of very different size; None if there is none."""
    scale = np.sqrt(normal.diagonal())
    if not scale.min() > LEAST_COLUMN * scale.max():
        return None
    scales = scale[:, None] * scale
    scaled = normal / scales
    scaled.flat[:: len(scale) + 1] += TINY
    scaled.flat[3 * (len(scale) + 1) : -1 : len(scale) + 1] += damping
    try:
        inverse = np.linalg.inv(scaled) / scales
    except np.linalg.LinAlgError:
        return None
    return inverse if math.isfinite(float(inverse.sum())) else None


def _normal_equations(fold: Fold, state: _State, weight: F64) -> tuple[F64, F64]:
    """J^T W J (n + 2, n + 2) and J^T W r (n + 2,), rebuilt from the sums; shift and turn last.

    Within a phase the line runs by p off the mean phase and by turn * a off the cut: both enter to
    first order, through the flank, as the shift.
    """
    model = state.model
    count, flank, line = len(model.columns), model.flank, model.line
    by_ground, by_line = model.columns[:2], np.concatenate([model.columns[2:], flank[None]])
    flat_ground, flat_line = by_ground.reshape(2, -1), by_line.reshape(count - 1, -1)
    weighted_ground, weighted_line = by_ground * weight, by_line * weight
    weighted_flank = weighted_line[-1]
    normal, right = np.empty((count + 2, count + 2)), np.empty(count + 2)
    normal[:2, :2] = (weighted_ground * fold.n).reshape(2, -1) @ flat_ground.T
    normal[:2, 2:-1] = (weighted_ground * fold.c).reshape(2, -1) @ flat_line.T
    normal[2:-1, :2] = normal[:2, 2:-1].T
    normal[2:-1, 2:-1] = (weighted_line * fold.c2).reshape(count - 1, -1) @ flat_line.T
    normal[:2, -1] = normal[-1, :2] = flat_ground @ (weighted_flank * fold.ca).ravel()
    normal[2:-1, -1] = normal[-1, 2:-1] = flat_line @ (weighted_flank * fold.c2a).ravel()
    normal[-1, -1] = (weighted_flank * flank).sum(axis=1) @ fold.c2a2[:, 0]
    right[:2] = weighted_ground.reshape(2, -1) @ state.left(fold).ravel()
    left_c = fold.level_c - fold.c * model.ground - fold.c2 * line
    left_c -= (state.turn * fold.c2a + fold.c2p) * flank
    right[2:-1] = weighted_line.reshape(count - 1, -1) @ left_c.ravel()
    left_ca = fold.level_ca - fold.ca * model.ground - fold.c2a * line
    left_ca -= (state.turn * fold.c2a2 + fold.c2pa) * flank
    right[-1] = np.vdot(weighted_flank, left_ca)
    return normal, right


def _slice_variance(fold: Fold, state: _State, depth: int) -> F64:
    """Variance of a slice's pixel as a straight line in its level, (phases, columns).

    From the scatter of slices of one phase about their mean: what the model does not describe
    moves them all alike and does not count. The known spread of their places is taken out.
    """
    model = state.model
    freedom = fold.freedom * fold.seen
    places = fold.c2p2 + state.turn**2 * (fold.c2a2 - fold.ca**2 / fold.n)
    about_model = (
        fold.level2
        - 2 * (model.ground * fold.level + model.line * fold.level_c)
        + model.ground * (fold.n * model.ground + 2 * fold.c * model.line)
        + fold.c2 * model.line**2
    )
    about_mean = about_model - state.left(fold) ** 2 / fold.n - model.flank**2 * places
    squares = about_mean * fold.seen
    total = float(freedom.sum())
    if total < 1:
        return np.ones_like(model.line)
    level = model.ground + model.line
    mean = float(squares.sum()) / total
    light = level - float((freedom * level).sum()) / total
    spread = float((freedom * light**2).sum())
    rise = float((light * squares).sum()) / spread if spread > 0 else 0.0
    return np.maximum(mean + rise * light, max(QUANTISATION_VAR / depth, 0.1 * mean))


def _explained(fold: Fold, left: F64, weight: F64) -> float:
    """Share of the folded profile's variance that the model explains, both without the noise."""
    seen = weight > 0
    n = fold.n * seen
    mean_level = fold.level / fold.n
    around = mean_level - float((n * mean_level).sum()) / float(n.sum())
    noise = float((1 / weight[seen]).sum())
    unexplained = float((seen * left**2 / fold.n).sum()) - noise
    there = float((n * around**2).sum()) - noise
    return 1 - max(unexplained, 0.0) / there if there > 0 else 0.0
