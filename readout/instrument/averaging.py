"""The averaged value and its standard error.

Readings a few milliseconds apart are not independent: air and vibration outlast a frame. The
variance of the mean of n evenly spaced values of a stationary series is

    V = sigma^2 g / n,   g = 1 + 2 sum_k (1 - k/n) rho_k

(e.g. G. E. P. Box, G. M. Jenkins, G. C. Reinsel, Time Series Analysis, 1994, 2.1). Because the
autocovariances are taken about the mean of the same values, each is too small by about V
(T. W. Anderson, The Statistical Analysis of Time Series, 1971, 8.2); adding V back gives a linear
equation for V, solved here. The sum is cut by the window rule of A. D. Sokal (Monte Carlo Methods
in Statistical Mechanics, 1989): the first lag M >= 5 g(M) / 2, where the rest is mostly noise.

A window of a second holds too few independent values to show by itself how they hang together.
So sigma and rho are taken from a longer history too, a straight line removed, back to the last
step: what was moved on purpose is no noise. The larger of both answers counts.
"""

from __future__ import annotations

import math
from collections.abc import Iterable
from dataclasses import dataclass, fields
from enum import StrEnum

import numpy as np

from readout.model import F64, Reading

HISTORY_WINDOWS = 10
HISTORY_S = 10.0, 180.0
"""Shortest and longest history that correlation is taken from."""
MOST_VALUES = 500
"""A longer window is judged by means of neighbours: enough to see how it hangs together."""
LONG = 5
"""A steady history this many times as long as the window is believed rather than the window."""

LOUDER = 3.0
"""A window with this many times the variance of its history is believed rather than it."""

STEP_SD = 6.0
"""A value this many standard deviations off was somewhere else: beyond chance for thousands."""


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


def standard_error(values: F64, history: F64 | None = None) -> float:
    """Standard error of the mean of an evenly spaced, possibly correlated series, shape (n,).

    ``history``: a longer series that ends with ``values``. Never below s / sqrt(n), that of
    independent values. A history that goes on steadily for long tells the correlation better than
    ``values`` can; a short one, or one much quieter than they are, only adds. NaN for fewer than
    two values.
    """
    n = values.size
    if n < 2:
        return math.nan
    independent = float(values.std(ddof=1)) / math.sqrt(n)
    every = math.ceil(n / MOST_VALUES)
    values, n = _means_of(values, every), n // every
    alone = independent
    if n >= 8 and independent > 0.0:  # of fewer no correlation can be seen
        alone = max(alone, math.sqrt(_variance_of_mean(values - values.mean(), n)))
    if history is None:
        return alone
    steady = _since_last_step(_means_of(history, every), n)
    if steady.size < max(2 * n, 16):
        return alone
    about_line = _about_line(steady)
    by_history = math.sqrt(_variance_of_mean(about_line, n))
    if steady.size >= LONG * n and values.var() <= LOUDER * about_line.var():
        return max(independent, by_history)
    return max(alone, by_history)


def _means_of(values: F64, every: int) -> F64:
    """Means of ``every`` neighbours: their mean is the same, and a long series is short."""
    return values[values.size % every :].reshape(-1, every).mean(axis=1) if every > 1 else values


def _about_line(values: F64) -> F64:
    """What is left of evenly spaced values without their straight line (least squares)."""
    k = np.arange(values.size) - (values.size - 1) / 2
    about_mean = values - values.mean()
    return np.asarray(about_mean - k * ((k @ about_mean) / (k @ k)))


def _variance_of_mean(about_mean: F64, n: int) -> float:
    """Variance of the mean of n values of the series that these, about their mean, belong to."""
    m = about_mean.size
    lags = np.arange(1, m // 2 + 1)
    cov = _autocovariance(about_mean)[: lags.size + 1]
    if cov[0] == 0.0:
        return 0.0
    # V(M) = (c_0 + 2 sum (1 - k/m) (c_k + V)) / (m - 1), from V = (c_0 + V + 2 sum ...) / m
    weights = 2 * (1 - lags / m)
    partial = cov[0] + np.cumsum(weights * cov[1:])
    room = m - 1 - np.cumsum(weights)
    usable = room > 0.2 * m  # further out the correction would be larger than what it corrects
    variance = np.where(usable, partial / np.where(usable, room, 1.0), -np.inf)
    g = np.maximum(m * variance / (cov[0] + np.maximum(variance, 0.0)), 1.0)
    enough = np.flatnonzero(lags >= 2.5 * g)
    last = int(enough[0]) if enough.size else int(usable.sum()) - 1
    of_all = max(float(variance[last]), 0.0)
    if n == m:
        return of_all
    k = lags[: min(last + 1, n - 1)]
    one = float(cov[0]) + of_all
    return max(one + 2 * float(np.sum((1 - k / n) * (cov[k] + of_all))), one) / n


def _since_last_step(history: F64, n: int) -> F64:
    """The newest part of ``history`` that goes on as it ends, taken back by n values at a time."""
    kept = step = max(n, 8)
    while kept < history.size:
        newer, before = history[-kept:], history[-kept - step : -kept]
        if np.abs(before - newer.mean()).max() > STEP_SD * newer.std(ddof=1):
            break
        kept += before.size
    return history[-kept:]


def _autocovariance(about_mean: F64) -> F64:
    """Products of values k apart, averaged over the n - k pairs there are, shape (n,)."""
    n = about_mean.size
    spectrum = np.fft.rfft(about_mean, 2 * n)
    sums = np.fft.irfft(spectrum.real**2 + spectrum.imag**2, 2 * n)[:n]
    return sums / (n - np.arange(n))


@dataclass(frozen=True, slots=True)
class Rows:
    """Readings in order of time as columns, each of shape (n,). ``good``: 1 for unflagged ones."""

    t_s: F64
    x_arcsec: F64
    y_arcsec: F64
    x_sd_arcsec: F64
    y_sd_arcsec: F64
    good: F64

    @classmethod
    def of(cls, readings: Iterable[Reading]) -> Rows:
        """The columns of ``readings``."""
        rows = [_row(r) for r in readings]
        return cls(*np.array(rows, dtype=np.float64).reshape(-1, len(_NAMES)).T)

    @property
    def n(self) -> int:
        return int(self.t_s.size)

    def unflagged(self) -> Rows:
        """The good ones alone."""
        keep = self.good > 0
        return Rows(*(getattr(self, name)[keep] for name in _NAMES))


_NAMES = tuple(field.name for field in fields(Rows))


def _row(r: Reading) -> tuple[float, ...]:
    return r.t_s, r.x_arcsec, r.y_arcsec, r.x_sd_arcsec, r.y_sd_arcsec, float(r.good)


def average_of(
    rows: Rows,
    *,
    window_s: float,
    statistic: Statistic = Statistic.MEAN,
    history: Rows | None = None,
) -> Average:
    """Average of ``rows``; flagged ones are left out and not counted. ``history`` ends with them.

    The median of normally distributed values has pi/2 times the variance of their mean
    (M. G. Kendall, A. Stuart, The Advanced Theory of Statistics, vol. 1, 10.10).
    """
    good, before = rows.unflagged(), history.unflagged() if history is not None else None
    if 2 * good.n < rows.n or good.n == 0:
        nan = math.nan
        return Average(nan, nan, nan, nan, good.n, window_s, statistic)
    median = statistic is Statistic.MEDIAN
    widen = math.sqrt(math.pi / 2) if median else 1.0
    centre = np.median if median else np.mean
    return Average(
        x_arcsec=float(centre(good.x_arcsec)),
        y_arcsec=float(centre(good.y_arcsec)),
        x_se_arcsec=widen * standard_error(good.x_arcsec, before.x_arcsec if before else None),
        y_se_arcsec=widen * standard_error(good.y_arcsec, before.y_arcsec if before else None),
        n=good.n,
        window_s=window_s,
        statistic=statistic,
    )


class TrailingWindow:
    """The readings of the last ``window_s`` seconds, counted back from the newest one, and a
    history behind them. ``most``: rows held at most.
    """

    def __init__(self, window_s: float, *, most: int = 100_000) -> None:
        shortest_s, longest_s = HISTORY_S
        self.window_s = window_s
        history_s = min(max(HISTORY_WINDOWS * window_s, shortest_s), longest_s)
        self._history_s = max(history_s, window_s)
        self._most = most
        self._rows = np.empty((256, len(_NAMES)))
        self._end = 0

    def add(self, reading: Reading) -> None:
        if self._end == len(self._rows):
            self._make_room()
        self._rows[self._end] = _row(reading)
        self._end += 1

    def take_over(self, other: TrailingWindow) -> None:
        """Hold what ``other`` holds, as far as it still counts."""
        self._rows, self._end = other._rows.copy(), other._end

    def rows(self) -> Rows:
        """Those of the window."""
        return self._last(self.window_s)

    def history(self) -> Rows:
        """Those of the history, which ends with the window."""
        return self._last(self._history_s)

    def _last(self, span_s: float) -> Rows:
        held = self._rows[max(0, self._end - self._most) : self._end]
        if len(held):
            held = held[np.count_nonzero(held[-1, 0] - held[:, 0] >= span_s) :]
        return Rows(*held.T.copy())

    def _make_room(self) -> None:
        """Forget what is older than the history; grow if that is less than half."""
        kept = np.stack([getattr(self.history(), name) for name in _NAMES], axis=1)
        size = len(self._rows) if 2 * len(kept) <= len(self._rows) else 2 * len(self._rows)
        self._rows = np.empty((size, len(_NAMES)))
        self._rows[: len(kept)] = kept
        self._end = len(kept)
