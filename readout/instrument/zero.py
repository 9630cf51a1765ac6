"""The zero: the averaged value somebody chose to count from."""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from readout.errors import NotNow
from readout.instrument.averaging import Average, Statistic, average_of
from readout.model import F64, Reading

STILL_WITHIN_ARCSEC = 0.2
"""Twice what the eye resolves on a drum (common practice): less motion does not hinder a zero."""


@dataclass(frozen=True, slots=True)
class Zero:
    """Where zero is, and how well: ``*_sd_arcsec`` is the standard error of the average taken."""

    x_arcsec: float
    y_arcsec: float
    x_sd_arcsec: float
    y_sd_arcsec: float
    n: int
    window_s: float
    statistic: Statistic
    set_utc_ns: int


def travel(t_s: F64, values: F64) -> tuple[float, float]:
    """How far a straight line through the values moves from first to last, and the scatter
    (standard deviation) about that line. Shapes (n,), n >= 3, not all times alike.
    """
    slope, start = np.polyfit(t_s - t_s[0], values, 1)
    about_line = values - (start + slope * (t_s - t_s[0]))
    scatter = math.sqrt(float(about_line @ about_line) / (values.size - 2))
    return float(slope) * float(t_s[-1] - t_s[0]), scatter


def moving(rows: Sequence[Reading]) -> bool:
    """True if an axis travels by more than three times its scatter, and by more than can pass."""
    good = [r for r in rows if r.good]
    if len(good) < 5:
        return False
    t_s = np.array([r.t_s for r in good])
    for values in (np.array([r.x_arcsec for r in good]), np.array([r.y_arcsec for r in good])):
        way, scatter = travel(t_s, values)
        if abs(way) > max(3 * scatter, STILL_WITHIN_ARCSEC):
            return True
    return False


def zero_from(
    rows: Sequence[Reading], *, window_s: float, statistic: Statistic, now_utc_ns: int
) -> Zero:
    """The zero at the average of ``rows``, the readings of the window in order of time.

    Raises NotNow while the newest reading is flagged, the average is void or the mirror moves.
    """
    if not rows:
        raise NotNow("there is no reading yet: wait for the first one, then set the zero")
    newest = rows[-1]
    if not newest.good:
        why = ", ".join(newest.quality.words()).replace("_", " ") or "no scale"
        raise NotNow(f"the newest reading cannot be trusted ({why}): mend that, then set the zero")
    average: Average = average_of(rows, window_s=window_s, statistic=statistic)
    if not average.valid:
        raise NotNow("fewer than half of the readings averaged are good: wait, then set the zero")
    if moving(rows):
        raise NotNow("the mirror is moving: let it come to rest, then set the zero")
    return Zero(
        x_arcsec=average.x_arcsec,
        y_arcsec=average.y_arcsec,
        x_sd_arcsec=average.x_se_arcsec,
        y_sd_arcsec=average.y_se_arcsec,
        n=average.n,
        window_s=window_s,
        statistic=statistic,
        set_utc_ns=now_utc_ns,
    )
