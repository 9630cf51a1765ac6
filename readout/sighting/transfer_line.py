"""The straight line of variance over level through a tally of frame pairs, with its covariance.

Each level's variance is weighted by what the line, not what its own scatter says it should spread:
a variance that came out small by chance must not count for more.
"""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import Final

import numpy as np
from numpy.typing import NDArray

from readout.least_squares import linear_least_squares
from readout.model import F64, QUANTISATION_VAR
from readout.sighting.frame_pair import BLOCKS, Tally

STEPS: Final = 5
CLEAR_OF_ENDS_SD: Final = 4.0
"""levels nearer to an end of the scale than this many sd are cut by it"""
LEAST_SEEN: Final = 30
"""pixels of a level, to count as seen and as a test of straightness"""
CURVED_SD: Final = 4.0
"""a chi-square this many of its sd above its mean is no straight line"""


@dataclass(frozen=True, slots=True)
class TransferLine:
    """variance = ``variance_levels2`` + ``gain`` (level - ``middle_level``).

    ``cov`` (2, 2) of (variance, gain). ``least_level`` to ``most_level``: where pixels were seen.
    ``curved``: the levels scatter about the line by more than chance, for which ``cov`` is widened.
    """

    middle_level: float
    variance_levels2: float
    gain: float
    cov: F64
    least_level: float
    most_level: float
    curved: bool


@dataclass(frozen=True, slots=True)
class _Levels:
    """Mean level, variance and degrees of freedom of each bin in use."""

    level: F64
    variance: F64
    freedom: F64

    @classmethod
    def of(cls, tally: Tally, used: NDArray[np.bool_], *, without: int | None = None) -> _Levels:
        """Of the bins used; without one group of tiles if one is named."""
        count, level, freedom, square = (
            values.sum(axis=0) - (0 if without is None else values[without])
            for values in (tally.count, tally.level, tally.freedom, tally.square)
        )
        used = used & (freedom >= 1)
        freedom = freedom[used]
        return cls(level[used] / count[used], square[used] / freedom / 2, freedom)


def rounding_ripple(noise_var_levels2: F64) -> F64:
    """By how much the variance of rounded levels may miss noise + 1/12, levels^2, any shape.

    The amplitude of its first harmonic in the place of the level between two steps, (4 s^2 +
    1/pi^2) exp(-2 pi^2 s^2) for normal noise of sd s (B. Widrow and I. Kollar, Quantization Noise,
    2008, appendix G); the others are smaller by exp(-6 pi^2 s^2) and less.
    """
    return np.asarray(
        (4 * noise_var_levels2 + 1 / math.pi**2) * np.exp(-2 * math.pi**2 * noise_var_levels2)
    )


def fit_transfer_line(tally: Tally, full_scale: int) -> TransferLine | None:
    """Weighted least squares through all levels clear of the ends.

    None if there are none. One alone gives its variance and a gain of 0 with no uncertainty.

    The covariance is the jackknife's over groups of tiles (J. W. Tukey, Ann. Math. Stat. 29 (1958)
    614), which also holds for noise that goes from pixel to pixel, and that of the rounding, which
    is the same in every group.
    """
    some = tally.freedom.sum(axis=0) >= 1
    levels = _Levels.of(tally, some)
    expected = levels.variance
    for _ in range(STEPS):
        reach = CLEAR_OF_ENDS_SD * np.sqrt(np.maximum(expected, QUANTISATION_VAR))
        clear = (levels.level - reach > 0.5) & (levels.level + reach < full_scale - 0.5)
        if not np.any(clear & (levels.freedom >= LEAST_SEEN)):
            return None
        used = some.copy()
        used[some] = clear
        line = _Line.through(_Levels.of(tally, used), expected[clear])
        expected = line.at(levels.level)
    fitted = _Levels.of(tally, used)
    cov = _jackknife_cov(tally, used, line) + line.rounding_cov
    seen = fitted.freedom >= LEAST_SEEN
    # noise that goes from pixel to pixel makes each level's variance more uncertain too
    correlated = max(1.0, float(cov[0, 0]) / line.chance_cov[0, 0])
    pull2 = (fitted.variance - line.at(fitted.level)) ** 2 * line.weight / correlated
    freedom = max(int(seen.sum()) - 2, 1)
    excess = float(pull2[seen].sum()) / freedom
    curved = excess > 1 + CURVED_SD * math.sqrt(2 / freedom)
    return TransferLine(
        line.middle,
        line.variance,
        line.gain,
        cov * (excess if curved else 1.0),
        float(fitted.level[seen].min()),
        float(fitted.level[seen].max()),
        curved,
    )


@dataclass(frozen=True, slots=True)
class _Line:
    """A weighted line; ``chance_cov`` if pixels are independent, ``rounding_cov`` of the ripple."""

    middle: float
    variance: float
    gain: float
    weight: F64
    chance_cov: F64
    rounding_cov: F64

    @classmethod
    def through(cls, levels: _Levels, expected: F64, *, middle: float | None = None) -> _Line:
        """``expected``: variance of each level, for the weights."""
        expected = np.maximum(expected, QUANTISATION_VAR)
        rounding = rounding_ripple(expected - QUANTISATION_VAR) ** 2 / 2
        weight = 1 / (2 * expected**2 / levels.freedom + rounding)
        if middle is None:
            middle = float(np.average(levels.level, weights=weight))
        away = levels.level - middle
        # one level alone gives no slope
        columns = 1 if np.ptp(levels.level) == 0 else 2
        design = np.stack([np.ones_like(away), away], axis=1)[:, :columns]
        fit = linear_least_squares(design, levels.variance, weight)
        pull = (fit.cofactor @ design.T) * weight
        chance_cov, rounding_cov = np.zeros((2, 2)), np.zeros((2, 2))
        gain = float(fit.parameters[1]) if columns == 2 else 0.0
        chance_cov[:columns, :columns] = fit.cofactor
        # one flat ground may fall into two bins, and is off by the same in both
        apart = np.abs(levels.level[:, None] - levels.level[None, :])
        ripple = pull * np.sqrt(rounding)
        rounding_cov[:columns, :columns] = ripple @ np.maximum(1 - apart, 0.0) @ ripple.T
        return cls(middle, float(fit.parameters[0]), gain, weight, chance_cov, rounding_cov)

    def at(self, level: F64) -> F64:
        return self.variance + self.gain * (level - self.middle)


def _jackknife_cov(tally: Tally, used: NDArray[np.bool_], line: _Line) -> F64:
    """Covariance (2, 2) of (variance, gain) from the lines without one group of tiles each."""
    lines = []
    for block in range(BLOCKS):
        levels = _Levels.of(tally, used, without=block)
        one = _Line.through(levels, line.at(levels.level), middle=line.middle)
        lines.append((one.variance, one.gain))
    about = np.array(lines) - np.mean(lines, axis=0)
    return np.asarray((BLOCKS - 1) / BLOCKS * about.T @ about)
