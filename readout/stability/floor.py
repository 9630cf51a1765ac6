"""The floor: what the instrument shows by itself, the mirror clamped to its objective.

Nothing can turn there but the instrument's own parts, and no air lies between. What such a null
test shows in noise and drift is the instrument's, and a measurement of something else cannot claim
less. Two averages of a stretch's halves differ by sqrt 2 times the Allan deviation in the rms, and
by half the stretch's drift; so over a time T the instrument alone makes up a drift of

    rms change(T) = 2 sqrt 2 sigma_Allan(T / 2),

exact for a steady drift, and a little more than a straight line of least squares would show of
white noise (16 for 12, as variances) and of a random walk (4/3 for 6/5).
"""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np
from scipy.special import stdtrit

from readout.errors import BadInput
from readout.least_squares import linear_least_squares
from readout.model import F64
from readout.stability.allan import allan_deviation
from readout.stability.even import EvenSeries, even_series
from readout.units import decimals_for, signed

LEAST_READINGS = 100
LEAST_GOOD = 0.5
BLOCKS = 10
"""A drift's uncertainty is judged by means of tenths: noise may hang together for shorter."""
S_PER_H = 3600.0


@dataclass(frozen=True, slots=True)
class AxisFloor:
    """One axis: noise of a single reading, drift with its standard uncertainty, Allan deviations.

    ``allan_arcsec`` and ``allan_freedom`` belong to the floor's ``tau_s``. ``drift_freedom``:
    degrees of freedom of ``drift_u_arcsec_per_h``.
    """

    noise_sd_arcsec: float
    drift_arcsec_per_h: float
    drift_u_arcsec_per_h: float
    drift_freedom: int
    allan_arcsec: tuple[float, ...]
    allan_freedom: tuple[float, ...]

    @property
    def drifts(self) -> bool:
        """True if a drift is shown with 95 % confidence."""
        k = float(stdtrit(self.drift_freedom, 0.975))
        return abs(self.drift_arcsec_per_h) > k * self.drift_u_arcsec_per_h


@dataclass(frozen=True, slots=True)
class Floor:
    """What one null test showed, kept beside the instrument's calibration."""

    created_utc: str
    calibration_id: str | None
    duration_s: float
    interval_s: float
    n: int
    tau_s: tuple[float, ...]
    x: AxisFloor
    y: AxisFloor

    @property
    def longest_s(self) -> float:
        """Longest time over which a drift can be held against this floor."""
        return 2 * self.tau_s[-1]

    def change_arcsec(self, axis: AxisFloor, over_s: float) -> tuple[float, float]:
        """Rms drift that the instrument makes up by itself in ``over_s``, and its freedom.

        Between the averaging times by a straight line of the logarithms; below the shortest as
        there. NaN beyond ``longest_s``.
        """
        if not 0 < over_s <= self.longest_s * (1 + 1e-9):
            return math.nan, math.nan
        at = math.log(over_s / 2)
        taus = np.log(self.tau_s)
        lowest = 1e-12  # a perfect series has the logarithm of nothing
        deviation = np.exp(np.interp(at, taus, np.log(np.maximum(axis.allan_arcsec, lowest))))
        freedom = np.exp(np.interp(at, taus, np.log(axis.allan_freedom)))
        return 2 * math.sqrt(2) * float(deviation), float(freedom)

    def best(self, axis: AxisFloor) -> tuple[float, float]:
        """Least Allan deviation, and the averaging time (s) beyond which averaging is in vain."""
        least = int(np.argmin(axis.allan_arcsec))
        return axis.allan_arcsec[least], self.tau_s[least]

    def words(self) -> tuple[str, ...]:
        """What to say to a person."""
        said = [f"null test of {spell_time(self.duration_s)}, {self.n} readings"]
        for name, axis in (("x", self.x), ("y", self.y)):
            least, tau_s = self.best(axis)
            longer = (
                "longer ones would hold better still"
                if tau_s == self.tau_s[-1]
                else "longer ones gain nothing"
            )
            decimals = decimals_for(axis.drift_u_arcsec_per_h, most=4)
            drift = (
                f"it drifts by {signed(axis.drift_arcsec_per_h, decimals)}"
                if axis.drifts
                else f"no drift shown, {signed(axis.drift_arcsec_per_h, decimals)}"
            )
            said.append(
                f"{name}: a single reading scatters by {axis.noise_sd_arcsec:.2g}″; averaged over "
                f"{spell_time(tau_s)} it holds to {least:.2g}″, {longer}; "
                f"{drift} ± {axis.drift_u_arcsec_per_h:.{decimals}f}″ an hour"
            )
        return tuple(said)


def floor_of_null_test(
    t_s: F64,
    x_arcsec: F64,
    y_arcsec: F64,
    *,
    created_utc: str = "",
    calibration_id: str | None = None,
) -> Floor:
    """The floor from the readings of a null test.

    ``t_s`` (n,) seconds, strictly rising; readings (n,) in arc-seconds, NaN where flagged. Raises
    BadInput, one line, for a series too short, too full of holes, or out of order.
    """
    if len(t_s) < LEAST_READINGS:
        raise BadInput(
            f"{len(t_s)} readings are too few for a null test: record an hour, or as long as the "
            "measurements it is to stand beside"
        )
    series = [even_series(t_s, values) for values in (x_arcsec, y_arcsec)]
    for name, values in (("x", x_arcsec), ("y", y_arcsec)):
        share = float(np.isfinite(values).mean())
        if share < LEAST_GOOD:
            raise BadInput(
                f"only {share:.0%} of the readings in {name} are good: clamp the mirror flat to "
                "the objective and dim the lamp until the picture is not saturated"
            )
    allans = [allan_deviation(one) for one in series]
    taus = sorted(set(allans[0].tau_s.tolist()) & set(allans[1].tau_s.tolist()))
    if len(taus) < 3:
        raise BadInput("the null test has too many gaps to average over: record it anew")
    axes = []
    for one, allan in zip(series, allans, strict=True):
        kept = np.isin(allan.tau_s, taus)
        rate, u, freedom = _drift(one)
        axes.append(
            AxisFloor(
                noise_sd_arcsec=float(allan.deviation[0]),
                drift_arcsec_per_h=rate,
                drift_u_arcsec_per_h=u,
                drift_freedom=freedom,
                allan_arcsec=tuple(allan.deviation[kept].tolist()),
                allan_freedom=tuple(allan.freedom[kept].tolist()),
            )
        )
    return Floor(
        created_utc=created_utc,
        calibration_id=calibration_id,
        duration_s=float(t_s[-1] - t_s[0]),
        interval_s=series[0].interval_s,
        n=len(t_s),
        tau_s=tuple(taus),
        x=axes[0],
        y=axes[1],
    )


def spell_time(seconds: float) -> str:
    """A time as a person says it: 0.5 s, 40 s, 12 min, 3.5 h."""
    if seconds < 100:
        return f"{seconds:.2g} s"
    return f"{seconds / 60:.0f} min" if seconds < 2 * S_PER_H else f"{seconds / S_PER_H:.2g} h"


def _drift(series: EvenSeries) -> tuple[float, float, int]:
    """Slope of the means of tenths, its standard uncertainty (arcsec per hour), its freedom."""
    blocks = np.array_split(series.values, BLOCKS)
    counts = np.array([np.isfinite(block).sum() for block in blocks])
    used = counts > 0
    means = np.array([np.nanmean(b) for b, there in zip(blocks, used, strict=True) if there])
    if len(means) < 4:
        raise BadInput("the null test has too many gaps to show a drift: record it anew")
    length_h = series.duration_s / BLOCKS / S_PER_H
    t_h = np.flatnonzero(used) * length_h
    design = np.stack([np.ones_like(t_h), t_h], axis=1)
    fit = linear_least_squares(design, means, counts[used].astype(np.float64))
    return float(fit.parameters[1]), float(fit.parameters_sd[1]), len(means) - 2
