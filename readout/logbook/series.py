"""What a plot shows of a part of a run: extremes and means in bins, a gap where nothing was.

Bins are never narrower than two steps of the readings, so that an empty bin is a true gap and not
a bin that fell between two readings. Where there are few enough readings they stand for
themselves.
"""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import NamedTuple

import numpy as np
from numpy.typing import NDArray

from readout.logbook.schema import LEVELS_S
from readout.model import F64

I64 = NDArray[np.int64]

PAUSE_STEPS = 3.0
"""Readings further apart than this many steps have a gap between them."""


class Cells(NamedTuple):
    """Single readings (``width_s`` 0) or summaries of ``width_s`` seconds, in order of time.

    Columns of equal length; ``t_s`` is the middle of a summary. Extremes are of everything
    measured, NaN where nothing was; sums of good readings, 0 where there was none.
    """

    width_s: int
    t_s: F64
    n: I64
    n_good: I64
    x_min_arcsec: F64
    x_max_arcsec: F64
    x_sum_arcsec: F64
    y_min_arcsec: F64
    y_max_arcsec: F64
    y_sum_arcsec: F64


@dataclass(frozen=True, slots=True)
class Series:
    """Columns of equal length, one element a bin; NaN, and 0 in ``n``, where nothing is.

    ``t_s`` is the middle of a bin, ``bin_s`` its length, 0 for single readings. ``n`` counts
    readings, ``n_good`` those without a doubt, which the means are over; extremes are of
    everything measured.
    """

    bin_s: float
    t_s: F64
    n: I64
    n_good: I64
    x_min_arcsec: F64
    x_max_arcsec: F64
    x_mean_arcsec: F64
    y_min_arcsec: F64
    y_max_arcsec: F64
    y_mean_arcsec: F64


def choose_level_s(span_s: float, points: int) -> int:
    """The longest summaries from which at least half of ``points`` bins come; 0: none, readings."""
    return max((level_s for level_s in LEVELS_S if level_s <= 2 * span_s / points), default=0)


def series_of(cells: Cells, *, from_s: float, to_s: float, points: int) -> Series:
    """A series over [from_s, to_s) from what lies in it, in at most ``points`` elements.

    From summaries, bins are whole summaries long and begin where one does.
    """
    step_s = _step_s(cells)
    if cells.width_s == 0:
        alone = _single(cells, step_s)
        if alone.t_s.size <= points:
            return alone
        bin_s = max((to_s - from_s) / points, 2 * step_s)
        return _binned(cells, from_s, bin_s, math.ceil((to_s - from_s) / bin_s - 1e-9))
    width_s = cells.width_s
    begin_s = math.floor(from_s / width_s) * width_s
    narrowest_s = max((to_s - begin_s) / points, 2 * step_s if step_s > width_s else width_s)
    bin_s = math.ceil(narrowest_s / width_s) * width_s
    return _binned(cells, begin_s, bin_s, math.ceil((to_s - begin_s) / bin_s))


def _step_s(cells: Cells) -> float:
    """The usual distance of two neighbours."""
    return float(np.median(np.diff(cells.t_s))) if cells.t_s.size > 1 else 0.0


def _single(cells: Cells, step_s: float) -> Series:
    """Each reading as its own element, one without values in each pause."""
    steps = np.diff(cells.t_s)
    before = np.flatnonzero(steps > PAUSE_STEPS * step_s) + 1
    middle_s = cells.t_s[before - 1] + steps[before - 1] / 2

    def missing(values: F64) -> F64:
        return np.insert(values, before, math.nan)

    n_good = np.insert(cells.n_good, before, 0)
    return Series(
        0.0,
        np.insert(cells.t_s, before, middle_s),
        np.insert(cells.n, before, 0),
        n_good,
        missing(cells.x_min_arcsec),
        missing(cells.x_max_arcsec),
        _mean(missing(cells.x_sum_arcsec), n_good),
        missing(cells.y_min_arcsec),
        missing(cells.y_max_arcsec),
        _mean(missing(cells.y_sum_arcsec), n_good),
    )


def _binned(cells: Cells, begin_s: float, bin_s: float, count: int) -> Series:
    # A reading on an edge belongs to the bin that begins there, whatever the last bit says.
    number = np.floor((cells.t_s - begin_s) / bin_s + 1e-9).astype(np.int64)
    number = np.clip(number, 0, count - 1)

    def total(values: F64 | I64) -> F64:
        return np.bincount(number, weights=values, minlength=count).astype(np.float64)

    def smallest(values: F64) -> F64:
        out = np.full(count, math.nan)
        np.fmin.at(out, number, values)
        return out

    def largest(values: F64) -> F64:
        out = np.full(count, math.nan)
        np.fmax.at(out, number, values)
        return out

    n_good = total(cells.n_good)
    return Series(
        bin_s,
        begin_s + bin_s * (np.arange(count, dtype=np.float64) + 0.5),
        total(cells.n).astype(np.int64),
        n_good.astype(np.int64),
        smallest(cells.x_min_arcsec),
        largest(cells.x_max_arcsec),
        _mean(total(cells.x_sum_arcsec), n_good),
        smallest(cells.y_min_arcsec),
        largest(cells.y_max_arcsec),
        _mean(total(cells.y_sum_arcsec), n_good),
    )


def _mean(total: F64, n_good: F64 | I64) -> F64:
    means: F64 = np.where(n_good > 0, total / np.maximum(n_good, 1), math.nan)
    return means
