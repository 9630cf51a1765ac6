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
FAR_PX, FAR_TURNED = 0.3, 0.03
"""variances are found anew for a line that moved further, whose turn moves its ends by so much (in
variances of a pixel), or that is not of one contrast: only about the best fit do slices scatter by
their noise alone"""
MOST_WEIGHTED = 4
SETTLED = 0.02
"""the same before the last step: the next one's change goes with its square"""
DAMPING = 0.01
"""of shape and place in the first step: a rough start is far off"""
CALM = 1e-6
"""a step this little damped tells how far there is to go"""
TINY = 1e-9
ROUNDING = 1e-9
BESIDE_SHARE = 0.02
"""where less than this share of the line's height is left, there is only ground"""
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
        middle = float(np.sort(self.weight, axis=None)[self.weight.size // 2])
        return 1 / math.sqrt(max(middle, 1e-300))


@dataclass(frozen=True, slots=True)
class _Model:
    """The model at one step: what is expected, and its derivatives, (phases, columns) each.

    ``ground``: b + g u. ``line``: C P. ``columns`` (n, phases, columns): by the parameters of
    ``Shape.changed``, of which the first two are the ground's, and by shift.
    """

    ground: F64
    line: F64
    columns: F64

    @property
    def flank(self) -> F64:
        """Derivative by shift, levels per pixel."""
        return np.asarray(self.columns[-1])


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
        off = self.turn * fold.of.ca + fold.of.cp
        return fold.level - fold.n * model.ground - fold.of.c * model.line - off * model.flank

    def cost(self, fold: Fold, weight: F64) -> float:
        """Weighted sum of squares of what is left of the folded profile."""
        return float(np.vdot(weight / fold.n, self.left(fold) ** 2))


def solve_fold(
    fold: Fold,
    cosine: float,
    shape: Shape,
    depth: int = 1,
    *,
    known: bool = False,
    shift: float = 0.0,
    turn: float = 0.0,
) -> Solution | None:
    """Least squares for one fold: unweighted until near, then with the variance found there.

    ``shape`` is a rough start, of which only the sign of the contrast, width and blur matter;
    ``known``: all of it is near, and so are ``shift`` and ``turn``. ``depth`` rows were averaged to
    each slice. Returns None where the pixels say nothing.
    """
    if known:
        near: _State | None = _State(shape, shift, turn, _model(fold, cosine, shape, shift))
    else:
        near = _approached(fold, cosine, shape)
    if near is None:
        return None
    settled = _weighted(fold, cosine, near, depth)
    if settled is None:
        return None
    state, change, inverse, weight = settled
    shape, model = state.shape.changed(change[:-2]), state.model
    flat = model.columns.reshape(len(model.columns), -1)
    ground = shape.background + shape.gradient * fold.u
    line = model.line + (change[2:-1] @ flat[2:]).reshape(model.line.shape)
    turn = state.turn + float(change[-1])
    off = turn * fold.of.ca + fold.of.cp
    left = fold.level - fold.n * ground - fold.of.c * line - off * model.flank
    leaning = weight * fold.u * line
    lean = inverse[-2, :2] @ (flat[:2] @ (leaning * fold.of.c).ravel())
    lean += inverse[-2, 2:-1] @ (flat[2:] @ (leaning * fold.of.c2).ravel())
    freedom = max(int(fold.seen.sum()) - len(flat) - 1, 1)
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


def _descended(
    fold: Fold, cosine: float, state: _State, weight: F64, near: float, damping: float
) -> tuple[_State, F64, F64] | None:
    """The state near the least squares, the last step towards it and the inverse it was made with.

    It is the one after a step of less than ``near`` px, or before one that changes nothing much.

    Levenberg 1944, Marquardt 1963: a step that makes the fit worse is taken back and damped.
    """
    cost = state.cost(fold, weight)
    normal, right = _normal_equations(fold, state, weight)
    change = np.zeros_like(right)
    for _ in range(MOST_STEPS):
        inverse = _inverse(normal, damping)
        if inverse is None:
            return None
        change = inverse @ right
        step_px = _largest(state, change)
        if step_px < SETTLED and damping < CALM:
            return state, change, inverse
        if step_px < near:
            return _moved(fold, cosine, state, change), change, inverse
        trial = _moved(fold, cosine, state, change)
        trial_cost = trial.cost(fold, weight)
        if trial_cost <= cost * (1 + ROUNDING):
            state, cost, damping = trial, trial_cost, damping / 100
            normal, right = _normal_equations(fold, state, weight)
        else:
            damping = max(damping * 30, DAMPING)
    inverse = _inverse(normal, TINY)
    return None if inverse is None else (state, change, inverse)


def _largest(state: _State, change: F64) -> float:
    """How far a step moves line and profile, px."""
    return max(abs(float(change[-2])), state.shape.change_px(change[:-2]))


def _moved(fold: Fold, cosine: float, state: _State, change: F64) -> _State:
    """The state after a step."""
    shape = state.shape.changed(change[:-2])
    shift = state.shape.shifted(state.shift, float(change[-2]))
    turn = state.turn + float(change[-1])
    return _State(shape, shift, turn, _model(fold, cosine, shape, shift))


def _weighted(
    fold: Fold, cosine: float, near: _State, depth: int
) -> tuple[_State, F64, F64, F64] | None:
    """The weighted least squares: state, last step, inverse and weights, found anew while far."""
    for rounds_left in range(MOST_WEIGHTED, 0, -1):
        weight = fold.seen / _slice_variance(fold, near, depth)
        settled = _descended(fold, cosine, near, weight, 0.0, TINY)
        if settled is None:
            return None
        state, change, inverse = settled
        again = fold.contrasted and rounds_left == MOST_WEIGHTED
        if rounds_left == 1 or not (again or _far(fold, near, state, weight)):
            return state, change, inverse, weight
        near = state
    return None


def _far(fold: Fold, one: _State, other: _State, weight: F64) -> bool:
    """True if two states differ by more than the variances bear, in place or in turn."""
    turned = (one.turn - other.turn) ** 2 * float(fold.of.c2a2.sum() / fold.n.sum())
    seen = turned * float((weight * other.model.flank**2).max())
    return abs(one.shift - other.shift) > FAR_PX or seen > FAR_TURNED


def _approached(fold: Fold, cosine: float, shape: Shape) -> _State | None:
    """Near the unweighted least squares, from a rough shape."""
    state = _started(fold, cosine, shape)
    near = None if state is None else _descended(fold, cosine, state, fold.seen, NEAR, DAMPING)
    return None if near is None else near[0]


def _started(fold: Fold, cosine: float, shape: Shape) -> _State | None:
    """The background, gradient and contrast that fit best for a width, blur and place.

    They are linear: separable least squares (Golub and Pereyra, SIAM J. Numer. Anal. 10 (1973)
    413), without weights.
    """
    shape = replace(shape, contrast=1.0).changed(np.zeros(7))
    value = _model(fold, cosine, shape, 0.0).line
    columns = np.stack([np.ones_like(value), fold.u, value])
    normal, right = np.empty((3, 3)), np.empty(3)
    flat, seen = columns.reshape(3, -1), fold.seen
    normal[:2] = (columns[:2] * (seen * fold.n)).reshape(2, -1) @ flat.T
    normal[:2, 2] = normal[2, :2] = flat[:2] @ (value * seen * fold.of.c).ravel()
    normal[2, 2] = np.vdot(value, value * seen * fold.of.c2)
    right[:2] = flat[:2] @ (seen * fold.level).ravel()
    right[2] = np.vdot(value, seen * fold.level_c)
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
        np.stack([*columns, *extra, (-contrast * cosine) * by_u]),
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
    model, of = state.model, fold.of
    columns, line, flank = model.columns, model.line, model.flank
    count = len(columns)
    flat, weighted = columns.reshape(count, -1), columns * weight
    flank_weighted = weighted[-1]
    normal, right = np.empty((count + 1, count + 1)), np.empty(count + 1)
    normal[:2, :2] = (weighted[:2] * fold.n).reshape(2, -1) @ flat[:2].T
    normal[:2, 2:-1] = (weighted[:2] * of.c).reshape(2, -1) @ flat[2:].T
    normal[2:-1, :2] = normal[:2, 2:-1].T
    normal[2:-1, 2:-1] = (weighted[2:] * of.c2).reshape(count - 2, -1) @ flat[2:].T
    normal[:2, -1] = normal[-1, :2] = flat[:2] @ (flank_weighted * of.ca).ravel()
    normal[2:-1, -1] = normal[-1, 2:-1] = flat[2:] @ (flank_weighted * of.c2a).ravel()
    normal[-1, -1] = (flank_weighted * flank).sum(axis=1) @ of.c2a2[:, 0]
    left = state.left(fold)
    left_c = left
    if fold.contrasted:
        left_c = fold.level_c - of.c * model.ground - of.c2 * line
        left_c -= (state.turn * of.c2a + of.c2p) * flank
    left_ca = fold.level_ca - of.ca * model.ground - of.c2a * line
    left_ca -= (state.turn * of.c2a2 + of.c2pa) * flank
    right[:2] = weighted[:2].reshape(2, -1) @ left.ravel()
    right[2:-1] = weighted[2:].reshape(count - 2, -1) @ left_c.ravel()
    right[-1] = np.vdot(flank_weighted, left_ca)
    return normal, right


def _slice_variance(fold: Fold, state: _State, depth: int) -> F64:
    """Variance of a slice's pixel as a straight line in its light, (phases, columns).

    From the scatter of slices of one phase about their mean: what the model does not describe
    moves them all alike and does not count. The known spread of their places is taken out. The
    ground gives the variance in the dark, the line by how much light adds to it: both as ratios of
    sums, the best estimate where variances go with the light.
    """
    model = state.model
    freedom = fold.freedom * fold.seen
    of, turn = fold.of, state.turn
    places = of.c2p2 + turn * (2 * of.c2pa + turn * of.c2a2) - (of.cp + turn * of.ca) ** 2 / fold.n
    about_model = (
        fold.level2
        - 2 * (model.ground * fold.level + model.line * fold.level_c)
        + model.ground * (fold.n * model.ground + 2 * fold.of.c * model.line)
        + fold.of.c2 * model.line**2
    )
    sum_left = fold.level - fold.n * model.ground - of.c * model.line
    about_mean = about_model - sum_left**2 / fold.n - model.flank**2 * places
    squares = about_mean * fold.seen
    total = float(freedom.sum())
    if total < 1:
        return np.ones_like(model.line)
    beside = freedom * (np.abs(model.line) < BESIDE_SHARE * np.abs(model.line).max())
    on_line = freedom - beside
    dark = float(np.vdot(squares, beside > 0)) / max(float(beside.sum()), 1.0)
    light = float(np.vdot(on_line, model.line))
    more = float(np.vdot(squares, on_line > 0)) - dark * float(on_line.sum())
    rise = more / light if light else 0.0
    mean = float(squares.sum()) / total
    return np.maximum(dark + rise * model.line, max(QUANTISATION_VAR / depth, 0.1 * mean))


def _explained(fold: Fold, left: F64, weight: F64) -> float:
    """Share of the folded profile's variance that the model explains, both without the noise."""
    n = fold.n * fold.seen
    mean_level = fold.level / fold.n
    around = mean_level - np.vdot(n, mean_level) / n.sum()
    noise = float((fold.seen / np.maximum(weight, 1e-300)).sum())
    unexplained = float(np.vdot(fold.seen / fold.n, left**2)) - noise
    there = float(np.vdot(n, around**2)) - noise
    return 1 - max(unexplained, 0.0) / there if there > 0 else 0.0
