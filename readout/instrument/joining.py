"""Readings of one interval joined to a row, with count and scatter."""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass, replace
from functools import reduce
from operator import or_

import numpy as np

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
    good = [r for r in readings if r.good]
    last = readings[-1]
    if 2 * len(good) < len(readings) or not good:
        nan = math.nan
        quality = reduce(or_, (r.quality for r in readings), Quality.OK)
        void = replace(
            last,
            **dict.fromkeys(_VALUES, nan),
            t_s=float(np.mean([r.t_s for r in readings])),
            t_utc_ns=_mean_utc_ns(readings),
            quality=quality,
        )
        return Joined(void, len(good), nan, nan)
    n = len(good)
    mean = {name: float(np.mean([getattr(r, name) for r in good])) for name in _MEANS}
    noise = {
        name: math.sqrt(sum(getattr(r, name) ** 2 for r in good)) / n
        for name in ("x_sd_arcsec", "y_sd_arcsec", "x_sd_px", "y_sd_px")
    }
    common = {axis: float(np.mean([_common_var(r, axis) for r in good])) for axis in ("x", "y")}
    joined = replace(
        last,
        **mean,
        **noise,
        t_utc_ns=_mean_utc_ns(good),
        x_u_arcsec=math.sqrt(common["x"] + noise["x_sd_arcsec"] ** 2),
        y_u_arcsec=math.sqrt(common["y"] + noise["y_sd_arcsec"] ** 2),
        quality=Quality.OK,
    )
    return Joined(
        joined, n, *(_scatter([getattr(r, a) for r in good]) for a in ("x_arcsec", "y_arcsec"))
    )


_MEANS = ("t_s", "x_arcsec", "y_arcsec", "x_px", "y_px")
_VALUES = (
    *("x_arcsec", "y_arcsec", "x_sd_arcsec", "y_sd_arcsec", "x_u_arcsec", "y_u_arcsec"),
    *("x_px", "y_px", "x_sd_px", "y_sd_px"),
)


def _common_var(reading: Reading, axis: str) -> float:
    combined: float = getattr(reading, f"{axis}_u_arcsec")
    noise: float = getattr(reading, f"{axis}_sd_arcsec")
    return max(0.0, combined**2 - noise**2)


def _mean_utc_ns(readings: Sequence[Reading]) -> int:
    return sum(r.t_utc_ns for r in readings) // len(readings)


def _scatter(values: list[float]) -> float:
    return float(np.std(values, ddof=1)) if len(values) > 1 else math.nan
