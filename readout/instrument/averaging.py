"""The averaged value and its standard error.

Readings a few milliseconds apart are not independent: air and vibration outlast a frame. The
variance of the mean of n evenly spaced values of a stationary series is

    V = sigma^2 g / n,   g = 1 + 2 sum_k (1 - k/n) rho_k

(e.g. G. E. P. Box, G. M. Jenkins, G. C. Reinsel, Time Series Analysis, 1994, 2.1). Because the
autocovariances are taken about the mean of the same values, each is too small by about V
(T. W. Anderson, The Statistical Analysis of Time Series, 1971, 8.2); adding V back gives a linear
equation for V, solved here. The sum is cut by the window rule of A. D. Sokal (Monte Carlo Methods
in Statistical Mechanics, 1989): the first lag M >= 5 g(M) / 2, where the rest is mostly noise.
"""

from __future__ import annotations

import math
from collections import deque
from collections.abc import Iterable
from dataclasses import dataclass
from enum import StrEnum

import numpy as np

from readout.model import F64, Reading


class Statistic(StrEnum):
    """How readings are joined to one value."""

    MEAN = "mean"
    MEDIAN = "median"


@dataclass(frozen=True, slots=True)
class Average:
    """The averaged tilt over a window; NaN where fewer than half of its readings were good.

    ``*_se_arcsec``: standard error, for the correlation seen in the window. ``n``: good readings.
    """

    x_arcsec: float
    y_arcsec: float
    x_se_arcsec: float
    y_se_arcsec: float
    n: int
    window_s: float
    statistic: Statistic

    @property
    def valid(self) -> bool:
        return math.isfinite(self.x_arcsec) and math.isfinite(self.y_arcsec)


def standard_error(values: F64) -> float:
    """Standard error of the mean of an evenly spaced, possibly correlated series, shape (n,).

    Never below s / sqrt(n), that of independent values. NaN for fewer than two.
    """
    n = values.size
    if n < 2:
        return math.nan
    about_mean = values - values.mean()
    independent = math.sqrt(float(about_mean @ about_mean) / (n - 1) / n)
    if n < 8 or independent == 0.0:  # too few to see any correlation
        return independent
    lags = np.arange(1, n // 2 + 1)
    cov = _autocovariance(about_mean)[: lags.size + 1]
    # V(M) = (c_0 + 2 sum (1 - k/n) (c_k + V)) / (n - 1), from V = (c_0 + V + 2 sum ...) / n
    weights = 2 * (1 - lags / n)
    partial = cov[0] + np.cumsum(weights * cov[1:])
    room = n - 1 - np.cumsum(weights)
    usable = room > 0.2 * n  # further out the correction would be larger than what it corrects
    variance = np.where(usable, partial / np.where(usable, room, 1.0), -np.inf)
    g = np.maximum(n * variance / (cov[0] + np.maximum(variance, 0.0)), 1.0)
    enough = np.flatnonzero(lags >= 2.5 * g)
    last = int(enough[0]) if enough.size else int(usable.sum()) - 1
    return max(independent, math.sqrt(max(float(variance[last]), 0.0)))


def _autocovariance(about_mean: F64) -> F64:
    """Products of values k apart, averaged over the n - k pairs there are, shape (n,)."""
    n = about_mean.size
    spectrum = np.fft.rfft(about_mean, 2 * n)
    sums = np.fft.irfft(spectrum.real**2 + spectrum.imag**2, 2 * n)[:n]
    return sums / (n - np.arange(n))


def average_of(
    readings: Iterable[Reading], *, window_s: float, statistic: Statistic = Statistic.MEAN
) -> Average:
    """Average of readings in order of time; flagged ones are left out and not counted.

    The median of normally distributed values has pi/2 times the variance of their mean
    (M. G. Kendall, A. Stuart, The Advanced Theory of Statistics, vol. 1, 10.10).
    """
    rows = list(readings)
    good = np.array([(r.x_arcsec, r.y_arcsec) for r in rows if r.good], dtype=np.float64)
    if 2 * len(good) < len(rows) or len(good) == 0:
        nan = math.nan
        return Average(nan, nan, nan, nan, len(good), window_s, statistic)
    x, y = good.T
    median = statistic is Statistic.MEDIAN
    widen = math.sqrt(math.pi / 2) if median else 1.0
    centre_x, centre_y = np.median(good, axis=0) if median else np.mean(good, axis=0)
    return Average(
        x_arcsec=float(centre_x),
        y_arcsec=float(centre_y),
        x_se_arcsec=widen * standard_error(x),
        y_se_arcsec=widen * standard_error(y),
        n=len(good),
        window_s=window_s,
        statistic=statistic,
    )


class TrailingWindow:
    """The readings of the last ``window_s`` seconds, counted back from the newest one."""

    def __init__(self, window_s: float, *, most: int = 100_000) -> None:
        self.window_s = window_s
        self._rows: deque[Reading] = deque(maxlen=most)

    def add(self, reading: Reading) -> None:
        self._rows.append(reading)
        while reading.t_s - self._rows[0].t_s >= self.window_s and len(self._rows) > 1:
            self._rows.popleft()

    def clear(self) -> None:
        self._rows.clear()

    def rows(self) -> list[Reading]:
        return list(self._rows)
