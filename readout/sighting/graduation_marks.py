"""Short marks of one shape, each fitted to a small part of a pixel whatever lies along it.

About a mark, u is the distance across it and v the one along it. Everything that goes along the
mark or along the scale separates: the line the marks stand on, the soft ends of a mark, a longer or
a shorter one, a mark that stands to one side only. A pixel is expected at

    B(v) + g u + A(v) F(u - d - t v),

with B and A cubic splines in v, free for each mark, F the profile of a blurred bar, d the mark's
place and t its turn. B, g and A are linear and are eliminated from each step (variable projection,
G. H. Golub and V. Pereyra, SIAM J. Numer. Anal. 10 (1973) 413, in L. Kaufman's form, BIT 15 (1975)
49); the turn and the shape of F are common to all marks. Pixels count by 1 / variance, the variance
read from what is left over as a straight line in the light (photon transfer, EMVA 1288).
"""

from __future__ import annotations

import math
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from readout.model import F64, QUANTISATION_VAR, Pixels
from readout.sighting.profile import line_profile
from readout.sighting.shape import Shape

MOST_STEPS = 25
STAGES = 3
"""fits: without weights, with them, and with those of the better fit"""
CLEANINGS = 3
RESTS_PX = 2e-4
RIDGE = 1e-9
DAMPING = 0.01
CALM = 1e-3
LARGEST_TURN = 0.03
LARGEST_STEP_PX = 1.0
SPARE_PIXELS = 12
"""pixels more than unknowns that a mark must have"""
STANDS_OUT = 6.0
"""a mark left over by so many sd more than the others has something else upon it"""
LEAST_EXCESS = 1.5
LARGEST_SD_PX = 0.35
LEAST_MARKS = 3
SEEN = 0.05
"""a spline that fewer points see, by their sum, is none"""

Bools = NDArray[np.bool_]


@dataclass(frozen=True, slots=True)
class RoughMarks:
    """Where n marks of one direction are sought.

    ``x_px, y_px`` (n,): a point of each; ``across_rad``: the direction across them, from +x towards
    +y; ``from_px, to_px`` (n,): how far each reaches from its point along the direction a quarter
    turn on; ``half_px``: how far to look either side; ``shape``: of which
    width and blur are near.
    """

    x_px: F64
    y_px: F64
    across_rad: float
    from_px: F64
    to_px: F64
    half_px: float
    shape: Shape


@dataclass(frozen=True, slots=True)
class FittedMarks:
    """What the fit gives of the n marks sought.

    ``shift_px`` (n,): how far across each lies from the rough point, NaN where none could be
    fitted; ``cov_px2`` (n, n). ``turn_rad``: of all of them from the rough direction, and its sd.
    ``contrast`` (n,): levels, along the whole of what was looked at, its sign the polarity.
    """

    shift_px: F64
    cov_px2: F64
    turn_rad: float
    turn_sd_rad: float
    shape: Shape
    contrast: F64

    @property
    def fitted(self) -> Bools:
        return np.asarray(np.isfinite(self.shift_px))


@dataclass(frozen=True, slots=True)
class _Patch:
    """The pixels about one mark: places, levels, splines in v (n, m)."""

    u: F64
    v: F64
    levels: F64
    basis: F64

    @property
    def freedom(self) -> int:
        return len(self.levels) - 2 * self.basis.shape[1] - 2


@dataclass(frozen=True, slots=True)
class _State:
    """Where the search for the best parameters stands."""

    shift: F64
    turn: float
    shape: Shape

    def moved(self, change: F64, common: F64) -> _State:
        """After steps of the shifts (n,) and of turn, spread and flatness (3,)."""
        turn, spread, fourth = common.tolist()
        return _State(
            self.shift + np.clip(change, -LARGEST_STEP_PX, LARGEST_STEP_PX),
            self.turn + min(max(turn, -LARGEST_TURN), LARGEST_TURN),
            self.shape.changed(np.array([0.0, 0.0, 0.0, spread, fourth])),
        )


@dataclass(frozen=True, slots=True)
class _Fit:
    """What the model says at a state.

    ``normal`` (n, 4, 4) and ``right`` (n, 4) for (shift, turn, spread, flatness) of each mark, all
    that is linear eliminated; ``expected``, ``height``: levels and A(v) of each patch.
    ``chi_square`` (n,).
    """

    normal: F64
    right: F64
    expected: list[F64]
    height: list[F64]
    chi_square: F64

    @property
    def cost(self) -> float:
        return float(self.chi_square.sum())

    def step(self, damping: float) -> tuple[F64, F64, F64] | None:
        """Steps of the shifts and of what is common, and the covariance of the latter."""
        normal = self.normal * (1 + damping * np.eye(4))
        own, both = normal[:, 0, 0], normal[:, 0, 1:]
        coupling = both / own[:, None]
        reduced = normal[:, 1:, 1:].sum(axis=0) - coupling.T @ both
        reduced.flat[::4] *= 1 + RIDGE
        try:
            cov = np.linalg.inv(reduced)
        except np.linalg.LinAlgError:
            return None
        change = cov @ (self.right[:, 1:].sum(axis=0) - coupling.T @ self.right[:, 0])
        return self.right[:, 0] / own - coupling @ change, change, cov


def fit_marks(
    pixels: Pixels, rough: RoughMarks, *, usable: Bools, full_scale: float = math.inf
) -> FittedMarks | None:
    """Fit all marks together; None where fewer than three hold. Never raises on a bad picture.

    ``usable`` (height, width): False where something else lies. Pixels at ``full_scale`` say
    nothing. A mark that fits much worse than the others, or not at all, is NaN.
    """
    found = _patches(pixels, rough, usable & (pixels < full_scale))
    width_px = max(abs(math.cos(rough.across_rad)), abs(math.sin(rough.across_rad)))
    state = _State(np.zeros(len(found)), 0.0, rough.shape)
    for cleanings_left in range(CLEANINGS, -1, -1):
        if len(found) < LEAST_MARKS:
            return None
        settled = _settled(list(found.values()), state, width_px)
        if settled is None:
            return None
        state, fit = settled
        good = ~_standing_out(list(found.values()), fit)
        if good.all() or not cleanings_left:
            return _result(np.array(list(found)), state, fit, len(rough.x_px))
        found = {k: patch for (k, patch), keep in zip(found.items(), good, strict=True) if keep}
        state = replace(state, shift=state.shift[good])
    return None


def _settled(patches: list[_Patch], state: _State, width_px: float) -> tuple[_State, _Fit] | None:
    """The best fit without weights, then with those that it gives."""
    weights = [np.ones(len(patch.levels)) for patch in patches]
    for stage in range(STAGES):
        descended = _descended(patches, weights, state, width_px)
        if descended is None:
            return None
        state, fit = descended
        if stage + 1 < STAGES:
            weights = _weights(patches, fit)
    return state, fit


def _descended(
    patches: list[_Patch], weights: list[F64], state: _State, width_px: float
) -> tuple[_State, _Fit] | None:
    """Levenberg 1944, Marquardt 1963: a step that makes the fit worse is taken back and damped."""
    fit, damping = _evaluated(patches, weights, state, width_px), DAMPING
    if fit is None:
        return None
    for _ in range(MOST_STEPS):
        step = fit.step(damping)
        if step is None:
            return None
        trial, largest = state.moved(step[0], step[1]), float(np.abs(step[0]).max())
        there = _evaluated(patches, weights, trial, width_px)
        if there is None or there.cost > fit.cost * (1 + RIDGE):
            if largest < RESTS_PX:
                break
            damping = max(damping * 10, DAMPING)
            continue
        state, fit, damping = trial, there, damping / 100
        if largest < RESTS_PX and damping < CALM:
            break
    return state, fit


def _patches(pixels: Pixels, rough: RoughMarks, usable: Bools) -> dict[int, _Patch]:
    """The usable pixels about each mark, of those that have enough of them."""
    found = {}
    cos, sin = math.cos(rough.across_rad), math.sin(rough.across_rad)
    step = max(1.0, 0.8 * rough.shape.blur)
    for k, (x, y, first, last) in enumerate(
        zip(rough.x_px, rough.y_px, rough.from_px, rough.to_px, strict=True)
    ):
        out = rough.half_px * np.array([-1, -1, 1, 1])
        along = np.array([first, last, first, last])
        columns = _within(x + out * cos - along * sin, pixels.shape[1])
        rows = _within(y + out * sin + along * cos, pixels.shape[0])
        d_x, d_y = np.arange(columns.start, columns.stop) - x, np.arange(rows.start, rows.stop) - y
        u = d_x * cos + d_y[:, None] * sin
        v = d_y[:, None] * cos - d_x * sin
        inside = (np.abs(u) <= rough.half_px) & (v >= first) & (v <= last) & usable[rows, columns]
        if not inside.any():
            continue
        basis = _splines(v[inside], first, last, step)
        levels = pixels[rows, columns][inside].astype(np.float64)
        patch = _Patch(u[inside], v[inside], levels, basis)
        if patch.freedom >= SPARE_PIXELS:
            found[k] = patch
    return found


def _within(corners: F64, size: int) -> slice:
    """Whole pixels from the least to the largest, inside the picture."""
    first = min(max(0, math.floor(corners.min())), size)
    return slice(first, max(first, min(size, math.ceil(corners.max()) + 1)))


def _splines(v: F64, first: float, last: float, step: float) -> F64:
    """Uniform cubic B-splines over a stretch, those that the points see."""
    n = math.ceil((last - first) / step) + 3
    off = np.abs((v[:, None] - first) / step - (np.arange(n) - 1.0))
    near = 2 / 3 - off**2 + off**3 / 2
    basis = np.where(off < 1, near, np.maximum(2 - off, 0.0) ** 3 / 6)
    return np.asarray(basis[:, basis.sum(axis=0) > SEEN])


def _evaluated(
    patches: list[_Patch], weights: list[F64], state: _State, width_px: float
) -> _Fit | None:
    """The model at a state; None where it says nothing."""
    of_marks = [
        _reduced(patch, weight, shift, state, width_px)
        for patch, weight, shift in zip(patches, weights, state.shift.tolist(), strict=True)
    ]
    normal = np.array([one[0] for one in of_marks])
    if not (np.all(np.isfinite(normal)) and normal[:, 0, 0].min() > 0):
        return None
    return _Fit(
        normal,
        np.array([one[1] for one in of_marks]),
        [one[2] for one in of_marks],
        [one[3] for one in of_marks],
        np.array([one[4] for one in of_marks]),
    )


def _reduced(
    patch: _Patch, weight: F64, shift: float, state: _State, width_px: float
) -> tuple[F64, F64, F64, F64, float]:
    """Normal equations of (shift, turn, spread, flatness) with the linear unknowns eliminated."""
    half_width, blur = state.shape.half_width, state.shape.blur
    at = patch.u - shift - state.turn * patch.v
    profile = line_profile(at, half_width, blur, width_px)
    basis = patch.basis
    design = np.concatenate([basis, patch.u[:, None], basis * profile.value[:, None]], axis=1)
    weighted = design * weight[:, None]
    inner = weighted.T @ design
    inner.flat[:: len(inner) + 1] += RIDGE * inner.diagonal().max()
    linear = np.linalg.solve(inner, weighted.T @ patch.levels)
    expected = design @ linear
    left = patch.levels - expected
    height = basis @ linear[basis.shape[1] + 1 :]
    by_spread = profile.by_blur / (2 * blur)
    by_fourth = profile.by_half_width - profile.by_blur * (half_width / (3 * blur))
    by_fourth = by_fourth / (4 * half_width**3)
    slope = -height * profile.by_u
    columns = np.stack([slope, slope * patch.v, height * by_spread, height * by_fourth], axis=1)
    free = columns - design @ np.linalg.solve(inner, weighted.T @ columns)
    of_free = free.T * weight
    return of_free @ free, of_free @ left, expected, height, float(weight @ left**2)


def _weights(patches: list[_Patch], fit: _Fit) -> list[F64]:
    """1 / variance of each pixel, a straight line in its light, from what all leave over."""
    levels = np.concatenate(fit.expected)
    squares = np.concatenate(
        [
            (patch.levels - expected) ** 2 * (len(expected) / patch.freedom)
            for patch, expected in zip(patches, fit.expected, strict=True)
        ]
    )
    mean, middle = float(squares.mean()), float(levels.mean())
    centred = levels - middle
    spread = float(centred @ centred)
    rise = float(centred @ squares) / spread if spread > 0 else 0.0
    least = max(QUANTISATION_VAR, 0.1 * mean)
    return [1 / np.maximum(mean + rise * (expected - middle), least) for expected in fit.expected]


def _standing_out(patches: list[_Patch], fit: _Fit) -> Bools:
    """Marks that fit much worse than the others, or whose place says nothing."""
    freedom = np.array([patch.freedom for patch in patches])
    reduced = fit.chi_square / freedom
    usual = max(1.0, float(np.median(reduced)))
    bad = reduced > usual * np.maximum(1 + STANDS_OUT * np.sqrt(2 / freedom), LEAST_EXCESS)
    return np.asarray(bad | (fit.normal[:, 0, 0] < 1 / LARGEST_SD_PX**2))


def _result(which: NDArray[np.intp], state: _State, fit: _Fit, n: int) -> FittedMarks | None:
    step = fit.step(0.0)
    if step is None:
        return None
    shift, contrast = np.full(n, np.nan), np.full(n, np.nan)
    shift[which] = state.shift
    contrast[which] = [float(height.mean()) for height in fit.height]
    own = fit.normal[:, 0, 0]
    coupling = fit.normal[:, 0, 1:] / own[:, None]
    cov = np.full((n, n), np.nan)
    cov[np.ix_(which, which)] = np.diag(1 / own) + coupling @ step[2] @ coupling.T
    return FittedMarks(
        shift, cov, state.turn, math.sqrt(max(step[2][0, 0], 0.0)), state.shape, contrast
    )
