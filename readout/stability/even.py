"""A series at even times from one that came as it came: what Allan deviations are made of."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from readout.errors import BadInput
from readout.model import F64

GAP_INTERVALS = 3.0
"""Readings further apart than this many intervals have a gap between them."""
MOST_BINS = 20_000_000
"""Beyond this a gap is no gap but a wrong clock."""


@dataclass(frozen=True, slots=True)
class EvenSeries:
    """Means of what fell into bins of ``interval_s``; NaN for a bin without a value."""

    interval_s: float
    values: F64

    @property
    def duration_s(self) -> float:
        return self.interval_s * len(self.values)


def even_series(t_s: F64, values: F64) -> EvenSeries:
    """Bin a series at the median of its intervals.

    ``t_s`` (n,) seconds, strictly rising; ``values`` (n,), NaN for a reading that is none, which
    keeps its place in time. Raises BadInput, one line, for times that do not rise or too few rows.
    """
    if len(t_s) < 3:
        raise BadInput(f"{len(t_s)} readings are no series: record for longer")
    steps = np.diff(t_s)
    if not np.isfinite(t_s).all() or steps.min() <= 0:
        row = int(np.argmin(np.where(np.isfinite(steps), steps, -np.inf))) + 2
        raise BadInput(f"row {row}: its time is not after the one before: sort the rows by t_s")
    interval_s = float(np.median(steps))
    if (t_s[-1] - t_s[0]) / interval_s > MOST_BINS:
        row = int(np.argmax(steps)) + 2
        raise BadInput(
            f"row {row}: its time is {steps.max():.3g} s after the one before: check t_s"
        )
    index = np.round((t_s - t_s[0]) / interval_s).astype(np.int64)
    good = np.isfinite(values)
    size = int(index[-1]) + 1
    count = np.bincount(index[good], minlength=size)
    total = np.bincount(index[good], weights=values[good], minlength=size)
    return EvenSeries(interval_s, np.where(count > 0, total / np.maximum(count, 1), np.nan))
