"""Readings of one interval joined to a row, with count and scatter."""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass
from functools import reduce
from operator import or_
from typing import NamedTuple

import numpy as np

from readout.model import Quality, Reading


@dataclass(frozen=True, slots=True)
class Joined:
    """``reading``: the mean at the mean time; ``n`` good readings went into it, or, while no
    scale is known, unflagged positions; ``*_scatter``: standard deviation of their angles, NaN for
    fewer than two.
    """

    reading: Reading
    n: int
    x_scatter_arcsec: float
    y_scatter_arcsec: float


def join(readings: Sequence[Reading]) -> Joined:
    """Mean of the unflagged ones of ``readings`` (at least one), in order of time.

    If fewer than half are unflagged the values are NaN and the row carries all their flags. The
    noise of a mean of independent values is sqrt(sum sd^2) / n; what is common to all of them
    (combined uncertainty without the noise) stays as it is.
    """
    good = [r for r in readings if r.good] or [r for r in readings if _seen(r)]
    used = good if good and 2 * len(good) >= len(readings) else []
    rows = used or readings
    x, y = (_joined([axis(r) for r in used]) for axis in (_x, _y))
    joined = Reading(
        seq=readings[-1].seq,
        t_s=_mean([r.t_s for r in rows]),
        t_utc_ns=sum(r.t_utc_ns for r in rows) // len(rows),
        x_arcsec=x.mean,
        y_arcsec=y.mean,
        x_sd_arcsec=x.sd,
        y_sd_arcsec=y.sd,
        x_u_arcsec=x.u,
        y_u_arcsec=y.u,
        x_px=_mean([r.x_px for r in used]),
        y_px=_mean([r.y_px for r in used]),
        x_sd_px=_sd_of_mean([r.x_sd_px for r in used]),
        y_sd_px=_sd_of_mean([r.y_sd_px for r in used]),
        quality=Quality.OK if used else reduce(or_, (r.quality for r in readings)),
        calibration_id=readings[-1].calibration_id,
    )
    return Joined(joined, len(good), x.scatter, y.scatter)


class Intervals:
    """Joins readings interval by interval; the intervals are counted from ``origin_s``.

    A change of the calibration ends an interval early: angles of two scales have no mean.
    """

    def __init__(self, every_s: float, *, origin_s: float = 0.0) -> None:
        self._every_s = every_s
        self._origin_s = origin_s
        self._held: list[Reading] = []
        self._number = -1

    def add(self, reading: Reading) -> Joined | None:
        """The row of the interval before, if ``reading`` is the first of another one."""
        number = math.floor((reading.t_s - self._origin_s) / self._every_s)
        other_scale = bool(self._held) and self._held[-1].calibration_id != reading.calibration_id
        complete = self.close() if number != self._number or other_scale else None
        self._number = number
        self._held.append(reading)
        return complete

    @property
    def left_s(self) -> float:
        """Time from the newest reading to the end of its interval; 0 while nothing is held."""
        if not self._held:
            return 0.0
        end_s = self._origin_s + (self._number + 1) * self._every_s
        return max(0.0, end_s - self._held[-1].t_s)

    def close(self) -> Joined | None:
        """The row of what is held, which is then forgotten; None if nothing is."""
        held, self._held = self._held, []
        return join(held) if held else None


def _seen(reading: Reading) -> bool:
    """True for a position nobody has a doubt about; it has no angle while no scale is known."""
    return reading.quality is Quality.OK and math.isfinite(reading.x_px)


_Row = tuple[float, float, float]


class _Axis(NamedTuple):
    mean: float
    sd: float
    u: float
    scatter: float


def _x(reading: Reading) -> _Row:
    return reading.x_arcsec, reading.x_sd_arcsec, reading.x_u_arcsec


def _y(reading: Reading) -> _Row:
    return reading.y_arcsec, reading.y_sd_arcsec, reading.y_u_arcsec


def _joined(rows: list[_Row]) -> _Axis:
    values, noise = [value for value, _, _ in rows], [sd for _, sd, _ in rows]
    sd = _sd_of_mean(noise)
    common_var = _mean([max(0.0, u**2 - sd**2) for _, sd, u in rows])
    scatter = float(np.std(values, ddof=1)) if len(values) > 1 else math.nan
    return _Axis(_mean(values), sd, math.sqrt(common_var + sd**2), scatter)


def _mean(values: list[float]) -> float:
    return float(np.mean(values)) if values else math.nan


def _sd_of_mean(noise: list[float]) -> float:
    return math.sqrt(sum(sd**2 for sd in noise)) / len(noise) if noise else math.nan
