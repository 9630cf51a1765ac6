"""What the residuals of a spot tell: the noise of the pixels, and whether it explains them.

The variance of a pixel is a straight line in its light (photon transfer, EMVA 1288), fitted to the
squares of the residuals, each divided by what the fit leaves of it (D. V. Hinkley, Technometrics
19 (1977) 285). Residuals beyond three sd count as three.
"""

from __future__ import annotations

import math

import numpy as np

from readout.model import F64
from readout.sighting.spot_model import Columns, Mask, SpotShape, State

CUT_SD = 3.0
CUT_VARIANCE = 0.995
"""variance of a standard normal deviate cut at +-3"""
BRIGHT = 0.2
"""share of the height from which a pixel counts as one of the spot's own"""
MANY = 24
NINE_TENTHS_VARIANCE = 0.623
"""mean square of the nine tenths of normal deviates that are smallest"""
MEDIAN_TO_VARIANCE = 2.198
"""variance of a normal deviate by the median of its square"""
SHAPE_PARAMETERS = 7
LEAST_FREEDOM = 3.0
MARGIN_SDS = 1.0
"""scatter of the patches beyond this many sd of chance widens the covariance"""


def _middle(values: F64) -> float:
    """The median, of an even number the upper of the middle two."""
    return float(np.partition(values, values.size // 2)[values.size // 2])


def rough_variance(state: State, least: float) -> F64:
    """Variance of each pixel from the middle residual everywhere and of the spot's own pixels.

    The fit follows its few bright pixels, the more closely the fewer they are: rather too much
    noise is expected of them than that they are taken for foreign.
    """
    squares = state.residual**2
    everywhere = max(MEDIAN_TO_VARIANCE * _middle(squares), least)
    bright = state.light > BRIGHT * state.light.max()
    own = squares[bright]
    if own.size == 0:
        return np.full(squares.size, everywhere)
    above = float(np.mean(own))
    if own.size > MANY:  # without the worst tenth: hot pixels, but not a spot of another shape
        above = float(np.mean(np.sort(own)[: math.ceil(0.9 * own.size)])) / NINE_TENTHS_VARIANCE
    above *= own.size / max(own.size - SHAPE_PARAMETERS, 2)
    rise = max(0.0, above - everywhere) / float(np.mean(state.light[bright]))
    return np.asarray(everywhere + rise * np.maximum(state.light, 0.0))


def variance_line(
    state: State, rows: F64, cofactor: F64, below: Mask, variance: F64, least: float
) -> tuple[F64, float]:
    """Variance of each pixel as a straight line in the light, from the residuals.

    And the degrees of freedom with which it is known where the spot is steepest. ``rows`` are the
    derivatives over the sd of the last step and ``cofactor`` its inverse normal matrix, ``below``
    the pixels below saturation, ``variance`` the last one.
    """
    leverage = np.einsum("pi,pi->i", cofactor @ rows, rows)
    free = np.maximum(1 - leverage, 0.1)
    squares = np.minimum(state.residual**2, CUT_SD**2 * variance) / (CUT_VARIANCE * free)
    weight = below * free / variance**2
    total = float(weight.sum())
    mean = float(weight @ squares) / total
    offset = state.light - float(weight @ state.light) / total
    spread = max(float(weight @ offset**2), 1e-300)
    rise = float(weight @ (offset * squares)) / spread
    line = np.maximum(mean + rise * offset, max(least, 0.1 * mean))
    flank = rows[4] ** 2 + rows[5] ** 2
    flank /= max(float(flank.sum()), 1e-300)
    freedom = float(flank @ line) ** 2 / (1 / total + float(flank @ offset) ** 2 / spread)
    return line, freedom


def known_from_few(freedom: float) -> float:
    """Factor on a variance known with so many degrees of freedom, with which one standard
    deviation holds 68 % of Student's t (a fit to its table, good to 1 % from 4 on).
    """
    freedom = max(freedom, LEAST_FREEDOM)
    return freedom / (freedom - 1)


def excess_variance(
    columns: Columns, left: F64, rows: F64, cofactor: F64, inside: Mask, variance: F64
) -> float:
    """By how much sums over patches scatter more than independent pixels do, at least 1.

    The Birge ratio (R. T. Birge, Phys. Rev. 40 (1932) 207), of all patches alike (noise that goes
    from pixel to pixel) and of those where the spot is steep (a spot of another shape, dust), the
    larger one. ``left``: residuals after the last step.
    """
    patches = int(columns.patch.max()) + 1

    def sums(values: F64) -> F64:
        return np.asarray(np.bincount(columns.patch, values, patches), dtype=np.float64)

    rows_of_patches = np.stack([sums(row) for row in rows])
    taken = np.einsum("pb,pb->b", cofactor @ rows_of_patches, rows_of_patches)
    pixels = sums(inside.astype(np.float64))
    expected = pixels - taken
    good = expected > 0.3 * np.maximum(pixels, 1.0)
    pull = sums(np.clip(left / np.sqrt(variance), -CUT_SD, CUT_SD) * inside)
    ratio = pull[good] ** 2 / expected[good]
    steep = sums(rows[4] ** 2 + rows[5] ** 2)[good]
    excess = 1.0
    for share in (np.ones_like(steep), steep):
        total = float(share.sum())
        if total > 0:
            chance = math.sqrt(2 * float(share @ share)) / total
            excess = max(excess, float(share @ ratio) / total - MARGIN_SDS * chance)
    return excess


def explained_share(columns: Columns, shape: SpotShape, left: F64, variance: F64) -> float:
    """Share of the structure in the window that the spot explains; noise counts as none.

    A single wild pixel counts as no more than half the height.
    """
    there = np.bincount(columns.patch)
    pixels = np.maximum(there, 1)

    def structure(values: F64) -> float:
        return float((np.bincount(columns.patch, weights=values) ** 2 / pixels)[there > 0].sum())

    limit = abs(shape.height) / 2
    noise = float((np.bincount(columns.patch, weights=variance) / pixels).sum())
    unexplained = structure(np.clip(left, -limit, limit)) - noise
    whole = structure(columns.level - _middle(columns.level)) - noise
    return 1 - unexplained / whole if whole > 0 else -math.inf
