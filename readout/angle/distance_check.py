"""Is the sensor in the focal plane? The check with two tilts at several distances.

A mirror moved along a way does two things to a reading: a sensor d beyond the focus makes it
shrink with the distance L (``distance``), and the way, never straight, tilts the mirror. So at
each distance two tilts are read, a repeatable step apart. The way's tilt is in both and drops out
of their difference D, which knows the defocus alone:

    D = S (1 + d / f - L d / f^2),   a straight line in L of intercept a and slope b,
    d = r f^2 / (1 - r f)   with r = -b / a.

Only the ratio counts: neither the step nor the scale of the readings need be known. With d in hand
the mean of the two readings, freed of it, is what the way did.
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass
from itertools import groupby
from typing import Any

import numpy as np
from scipy.special import chdtri, stdtrit

from readout.angle.distance import clear_range, shift_per_metre
from readout.angle.distance_rows import DistanceRow
from readout.errors import BadInput
from readout.least_squares import LinearFit, linear_least_squares
from readout.model import F64
from readout.rows import rounded
from readout.units import decimals_for, signed

SCHEMA = "readout.distance_check/1"

EXAMPLE_TILT_ARCSEC = 600.0
LEAST_STEP_SD = 20.0
"""A step this many times its own uncertainty is a step."""
SUSPICIOUS_SD = 4.0
DOUBTFUL = 0.05
"""Residuals this unlikely to be so large by chance widen the uncertainty."""
EVEN_CHANCE = 0.975
"""Student's quantile for 95 % on both sides."""


@dataclass(frozen=True, slots=True)
class Station:
    """What one stop of the mirror told.

    ``step_arcsec``: difference of the two tilts along the mean step, ``residual_arcsec`` from the
    fitted line. ``way_*_arcsec``: how the way has tilted the mirror since the first station, with
    the defocus taken out; NaN for an axis that was not read.
    """

    distance_mm: float
    step_arcsec: float
    step_sd_arcsec: float
    residual_arcsec: float
    way_x_arcsec: float
    way_y_arcsec: float
    way_x_u_arcsec: float
    way_y_u_arcsec: float


@dataclass(frozen=True, slots=True)
class DistanceCheck:
    """Where the sensor lies, with its standard uncertainty, and what the way did.

    ``defocus_mm`` > 0: beyond the focus, seen from the objective. ``freedom``: degrees of freedom
    of ``defocus_u_mm``; infinite where the readings' own uncertainties were known and held.
    ``step_arcsec``: length of the step at the first distance.
    """

    defocus_mm: float
    defocus_u_mm: float
    freedom: float
    focal_length_mm: float
    step_arcsec: float
    stations: tuple[Station, ...]
    warnings: tuple[str, ...]

    @property
    def expanded_u_mm(self) -> float:
        """Half the width of the interval that holds the defocus with 95 % confidence."""
        return float(_student(self.freedom)) * self.defocus_u_mm

    @property
    def in_focus(self) -> bool:
        """True if no defocus has been shown."""
        return abs(self.defocus_mm) <= self.expanded_u_mm

    def words(self) -> tuple[str, ...]:
        """What to say to a person, the warnings apart."""
        decimals = decimals_for(self.expanded_u_mm, most=3)
        within = f"± {self.expanded_u_mm:.{decimals}f} mm (95 %)"
        off_mm = f"{abs(self.defocus_mm):.{decimals}f} mm"
        if self.in_focus:
            where = f"no defocus shown: the sensor lies in the focal plane to within {within}"
            if self.defocus_mm:
                where += f", the best guess being {signed(self.defocus_mm, decimals)} mm"
        else:
            beyond = self.defocus_mm > 0
            where = (
                f"the sensor lies {off_mm} {'beyond' if beyond else 'short of'} the focal plane, "
                f"{within}: move it {'towards' if beyond else 'away from'} the objective by as much"
            )
        shift = float(
            shift_per_metre(
                EXAMPLE_TILT_ARCSEC,
                defocus_mm=self.defocus_mm,
                focal_length_mm=self.focal_length_mm,
            )
        )
        effect = (
            f"as it stands, a mirror at {EXAMPLE_TILT_ARCSEC:.0f}″ seems to turn by "
            f"{signed(shift, 2)}″ for each metre it is moved away"
        )
        return (where, effect, *self._way_words())

    def _way_words(self) -> list[str]:
        said = []
        for axis in ("x", "y"):
            way = np.array([getattr(s, f"way_{axis}_arcsec") for s in self.stations])
            u = np.array([getattr(s, f"way_{axis}_u_arcsec") for s in self.stations])
            if np.isfinite(way).all():
                worst = float(u.max())
                said.append(
                    f"the way itself tilts the mirror by {np.ptp(way):.{decimals_for(worst)}f}″ in "
                    f"{axis} over these distances (u at most {worst:.2g}″)"
                )
        return said

    def document(self) -> dict[str, Any]:
        """As JSON."""
        return {
            "schema": SCHEMA,
            "defocus_mm": rounded(self.defocus_mm),
            "defocus_u_mm": rounded(self.defocus_u_mm),
            "defocus_expanded_u_mm": rounded(self.expanded_u_mm),
            "freedom": rounded(self.freedom),
            "in_focus": self.in_focus,
            "focal_length_mm": self.focal_length_mm,
            "step_arcsec": rounded(self.step_arcsec),
            "stations": [
                {name: rounded(getattr(station, name)) for name in Station.__slots__}
                for station in self.stations
            ],
            "words": list(self.words()),
            "warnings": list(self.warnings),
        }


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

    fit = linear_least_squares(
        np.stack([np.ones_like(distance), distance], axis=1), step, 1 / variance
    )
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
            _warnings(fit, np.sqrt(variance) * widened, distance, widened=widened, known=known)
            + ([] if objective_mm and mirror_mm else [_UNCLIPPED])
        ),
    )


_UNCLIPPED = (
    "whether the return was clipped was not checked, and a clipped return hides the defocus: give "
    "the diameters of objective and mirror"
)


def _student(freedom: float) -> float:
    return float(stdtrit(freedom, EVEN_CHANCE)) if math.isfinite(freedom) else 1.959964


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


def _warnings(fit: LinearFit, sd: F64, distance: F64, *, widened: float, known: bool) -> list[str]:
    found = []
    if len(distance) == 2:
        found.append("two stops only: nothing checks that the step repeats")
    if known and widened > 1:
        found.append(
            "the differences scatter more than their uncertainties allow, so the uncertainty is "
            f"widened {widened:.1f} times: the step may not repeat"
        )
    found += [
        f"the difference at {distance[i]:g} mm is {abs(fit.residuals[i]) / sd[i]:.1f} sd off: "
        "read this distance again"
        for i in np.flatnonzero(np.abs(fit.residuals) > SUSPICIOUS_SD * sd)
    ]
    return found
