"""The defocus from readings of two tilts at several distances: a weighted straight line.

The model stands in ``distance_check``.
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass
from itertools import groupby

import numpy as np
from scipy.special import chdtri, ndtr, stdtr

from readout.angle.distance import clear_range
from readout.angle.distance_check import DistanceCheck, Station
from readout.angle.distance_rows import DistanceRow
from readout.errors import BadInput
from readout.least_squares import LinearFit, linear_least_squares
from readout.model import F64

LEAST_STEP_SD = 20.0
"""A step this many times its own uncertainty is a step."""
DOUBTFUL = 0.05
"""Residuals this unlikely to be so large by chance widen the uncertainty."""
UNLIKELY = 0.01
"""A stop as far from the others as chance puts one in a hundred checks is named."""
NO_DIFFERENCE_ARCSEC = 1e-6
"""What is no more than rounding is nobody's fault."""


@dataclass(frozen=True, slots=True)
class _Stop:
    """Means of the rows of one stop: (2,) for both axes, and their variance."""

    distance_mm: float
    low: F64
    high: F64
    low_variance: float
    high_variance: float


def check_distance(
    rows: Sequence[DistanceRow],
    *,
    focal_length_mm: float,
    focal_length_sd_mm: float = 0.0,
    step_sd_arcsec: float = 0.0,
    objective_mm: float | None = None,
    mirror_mm: float | None = None,
) -> DistanceCheck:
    """Defocus of the sensor from readings of two tilts at several distances.

    ``rows`` in the order they were taken; neighbours at one distance are one stop, during which
    the carriage must not move. ``step_sd_arcsec``: repeatability of the step, if known. Free
    diameters of objective and mirror let clipped readings be refused, which would hide the error.

    A weighted straight line through the differences; the variance of the ratio by the law of
    propagation (JCGM 100:2008, 5.2). Without uncertainties of the rows the scatter about the line
    tells it. With them, a scatter larger than they allow (chi-square at 5 %) widens the
    uncertainty by the Birge ratio (R. T. Birge, Phys. Rev. 40 (1932) 207).

    Raises
    ------
    BadInput
        With one line that names the row and what to do.
    """
    if not (focal_length_mm > 0 and math.isfinite(focal_length_mm)):
        raise BadInput(
            f"a focal length of {focal_length_mm:g} mm cannot be: give it in millimetres"
        )
    axes = _axes(rows)
    names = _step_names(rows)
    if objective_mm is not None and mirror_mm is not None:
        _refuse_clipped(rows, objective_mm, mirror_mm)
    known = all(math.isfinite(row.sd_arcsec) for row in rows)
    stops = _stops(rows, names, known=known)
    distance = np.array([stop.distance_mm for stop in stops])
    _refuse_few(distance, known=known)

    difference = np.array([stop.high - stop.low for stop in stops])[:, axes]
    mean = difference.mean(axis=0)
    step = difference @ (mean / np.linalg.norm(mean)) if np.any(mean) else difference[:, 0]
    variance = np.array([s.low_variance + s.high_variance for s in stops])
    variance = variance + (step_sd_arcsec**2 if known else 0.0)

    design = np.stack([np.ones_like(distance), distance], axis=1)
    fit = linear_least_squares(design, step, 1 / variance)
    cov, freedom, widened = _covariance(fit, len(stops), known=known)
    intercept, slope = fit.parameters
    if abs(intercept) < LEAST_STEP_SD * math.sqrt(cov[0, 0]):
        raise BadInput(
            f"the two tilts are {abs(intercept):.3g}″ apart, too little for the noise of these "
            "readings: take a step of some hundred arc-seconds, or average longer"
        )
    ratio = -slope / intercept
    gradient = np.array([slope / intercept**2, -1 / intercept])
    ratio_variance = float(gradient @ cov @ gradient)
    stretch = 1 - ratio * focal_length_mm
    if stretch <= 0:
        raise BadInput(
            "the step shrinks with the distance more than any defocus can make it: check that the "
            "distances are in millimetres and that the step repeats"
        )
    defocus_mm = ratio * focal_length_mm**2 / stretch
    by_ratio = focal_length_mm**2 / stretch**2
    by_focal_length = ratio * focal_length_mm * (2 - ratio * focal_length_mm) / stretch**2
    return DistanceCheck(
        defocus_mm=float(defocus_mm),
        defocus_u_mm=math.hypot(
            by_ratio * math.sqrt(ratio_variance), by_focal_length * focal_length_sd_mm
        ),
        freedom=freedom,
        focal_length_mm=focal_length_mm,
        step_arcsec=float(abs(intercept + slope * distance[0])),
        stations=_stations(stops, step, fit, variance * widened**2, ratio, ratio_variance),
        warnings=tuple(
            _warnings(fit, design, np.sqrt(variance), widened=widened, known=known)
            + ([] if objective_mm and mirror_mm else [_UNCLIPPED])
        ),
    )


_UNCLIPPED = (
    "whether the return was clipped was not checked, and a clipped return hides the defocus: give "
    "the diameters of objective and mirror"
)


def _axes(rows: Sequence[DistanceRow]) -> list[int]:
    """Which of x (0) and y (1) every row has."""
    if not rows:
        raise BadInput("there are no rows: give two tilts at each of three distances or more")
    have = np.isfinite([[row.x_arcsec, row.y_arcsec] for row in rows])
    axes = np.flatnonzero(have.all(axis=0)).tolist()
    if not axes:
        worst = int(np.argmin(have.sum(axis=1))) + 1
        raise BadInput(
            f"row {worst} lacks a reading that the others have: give x_arcsec, y_arcsec or both in "
            "every row"
        )
    return axes


def _step_names(rows: Sequence[DistanceRow]) -> tuple[str, str]:
    names = list(dict.fromkeys(row.step for row in rows))
    if len(names) != 2:
        found = ", ".join(repr(name) for name in names[:4])
        raise BadInput(f"the tilts are called {found}: give every row one of just two names")
    return names[0], names[1]


def _refuse_clipped(rows: Sequence[DistanceRow], objective_mm: float, mirror_mm: float) -> None:
    for number, row in enumerate(rows, start=1):
        tilt = math.hypot(np.nan_to_num(row.x_arcsec), np.nan_to_num(row.y_arcsec))
        limits = clear_range(row.distance_mm, objective_mm=objective_mm, mirror_mm=mirror_mm)
        if tilt > limits.whole_arcsec:
            raise BadInput(
                f"row {number} was taken at {tilt:.0f}″, but {limits.words()}, and a clipped "
                "return hides the defocus: take a smaller step or put a narrower stop before the "
                "mirror"
            )


def _stops(rows: Sequence[DistanceRow], names: tuple[str, str], *, known: bool) -> list[_Stop]:
    stops = []
    numbered = enumerate(rows, start=1)
    for distance_mm, group in groupby(numbered, key=lambda item: item[1].distance_mm):
        members = list(group)
        means, variances = [], []
        for name in names:
            chosen = [row for _, row in members if row.step == name]
            if not chosen:
                raise BadInput(
                    f"row {members[0][0]}: at {distance_mm:g} mm the tilt {name!r} is missing; "
                    "read both tilts at each distance before moving on"
                )
            weight = np.array([row.sd_arcsec**-2 if known else 1.0 for row in chosen])
            place = np.array([[row.x_arcsec, row.y_arcsec] for row in chosen])
            means.append(weight @ place / weight.sum())
            variances.append(float(1 / weight.sum()))
        stops.append(_Stop(distance_mm, means[0], means[1], variances[0], variances[1]))
    return stops


def _refuse_few(distance_mm: F64, *, known: bool) -> None:
    different = np.unique(distance_mm).size
    if different < 2:
        raise BadInput(
            f"all rows stand at {distance_mm[0]:g} mm: move the mirror and read both tilts again"
        )
    if len(distance_mm) < 3 and not known:
        raise BadInput(
            "two stops without sd_arcsec tell no uncertainty: add a third distance, or give "
            "sd_arcsec in each row"
        )


def _covariance(fit: LinearFit, n: int, *, known: bool) -> tuple[F64, float, float]:
    """Covariance of (intercept, slope), its degrees of freedom, the factor on the rows' sd."""
    freedom = n - 2
    if not known:
        return fit.cofactor * fit.residual_sd**2, float(freedom), fit.residual_sd
    if freedom and fit.residual_sd**2 * freedom > chdtri(freedom, DOUBTFUL):
        return fit.cofactor * fit.residual_sd**2, float(freedom), fit.residual_sd
    return fit.cofactor, math.inf, 1.0


def _stations(
    stops: list[_Stop],
    step: F64,
    fit: LinearFit,
    variance: F64,
    ratio: float,
    ratio_variance: float,
) -> tuple[Station, ...]:
    """The way's tilt is the mean reading divided by what the defocus has made of the scale since
    the first stop, minus the first; the defocus counts in its uncertainty with the tilt itself.
    """
    first = stops[0]
    start = (first.low + first.high) / 2
    found = []
    for stop, length, var, residual in zip(stops, step, variance, fit.residuals, strict=True):
        gain = (1 - ratio * stop.distance_mm) / (1 - ratio * first.distance_mm)
        middle = (stop.low + stop.high) / 2
        way = middle / gain - start
        by_ratio = (stop.distance_mm - first.distance_mm) * middle
        noise = 0.0 if stop is first else (var + variance[0]) / 4
        u = np.sqrt(noise + by_ratio**2 * ratio_variance)
        found.append(
            Station(
                distance_mm=stop.distance_mm,
                step_arcsec=float(length),
                step_sd_arcsec=math.sqrt(var),
                residual_arcsec=float(residual),
                way_x_arcsec=float(way[0]),
                way_y_arcsec=float(way[1]),
                way_x_u_arcsec=float(u[0]),
                way_y_u_arcsec=float(u[1]),
            )
        )
    return tuple(found)


def _warnings(fit: LinearFit, design: F64, sd: F64, *, widened: float, known: bool) -> list[str]:
    found = []
    if len(sd) == 2:
        found.append("two stops only: nothing checks that the step repeats")
    if known and widened > 1:
        found.append(
            "the differences scatter more than their uncertainties allow, so the uncertainty is "
            f"widened {widened:.1f} times: the step may not repeat"
        )
    worst = _odd_one_out(fit, design, sd, known=known)
    if worst is not None:
        found.append(
            f"the difference at {design[worst, 1]:g} mm is {abs(fit.residuals[worst]):.2g}″ off "
            "the line of the others: read this distance again"
        )
    return found


def _odd_one_out(fit: LinearFit, design: F64, sd: F64, *, known: bool) -> int | None:
    """The stop that the others contradict, if one does.

    Its residual over the uncertainty it must have, from the rows or else from the scatter of the
    other stops (externally studentised: R. D. Cook, S. Weisberg, Residuals and Influence in
    Regression, 1982, 2.2.1); improbable even for the worst of so many.
    """
    n = len(sd)
    if n < 4:
        return None
    leverage = np.einsum("ij,jk,ik->i", design, fit.cofactor, design) / sd**2
    of_sd = fit.residuals / sd / np.sqrt(1 - leverage)
    worst = int(np.argmax(np.abs(of_sd)))
    if abs(fit.residuals[worst]) < NO_DIFFERENCE_ARCSEC:
        return None
    if known:
        chance = 2 * ndtr(-abs(of_sd[worst]))
    else:
        others = (fit.residual_sd**2 * (n - 2) - of_sd[worst] ** 2) / (n - 3)
        chance = 2 * stdtr(n - 3, -abs(of_sd[worst]) / math.sqrt(max(others, 1e-300)))
    return worst if chance * n < UNLIKELY else None
