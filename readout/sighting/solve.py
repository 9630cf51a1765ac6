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
from dataclasses import dataclass

import numpy as np

from readout.model import F64
from readout.sighting.fold import Fold
from readout.sighting.normal import TINY, damped_inverse, normal_equations
from readout.sighting.scatter import slice_variance
from readout.sighting.shape import FOURTH, Shape
from readout.sighting.trial import State, model_of, started

MOST_STEPS = 20
MOST_REFUSED = 4
"""so many steps in a row, each smaller, that make the fit no better: it is as good as it gets"""
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
ROUNDING = 1e-9


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
        near: State | None = State(shape, shift, turn, model_of(fold, cosine, shape, shift))
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
    fold: Fold, cosine: float, state: State, weight: F64, near: float, damping: float
) -> tuple[State, F64, F64] | None:
    """The state near the least squares, the last step towards it and the inverse it was made with.

    It is the one after a step of less than ``near`` px, or before one that changes nothing much.

    Levenberg 1944, Marquardt 1963: a step that makes the fit worse is taken back and damped.
    """
    cost, refused = state.cost(fold, weight), 0
    normal, right = normal_equations(fold, state, weight)
    for _ in range(MOST_STEPS):
        inverse = damped_inverse(normal, damping)
        if inverse is None:
            return None
        change = inverse @ right
        if state.shape.cannot_follow(change):
            inverse = damped_inverse(normal, damping, held=FOURTH)
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
            state, cost, damping, refused = trial, trial_cost, damping / 100, 0
            normal, right = normal_equations(fold, state, weight)
        else:
            damping, refused = max(damping * 30, DAMPING), refused + 1
            if refused == MOST_REFUSED:
                break
    inverse = damped_inverse(normal, TINY)
    return None if inverse is None else (state, np.zeros_like(right), inverse)


def _largest(state: State, change: F64) -> float:
    """How far a step moves line and profile, px."""
    return max(abs(float(change[-2])), state.shape.changed(change[:-2]).distance_px(state.shape))


def _moved(fold: Fold, cosine: float, state: State, change: F64) -> State:
    """The state after a step."""
    shape = state.shape.changed(change[:-2])
    shift = state.shape.shifted(state.shift, float(change[-2]))
    turn = state.turn + float(change[-1])
    return State(shape, shift, turn, model_of(fold, cosine, shape, shift))


def _weighted(
    fold: Fold, cosine: float, near: State, depth: int
) -> tuple[State, F64, F64, F64] | None:
    """The weighted least squares: state, last step, inverse and weights, found anew while far."""
    for rounds_left in range(MOST_WEIGHTED, 0, -1):
        weight = fold.seen / slice_variance(fold, near, depth)
        settled = _descended(fold, cosine, near, weight, 0.0, TINY)
        if settled is None:
            return None
        state, change, inverse = settled
        again = fold.contrasted and rounds_left == MOST_WEIGHTED
        if rounds_left == 1 or not (again or _far(fold, near, state, weight)):
            return state, change, inverse, weight
        near = state
    return None


def _far(fold: Fold, one: State, other: State, weight: F64) -> bool:
    """True if two states differ by more than the variances bear, in place or in turn."""
    turned = (one.turn - other.turn) ** 2 * float(fold.of.c2a2.sum() / fold.n.sum())
    seen = turned * float((weight * other.model.flank**2).max())
    return abs(one.shift - other.shift) > FAR_PX or seen > FAR_TURNED


def _approached(fold: Fold, cosine: float, shape: Shape) -> State | None:
    """Near the unweighted least squares, from a rough shape."""
    state = started(fold, cosine, shape)
    near = None if state is None else _descended(fold, cosine, state, fold.seen, NEAR, DAMPING)
    return None if near is None else near[0]


def _explained(fold: Fold, left: F64, weight: F64) -> float:
    """Share of the folded profile's variance that the model explains, both without the noise."""
    n = fold.n * fold.seen
    mean_level = fold.level / fold.n
    around = mean_level - np.vdot(n, mean_level) / n.sum()
    noise = float((fold.seen / np.maximum(weight, 1e-300)).sum())
    unexplained = float(np.vdot(fold.seen / fold.n, left**2)) - noise
    there = float(np.vdot(n, around**2)) - noise
    return 1 - max(unexplained, 0.0) / there if there > 0 else 0.0
