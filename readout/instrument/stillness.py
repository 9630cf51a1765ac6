"""Is the mirror at rest? Asked before anything is taken for good: a zero, a known tilt."""

from __future__ import annotations

import math

import numpy as np

from readout.instrument.averaging import Rows
from readout.model import F64

STILL_WITHIN_ARCSEC = 0.4
"""Motion from part to part of the window that does not hinder a zero: four times what the eye
resolves on a drum (common practice), and what a sound bench does by itself.
"""
SWAY_ARCSEC = 0.5
"""Scatter (standard deviation) that ordinary sway of a bench may add; more is motion."""


def moving(rows: Rows) -> bool:
    """True if an axis moves by more than its claimed noise explains and more than can pass.

    Three things are looked at, none against the scatter of the readings themselves, so that no
    motion can hide behind its own size: the scatter; the way a straight line through the values
    goes; and means of the parts against each other, halves and both ends against the rest, where a
    step late or early shows.
    """
    good = rows.unflagged()
    return any(
        moves(good.t_s, values, float(np.median(sd)))
        for values, sd in (
            (good.x_arcsec, good.x_sd_arcsec),
            (good.y_arcsec, good.y_sd_arcsec),
        )
        if good.n > 1
    )


def moves(
    t_s: F64,
    values: F64,
    sd: float,
    *,
    step: float = STILL_WITHIN_ARCSEC,
    sway: float = SWAY_ARCSEC,
) -> bool:
    """True if values of one axis (n,), each with the noise ``sd``, are those of something moving.

    ``step`` and ``sway``: what can pass, in the unit of the values. Limits are at least three
    standard deviations of what independent noise ``sd`` would give.
    """
    n = values.size
    if float(values.std(ddof=1)) > max(sway, 3 * sd):
        return True
    if n < 5:
        return False
    # Slope of a line through evenly spaced values: variance 12 sd^2 / n over the whole way.
    if abs(travel(t_s, values)) > max(step, 3 * sd * math.sqrt(12 / n)):
        return True
    for part in (n // 2, n // 5, n - n // 5):
        apart = float(values[part:].mean() - values[:part].mean())
        if abs(apart) > max(step, 3 * sd * math.sqrt(1 / part + 1 / (n - part))):
            return True
    return False


def travel(t_s: F64, values: F64) -> float:
    """How far a straight line through the values goes from first to last; shapes (n,), n >= 2."""
    slope, _ = np.polyfit(t_s - t_s[0], values, 1)
    return float(slope) * float(t_s[-1] - t_s[0])
