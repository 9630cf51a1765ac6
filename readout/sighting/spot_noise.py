"""What the residuals of a spot tell: the noise of the pixels, and whether it explains them.

The variance of a pixel is a straight line in its light (photon transfer, EMVA 1288), fitted to the
squares of the residuals, each divided by what the fit leaves of it (D. V. Hinkley, Technometrics
19 (1977) 285). Residuals beyond three sd count as three.
"""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np

from readout.model import F64
from readout.sighting.spot_model import STEPS, Columns, Mask, SpotShape, State

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
"""correlation or scatter beyond this many sd of chance widens the covariance"""
CERTAIN_SDS = 2.0
"""but correlation less than so many sd of chance is none"""
LEAST_STEADY = 0.5
"""where less of the variance is noise, rounding hides whether it is correlated"""
LEAST_LEFT = 0.25
"""share of the noise that a fit leaves in the residuals at least"""


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


@dataclass(frozen=True, slots=True)
class Leftover:
    """What the last step leaves: residuals ``z`` in sd (n,), 0 where a pixel is not used.

    ``rows`` (10, n): derivatives over the sd, ``cofactor`` (10, 10): inverse normal matrix,
    ``dark``: pixels of the ground, ``steady`` (n,): share of a pixel's variance that is not
    rounding.
    """

    z: F64
    rows: F64
    cofactor: F64
    dark: Mask
    steady: F64

    @property
    def flank2(self) -> F64:
        """Share of each pixel in the knowledge of the middle."""
        return np.asarray(self.rows[4] ** 2 + self.rows[5] ** 2)


def excess_variance(columns: Columns, shape: SpotShape, left: Leftover) -> float:
    """Factor on the covariance for what independent noise of the pixels does not explain, >= 1.

    Noise that goes from pixel to pixel, or light the model does not know, whichever is more.
    """
    return max(1.0, _for_correlation(columns, shape, left), _for_misfit(columns, left))


def _for_correlation(columns: Columns, shape: SpotShape, left: Leftover) -> float:
    """Factor on the variance of the middle if the noise of neighbours is correlated.

    Their correlation on the ground, where the fit takes little of it, or on the flanks, whichever
    is more; rounding has none. It is summed over pairs up to two pixels apart with the weights of
    a Gaussian spot's flanks. Of correlated noise the fit takes so much more, too, and the variance
    read from the residuals is too small by it.
    """
    used = left.z != 0
    flank = np.sqrt(left.flank2)
    steady = float(flank @ left.steady) / max(float(flank.sum()), 1e-300)
    longer, shorter = shape.spreads_px
    steadies = columns.on_grid(left.steady)
    weights = [columns.on_grid(weight * used) for weight in (flank, left.dark)]
    nearest = _products(columns, left, 1.0)
    most = 0.0
    for weight in weights:
        certain = _correlation(nearest, weight, steadies, margin_sds=CERTAIN_SDS)
        if certain > 0:
            total = 0.0
            for distance2 in (1.0, 2.0, 4.0):
                far = distance2 / (4 * longer * shorter)
                products = nearest if distance2 == 1 else _products(columns, left, distance2)
                found = _correlation(products, weight, steadies, margin_sds=MARGIN_SDS)
                total += 4 * math.exp(-far) * (1 - far) * found
            most = max(most, total)
    if most == 0:
        return 1.0
    factor = 1 + steady * most
    taken = np.einsum("pi,pi->i", left.cofactor @ left.rows, left.rows)
    share = float(left.flank2 @ taken) / max(float(left.flank2.sum()), 1e-300)
    return factor * (1 - share) / max(1 - share * factor, LEAST_LEFT)


Pairs = tuple[tuple[slice, slice], tuple[slice, slice], F64]


def _products(columns: Columns, left: Leftover, distance2: float) -> list[Pairs]:
    """Places of pixels so far apart, and the products of their residuals; what the fit makes of
    independent noise is added back.
    """
    z, rows = columns.on_grid(left.z), columns.on_grid(left.rows)
    solved = columns.on_grid(left.cofactor @ left.rows)
    pairs: list[Pairs] = []
    for down, right in STEPS[distance2]:
        height, width = z.shape
        skipped = max(0, -right)
        one = slice(0, height - down), slice(skipped, width - max(0, right))
        other = slice(down, height), slice(skipped + right, width - skipped)
        by_fit = np.einsum("prc,prc->rc", solved[:, *one], rows[:, *other])
        pairs.append((one, other, z[one] * z[other] + by_fit))
    return pairs


def _correlation(pairs: list[Pairs], weight: F64, steady: F64, *, margin_sds: float = 0.0) -> float:
    """Weighted correlation of the noise of pairs of pixels, rounding taken off; at most 1.

    What chance may make of it is taken off; 0 where rounding hides it.
    """
    total = squares = products = noise = 0.0
    for one, other, product in pairs:
        weights = weight[one] * weight[other]
        total += float(weights.sum())
        squares += float((weights * weights).sum())
        products += float((weights * product).sum())
        noise += float((weights * steady[one]).sum())
    if total <= 0 or noise < LEAST_STEADY * total:
        return 0.0
    return min((products - margin_sds * math.sqrt(squares)) / noise, 1.0)


def _for_misfit(columns: Columns, left: Leftover) -> float:
    """The Birge ratio (R. T. Birge, Phys. Rev. 40 (1932) 207) of patches where the spot is steep:
    by how much their sums scatter more than independent pixels do.
    """
    patches = int(columns.patch.max()) + 1

    def sums(values: F64) -> F64:
        return np.asarray(np.bincount(columns.patch, values, patches), dtype=np.float64)

    rows = np.stack([sums(row) for row in left.rows])
    pixels = sums((left.z != 0).astype(np.float64))
    expected = pixels - np.einsum("pb,pb->b", left.cofactor @ rows, rows)
    good = expected > 0.3 * np.maximum(pixels, 1.0)
    share = sums(left.flank2)[good]
    total = float(share.sum())
    if total <= 0:
        return 1.0
    ratio = sums(left.z)[good] ** 2 / expected[good]
    chance = math.sqrt(2 * float(share @ share)) / total
    return float(share @ ratio) / total - MARGIN_SDS * chance


def lopsidedness(state: State, left: Leftover) -> tuple[float, float]:
    """How far core and skirt of the spot, above and below half its height, disagree about its
    place: cells, and standard deviations of that. The larger one of x and y in sd.
    """
    core = state.light > 0.5 * state.light.max()
    worst = (0.0, 0.0)
    for flank in left.rows[4:6]:
        pull, knowledge = flank * left.z, flank * flank
        inner, outer = float(knowledge[core].sum()), float(knowledge[~core].sum())
        if inner > 0 and outer > 0:
            apart = abs(float(pull[core].sum()) / inner - float(pull[~core].sum()) / outer)
            sds = apart / math.sqrt(1 / inner + 1 / outer)
            worst = max(worst, (sds, apart))
    return worst[1], worst[0]


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
