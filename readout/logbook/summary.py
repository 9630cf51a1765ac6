"""Summaries of rows over fixed intervals of the run: what a plot of a whole day is drawn from.

``n`` counts rows, ``n_good`` those without a doubt. Extremes are those of everything measured, so
that nothing is hidden; sums are those of the good ones, so that a mean is not spoiled by what is
known to be wrong.
"""

from __future__ import annotations

from typing import NamedTuple

import numpy as np
from numpy.typing import NDArray

from readout.model import F64

I64 = NDArray[np.int64]

UPSERT = """INSERT INTO summary VALUES (?, ?, ?, ?, ?, ?, ?, ?, ?, ?, ?, ?)
ON CONFLICT DO UPDATE SET
    n = n + excluded.n,
    n_good = n_good + excluded.n_good,
    x_min_arcsec = min(coalesce(x_min_arcsec, excluded.x_min_arcsec),
                       coalesce(excluded.x_min_arcsec, x_min_arcsec)),
    x_max_arcsec = max(coalesce(x_max_arcsec, excluded.x_max_arcsec),
                       coalesce(excluded.x_max_arcsec, x_max_arcsec)),
    x_sum_arcsec = x_sum_arcsec + excluded.x_sum_arcsec,
    y_min_arcsec = min(coalesce(y_min_arcsec, excluded.y_min_arcsec),
                       coalesce(excluded.y_min_arcsec, y_min_arcsec)),
    y_max_arcsec = max(coalesce(y_max_arcsec, excluded.y_max_arcsec),
                       coalesce(excluded.y_max_arcsec, y_max_arcsec)),
    y_sum_arcsec = y_sum_arcsec + excluded.y_sum_arcsec"""


class AxisColumns(NamedTuple):
    """Extremes over everything measured, NaN where nothing was; sums over good rows."""

    minimum: F64
    maximum: F64
    total: F64


class Summary(NamedTuple):
    """Columns of equal length, one element for each interval that holds rows."""

    number: I64
    first: I64
    n: I64
    n_good: I64
    x: AxisColumns
    y: AxisColumns


def summarise(
    t_us: I64, x_arcsec: F64, y_arcsec: F64, good: NDArray[np.bool_], width_us: int
) -> Summary:
    """Summaries of rows in order of time; ``first`` is the index of each interval's first row.

    Interval k is [k, k + 1) · ``width_us``. Rows must not be empty; an interval that is left and
    entered again gives a second element.
    """
    number = t_us // width_us
    first = np.flatnonzero(np.r_[True, np.diff(number) != 0])
    counts = np.diff(np.r_[first, number.size])
    n_good = np.add.reduceat(good.astype(np.int64), first)
    axes = (_axis(values, good, first) for values in (x_arcsec, y_arcsec))
    return Summary(number[first], first, counts, n_good, *axes)


def _axis(values: F64, good: NDArray[np.bool_], first: I64) -> AxisColumns:
    with np.errstate(over="ignore"):  # a number without sense is kept like any other
        total = np.add.reduceat(np.where(good, values, 0.0), first)
    return AxisColumns(np.fmin.reduceat(values, first), np.fmax.reduceat(values, first), total)
