"""Drift of a record: straight line, spread, gaps and Allan deviation of both axes.

The rate is that of a straight line of least squares through all good readings. Its uncertainty
comes from their scatter about the line; where means of neighbours scatter more about it than
independent readings would (chi-square at 5 %), from the means: readings that hang together count
for fewer. So it holds noise that hangs together for up to about a tenth of the record. Of a wander
slower than that a single record cannot tell how much is drift; for what the instrument makes by
itself there is the floor.
"""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np
from scipy.special import chdtri

from readout.errors import BadInput
from readout.least_squares import linear_least_squares
from readout.model import F64
from readout.stability.allan import PARTS, Allan, allan_deviation
from readout.stability.even import GAP_INTERVALS, even_series
from readout.stability.floor import S_PER_H
from readout.stability.floor_claims import Drift
from readout.stability.tilt_series import TiltSeries

BLOCKS = (30, 10)
"""Into so many parts a record is cut to see whether its noise hangs together."""
LEAST_IN_BLOCK = 4
DOUBTFUL = 0.05
LEAST_READINGS = 3


@dataclass(frozen=True, slots=True)
class AxisDrift:
    """One axis, ``n`` good readings; all NaN, and no Allan deviation, with fewer than three.

    ``rate_sd_arcsec_per_h``: standard uncertainty of the rate. ``sd_arcsec``: standard deviation
    of the readings, the drift in it. ``range_arcsec``: largest less smallest.
    """

    n: int
    rate_arcsec_per_h: float
    rate_sd_arcsec_per_h: float
    mean_arcsec: float
    sd_arcsec: float
    range_arcsec: float
    allan: Allan | None


@dataclass(frozen=True, slots=True)
class RecordDrift:
    """What a record shows.

    ``n`` rows, ``flagged`` of them left out. ``over_s``: from the first good reading to the last.
    ``interval_s``: the median step. ``gaps``: stretches without a good reading that are longer than
    three steps.
    """

    n: int
    flagged: int
    over_s: float
    interval_s: float
    gaps: int
    longest_gap_s: float
    x: AxisDrift
    y: AxisDrift

    @property
    def change(self) -> Drift:
        """The change over the record, to be held against a floor."""
        over_h = self.over_s / S_PER_H
        return Drift(
            self.x.rate_arcsec_per_h * over_h,
            self.y.rate_arcsec_per_h * over_h,
            self.over_s,
            self.x.rate_sd_arcsec_per_h * over_h,
            self.y.rate_sd_arcsec_per_h * over_h,
        )


def drift_of(series: TiltSeries) -> RecordDrift:
    """What ``series`` shows.

    Raises BadInput, one line, for fewer than three good readings in both axes or times that do not
    rise.
    """
    t_s, n = series.t_s, len(series.t_s)
    axes = (series.x_arcsec, series.y_arcsec)
    good = np.isfinite(axes[0]) | np.isfinite(axes[1])
    if n >= LEAST_READINGS and max(np.isfinite(a).sum() for a in axes) < LEAST_READINGS:
        cautions = f" ({series.flagged} have a caution in quality)" if series.flagged else ""
        raise BadInput(
            f"of {n} rows fewer than three have a good angle{cautions}: look what was wrong with "
            "the pictures, and record anew"
        )
    x, y = (_axis(t_s, values) for values in axes)
    interval_s = even_series(t_s, axes[0]).interval_s
    steps = np.diff(t_s[good])
    between = steps[steps > GAP_INTERVALS * interval_s]
    return RecordDrift(
        n=n,
        flagged=series.flagged,
        over_s=float(np.ptp(t_s[good])),
        interval_s=interval_s,
        gaps=between.size,
        longest_gap_s=float(between.max(initial=0.0)),
        x=x,
        y=y,
    )


def averaging_factors(size: int) -> list[int]:
    """1, 2, 4, 10, 20, 40 ... and the longest there is, a third of the series."""
    most = max(1, size // PARTS)
    steps = [m * 10**k for k in range(len(str(most))) for m in (1, 2, 4)]
    return sorted({m for m in (*steps, most) if m <= most})


def _axis(t_s: F64, values: F64) -> AxisDrift:
    series = even_series(t_s, values)
    good = np.isfinite(values)
    n = int(good.sum())
    if n < LEAST_READINGS:
        return AxisDrift(n, math.nan, math.nan, math.nan, math.nan, math.nan, None)
    rate, sd = _rate(t_s[good], values[good])
    factors = averaging_factors(len(series.values))
    return AxisDrift(
        n=n,
        rate_arcsec_per_h=rate,
        rate_sd_arcsec_per_h=sd,
        mean_arcsec=float(values[good].mean()),
        sd_arcsec=float(values[good].std(ddof=1)),
        range_arcsec=float(np.ptp(values[good])),
        allan=allan_deviation(series, factors, across_gaps=False),
    )


def _rate(t_s: F64, values: F64) -> tuple[float, float]:
    """Slope of the line and its standard uncertainty, arc-seconds per hour."""
    t_h = (t_s - t_s.mean()) / S_PER_H
    fit = linear_least_squares(_line(t_h), values - values.mean())
    uncertainties = [float(fit.parameters_sd[1])]
    for count in BLOCKS:
        if len(values) < LEAST_IN_BLOCK * count:
            continue
        parts = np.array_split(np.arange(len(values)), count)
        means = np.array([fit.residuals[part].mean() for part in parts])
        coarse = linear_least_squares(_line(np.array([t_h[p].mean() for p in parts])), means)
        scatter = len(values) / count * float(coarse.residuals @ coarse.residuals)
        if scatter > fit.residual_sd**2 * chdtri(count - 2, DOUBTFUL):
            uncertainties.append(float(coarse.parameters_sd[1]))
    return float(fit.parameters[1]), max(uncertainties)


def _line(t_h: F64) -> F64:
    return np.stack([np.ones_like(t_h), t_h], axis=1)
