"""Readings of one interval joined to a row, with count and scatter."""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass

from readout.model import Quality, Reading


@dataclass(frozen=True, slots=True)
class Joined:
    """``reading``: the mean at the mean time; ``n`` good readings went into it; ``*_scatter``:
    their standard deviation, NaN for fewer than two.
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
    interval = _Interval(readings[0])
    for reading in readings:
        interval.add(reading)
    return interval.joined()


class Intervals:
    """Joins readings interval by interval; the intervals are counted from ``origin_s``.

    A change of the calibration ends an interval early: angles of two scales have no mean. Sums are
    held, not readings: a day at 200 a second takes no more memory than a second.
    """

    def __init__(self, every_s: float, *, origin_s: float = 0.0) -> None:
        self._every_s = every_s
        self._origin_s = origin_s
        self._held: _Interval | None = None
        self._number = -1

    def add(self, reading: Reading) -> Joined | None:
        """The row of the interval before, if ``reading`` is the first of another one."""
        number = math.floor((reading.t_s - self._origin_s) / self._every_s)
        held = self._held
        other_scale = held is not None and held.newest.calibration_id != reading.calibration_id
        complete = self.close() if number != self._number or other_scale else None
        self._number = number
        if self._held is None:
            self._held = _Interval(reading)
        self._held.add(reading)
        return complete

    @property
    def left_s(self) -> float:
        """Time from the newest reading to the end of its interval; 0 while nothing is held."""
        if self._held is None:
            return 0.0
        end_s = self._origin_s + (self._number + 1) * self._every_s
        return max(0.0, end_s - self._held.newest.t_s)

    def close(self) -> Joined | None:
        """The row of what is held, which is then forgotten; None if nothing is."""
        held, self._held = self._held, None
        return held.joined() if held is not None else None


class _Mean:
    """Mean and scatter of what is added, by the recurrence of B. P. Welford (Technometrics 4
    (1962) 419), which loses no digits to a small scatter far from zero.
    """

    def __init__(self) -> None:
        self.n = 0
        self._mean = self._sum_sq = 0.0

    def add(self, value: float) -> None:
        self.n += 1
        off = value - self._mean
        self._mean += off / self.n
        self._sum_sq += off * (value - self._mean)

    @property
    def mean(self) -> float:
        return self._mean if self.n else math.nan

    @property
    def scatter(self) -> float:
        return math.sqrt(self._sum_sq / (self.n - 1)) if self.n > 1 else math.nan


class _Axis:
    """One axis of the good readings: values, their noise, what is common to them, positions."""

    def __init__(self) -> None:
        self.value, self.place_px = _Mean(), _Mean()
        self._noise_var, self._common_var, self._noise_var_px = _Mean(), _Mean(), _Mean()

    def add(self, value: float, sd: float, u: float, place_px: float, sd_px: float) -> None:
        self.value.add(value)
        self.place_px.add(place_px)
        self._noise_var.add(sd**2)
        self._common_var.add(max(0.0, u**2 - sd**2))
        self._noise_var_px.add(sd_px**2)

    @property
    def sd(self) -> float:
        return math.sqrt(self._noise_var.mean / max(1, self.value.n))

    @property
    def u(self) -> float:
        return math.sqrt(self._common_var.mean + self.sd**2)

    @property
    def sd_px(self) -> float:
        return math.sqrt(self._noise_var_px.mean / max(1, self.value.n))


class _Interval:
    """The sums over the readings of an interval that begins with ``first``."""

    def __init__(self, first: Reading) -> None:
        self.newest = first
        self._first = first
        self._quality = Quality.OK
        self._scaled = False  # an angle has come: positions without one count no more
        self._x, self._y = _Axis(), _Axis()
        self._since_s = {True: _Mean(), False: _Mean()}  # of those counted; of all
        self._since_ns = {True: 0, False: 0}

    def add(self, r: Reading) -> None:
        self.newest = r
        self._quality |= r.quality
        if r.good and not self._scaled:
            self._scaled = True
            self._x, self._y = _Axis(), _Axis()
            self._since_s[True], self._since_ns[True] = _Mean(), 0
        counted = r.good if self._scaled else _seen(r)
        for kind in (True, False) if counted else (False,):
            self._since_s[kind].add(r.t_s - self._first.t_s)
            self._since_ns[kind] += r.t_utc_ns - self._first.t_utc_ns
        if counted:
            self._x.add(r.x_arcsec, r.x_sd_arcsec, r.x_u_arcsec, r.x_px, r.x_sd_px)
            self._y.add(r.y_arcsec, r.y_sd_arcsec, r.y_u_arcsec, r.y_px, r.y_sd_px)

    def joined(self) -> Joined:
        """The row; see ``join``."""
        n, n_all = self._since_s[True].n, self._since_s[False].n
        usable = n > 0 and 2 * n >= n_all
        x, y = (self._x, self._y) if usable else (_Axis(), _Axis())
        reading = Reading(
            seq=self.newest.seq,
            t_s=self._first.t_s + self._since_s[usable].mean,
            t_utc_ns=self._first.t_utc_ns + self._since_ns[usable] // (n if usable else n_all),
            x_arcsec=x.value.mean,
            y_arcsec=y.value.mean,
            x_sd_arcsec=x.sd,
            y_sd_arcsec=y.sd,
            x_u_arcsec=x.u,
            y_u_arcsec=y.u,
            x_px=x.place_px.mean,
            y_px=y.place_px.mean,
            x_sd_px=x.sd_px,
            y_sd_px=y.sd_px,
            quality=Quality.OK if usable else self._quality,
            calibration_id=self.newest.calibration_id,
            signs=self.newest.signs,
        )
        return Joined(reading, n, x.value.scatter, y.value.scatter)


def _seen(reading: Reading) -> bool:
    """True for a position nobody has a doubt about; it has no angle while no scale is known."""
    return reading.quality is Quality.OK and math.isfinite(reading.x_px)
