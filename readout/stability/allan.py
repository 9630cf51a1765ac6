"""The overlapping Allan deviation of readings, with gaps, and what it is known to.

For means of m neighbouring readings, tau = m tau0 long,

    sigma^2(tau) = 1/2 < (mean_{j+m} - mean_j)^2 >   over every start j

(D. W. Allan, Proc. IEEE 54 (1966) 221; W. J. Riley, Handbook of Frequency Stability Analysis, NIST
SP 1065, 2008, 5.2.4), readings taking the part of frequencies: sigma(tau0) of white noise is its
standard deviation, it falls with the square root of tau, and a drift of D a second gives
D tau / sqrt 2. The differences overlap, so they are worth fewer independent ones, the equivalent
degrees of freedom, which depend on the kind of noise (SP 1065, table 5); as that is not known, the
fewest that white, flicker and random-walk noise give are taken.
"""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray
from scipy.special import chdtri

from readout.model import F64
from readout.stability.even import GAP_INTERVALS, EvenSeries

LEAST_PRESENT = 0.9
"""Share of a mean's readings that must be there."""
PARTS = 3
"""The longest tau is the series over this: with fewer parts there is next to nothing to compare."""


@dataclass(frozen=True, slots=True)
class Allan:
    """Columns of one length, a value for each averaging time that has a difference at all.

    ``n``: how many differences; ``freedom``: their equivalent degrees of freedom.
    """

    tau_s: F64
    deviation: F64
    n: F64
    freedom: F64

    def interval(self, confidence: float = 0.683) -> tuple[F64, F64]:
        """Lowest and highest true deviation for ``confidence``: chi-square over the freedom."""
        tail = (1 - confidence) / 2
        low = np.sqrt(self.freedom / chdtri(self.freedom, tail))
        high = np.sqrt(self.freedom / chdtri(self.freedom, 1 - tail))
        return self.deviation * low, self.deviation * high


def averaging_factors(size: int) -> list[int]:
    """1, 2, 4 ... and the longest there is, a third of the series."""
    most = size // PARTS
    octaves = [2**k for k in range(max(1, most).bit_length())]
    return sorted({m for m in (*octaves, most) if 1 <= m <= max(1, most)})


def allan_deviation(
    series: EvenSeries, factors: list[int] | None = None, *, across_gaps: bool = True
) -> Allan:
    """The overlapping Allan deviation at averages of ``factors`` readings, octaves by default.

    A few readings may be missing within a mean. Without ``across_gaps`` no mean and no difference
    reaches over a gap: each stretch between gaps counts by itself, and all of them together.
    """
    size = len(series.values)
    gaps = None if across_gaps else _gaps(series.values)
    stretches = _Stretches(series.values, gaps)
    rows = []
    for m in factors or averaging_factors(size):
        means = stretches.means(m)
        difference = means[m:] - means[:-m]
        difference = difference[np.isfinite(difference)]
        if difference.size:
            deviation = math.sqrt(float(difference @ difference) / 2 / difference.size)
            # A gap costs degrees of freedom as a shorter series does.
            worth = difference.size + 2 * m - 1
            rows.append((m * series.interval_s, deviation, difference.size, _freedom(worth, m)))
    columns = np.array(rows, dtype=np.float64).reshape(-1, 4).T
    return Allan(columns[0], columns[1], columns[2], columns[3])


class _Stretches:
    """Means of every m neighbouring values, from sums that are added up once.

    NaN for a mean of which too many values are missing, or that reaches over a gap.
    """

    def __init__(self, values: F64, gaps: NDArray[np.bool_] | None) -> None:
        present = np.isfinite(values)
        self._middle = float(np.mean(values[present])) if present.any() else 0.0
        near = np.where(present, values - self._middle, 0.0)  # keeps the sums small
        self._total = np.concatenate([[0.0], np.cumsum(near)])
        self._count = np.concatenate([[0], np.cumsum(present)])
        self._gaps = None if gaps is None else np.concatenate([[0], np.cumsum(gaps)])

    def means(self, m: int) -> F64:
        """Of every stretch of m values, (n - m + 1,)."""
        there = self._count[m:] - self._count[:-m]
        enough = there >= max(1.0, LEAST_PRESENT * m)
        if self._gaps is not None:
            enough &= self._gaps[m:] == self._gaps[:-m]
        sums = self._total[m:] - self._total[:-m]
        return np.where(enough, self._middle + sums / np.maximum(there, 1), np.nan)


def _gaps(values: F64) -> NDArray[np.bool_]:
    """True for the values that are missing in a row, as many as make a gap, (n,)."""
    missing = np.concatenate([[False], np.isnan(values), [False]])
    edges = np.flatnonzero(np.diff(missing))
    found = np.zeros(len(values), dtype=bool)
    for begin, end in edges.reshape(-1, 2):
        # Between the readings on both sides lies one interval more than values are missing.
        found[begin:end] = end - begin + 1 > GAP_INTERVALS
    return found


def _freedom(size: int, m: int) -> float:
    """Fewest equivalent degrees of freedom of ``size`` readings, means of m (SP 1065, table 5)."""
    n = size + 1  # the table counts points of phase, one more than frequencies
    white = (1.5 * (n - 1) / m - 2 * (n - 2) / n) * 4 * m * m / (4 * m * m + 5)
    flicker = 2 * (n - 2) ** 2 / (2.3 * n - 4.9) if m == 1 else 5 * n * n / (4 * m * (n + 3 * m))
    walk = (n - 2) / m * ((n - 1) ** 2 - 3 * m * (n - 1) + 4 * m * m) / max(1, (n - 3) ** 2)
    return max(1.0, min(white, flicker, walk))
