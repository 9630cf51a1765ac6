"""Is it linear? What the residuals of a calibration follow, if they follow anything.

Against the angle: a curve (quadratic and cubic together). Within the pixel: a sine of one cycle a
pixel, as a centroid makes that takes the pixels for points, of half a pixel, and of two pixels, as
the pattern of a colour sensor makes. Against the angle, whatever periods the user suspects: a
turn of the stage's screw, a tooth of its wheel.

Each is tested against chance (``periodic``); what is found first, the least likely, is taken out
before the next is looked for. The probability to find anything where there is nothing is that of
``FALSE_ALARM`` for all tests together (Bonferroni).
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np
from scipy.special import fdtrc

from readout.angle.calibration import Calibration
from readout.angle.periodic import PeriodicError, fit_periodic, polynomial, sine_columns
from readout.errors import BadInput
from readout.least_squares import linear_least_squares
from readout.model import F64
from readout.rows import rounded

SCHEMA = "readout.linearity/1"
PIXEL_PERIODS_PX = (1.0, 0.5, 2.0)
FALSE_ALARM = 0.01
LEAST_POINTS = 10
CURVE_DEGREE = 3


@dataclass(frozen=True, slots=True)
class Curve:
    """The quadratic and cubic part of the residuals.

    ``departure_arcsec``: half its peak-to-valley over the range, ``chance`` as in PeriodicError.
    """

    departure_arcsec: float
    chance: float


@dataclass(frozen=True, slots=True)
class Linearity:
    """What the residuals of one axis follow.

    ``tests``: in how many ways chance could have raised a false alarm. ``periodic``: every period
    asked for. ``largest_at_arcsec``: the angle of the largest residual.
    """

    axis: str
    n: int
    rms_arcsec: float
    largest_arcsec: float
    largest_at_arcsec: float
    curve: Curve
    periodic: tuple[PeriodicError, ...]
    tests: int

    @property
    def curved(self) -> bool:
        return self.curve.chance < FALSE_ALARM / self.tests

    @property
    def found(self) -> tuple[PeriodicError, ...]:
        """The periodic errors that are there, beyond chance."""
        return tuple(p for p in self.periodic if p.chance < FALSE_ALARM / self.tests)

    def words(self) -> tuple[str, ...]:
        """What to say to a person."""
        size = (
            f"{self.axis}: {self.n} points, residuals {self.rms_arcsec:.2g}″ rms, the largest "
            f"{abs(self.largest_arcsec):.2g}″ at {self.largest_at_arcsec:.0f}″"
        )
        said = [size]
        if self.curved:
            said.append(
                f"{self.axis}: the residuals follow a curve, ± {self.curve.departure_arcsec:.2g}″ "
                f"over the range (by chance: {self.curve.chance:.1g})"
            )
        said += [
            f"{self.axis}: a periodic error of {p.amplitude_arcsec:.2g}″ ± "
            f"{p.amplitude_u_arcsec:.1g}″, one cycle in {p.period_words} "
            f"(by chance: {p.chance:.1g})"
            for p in self.found
        ]
        clean = [p for p in self.periodic if p.told and p not in self.found]
        if clean:
            periods = ", ".join(p.period_words for p in clean)
            most = max(p.at_most_arcsec for p in clean)
            said.append(f"{self.axis}: none shown at {periods}; each is below {most:.2g}″ (95 %)")
        untold = [p.period_words for p in self.periodic if not p.told]
        if untold:
            said.append(
                f"{self.axis}: nothing can be said of {', '.join(untold)}, because the points lie "
                "too much alike within it: move by other fractions of it"
            )
        return tuple(said)

    def document(self) -> dict[str, Any]:
        """As JSON."""
        return {
            "schema": SCHEMA,
            "axis": self.axis,
            "n": self.n,
            "rms_arcsec": rounded(self.rms_arcsec),
            "largest_arcsec": rounded(self.largest_arcsec),
            "largest_at_arcsec": rounded(self.largest_at_arcsec),
            "curved": self.curved,
            "curve_departure_arcsec": rounded(self.curve.departure_arcsec),
            "curve_chance": float(f"{self.curve.chance:.3g}"),
            "false_alarm": FALSE_ALARM,
            "periodic": [p.document() | {"found": p in self.found} for p in self.periodic],
            "words": list(self.words()),
        }


def examine_linearity(
    axis: str,
    angle_arcsec: F64,
    residual_arcsec: F64,
    place_px: F64,
    *,
    pixel_periods_px: Sequence[float] = PIXEL_PERIODS_PX,
    angle_periods_arcsec: Sequence[float] = (),
) -> Linearity:
    """What the residuals (n,) of one axis follow, at angles (n,) and places (n, 2) x, y.

    Residuals are taken to be of one uncertainty. Rows with a NaN are left out. Raises BadInput,
    one line, for fewer than ten points, points at one angle only, or a period that cannot be.
    """
    for period in (*pixel_periods_px, *angle_periods_arcsec):
        if not (period > 0 and math.isfinite(period)):
            raise BadInput(f"a period of {period:g} cannot be: give a positive number")
    whole = np.isfinite(angle_arcsec) & np.isfinite(residual_arcsec)
    whole &= np.isfinite(place_px).all(axis=1)
    angle, residual, place = angle_arcsec[whole], residual_arcsec[whole], place_px[whole]
    if np.unique(angle).size < LEAST_POINTS:
        raise BadInput(
            f"{np.unique(angle).size} different angles in {axis} tell nothing of its linearity: "
            f"take {LEAST_POINTS} or more, at uneven steps"
        )
    wanted = [
        (name, place[:, column], period)
        for column, name in enumerate(("x_px", "y_px"))
        for period in pixel_periods_px
    ] + [("angle_arcsec", angle, period) for period in angle_periods_arcsec]
    tests = len(wanted) + 1
    worst = int(np.argmax(np.abs(residual)))
    return Linearity(
        axis=axis,
        n=len(angle),
        rms_arcsec=math.sqrt(float(np.mean(residual**2))),
        largest_arcsec=float(residual[worst]),
        largest_at_arcsec=float(angle[worst]),
        curve=_curve(angle, residual),
        periodic=_one_after_another(angle, residual, wanted, FALSE_ALARM / tests),
        tests=tests,
    )


def examine_calibration(
    calibration: Calibration, *, angle_periods_arcsec: Sequence[float] = ()
) -> tuple[Linearity, ...]:
    """The same for the residuals a calibration keeps, each axis that has enough of them.

    Raises BadInput if neither has.
    """
    found: list[Linearity] = []
    refused: BadInput | None = None
    rows = calibration.residuals
    place = np.array([[row.get("x_px"), row.get("y_px")] for row in rows], dtype=np.float64)
    place = place.reshape(-1, 2)
    for axis, angle in zip(("x", "y"), calibration.tilt(place[:, 0], place[:, 1]), strict=True):
        residual = np.array([row.get(f"{axis}_residual_arcsec") for row in rows], dtype=np.float64)
        try:
            found.append(
                examine_linearity(
                    axis, angle, residual, place, angle_periods_arcsec=angle_periods_arcsec
                )
            )
        except BadInput as error:
            refused = refused or error
    if refused and not found:
        raise refused
    return tuple(found)


def _curve(angle: F64, residual: F64) -> Curve:
    columns = polynomial(angle, CURVE_DEGREE)
    line, bent = (linear_least_squares(columns[:, :m], residual) for m in (2, CURVE_DEGREE + 1))
    before, left = (float(fit.residuals @ fit.residuals) for fit in (line, bent))
    freedom, extra = len(angle) - CURVE_DEGREE - 1, CURVE_DEGREE - 1
    part = line.residuals - bent.residuals
    ratio = max(0.0, before - left) / extra / (left / freedom) if left > 0 else math.inf
    return Curve(float(np.ptp(part)) / 2, float(fdtrc(extra, freedom, ratio)))


def _one_after_another(
    angle: F64, residual: F64, wanted: list[tuple[str, F64, float]], level: float
) -> tuple[PeriodicError, ...]:
    """Each period; the least likely, if found, joins what the others are seen beside."""
    done: dict[int, PeriodicError] = {}
    beside = polynomial(angle, CURVE_DEGREE)
    while len(done) < len(wanted):
        fits = {
            k: fit_periodic(place, residual, period, beside=beside, along=name)
            for k, (name, place, period) in enumerate(wanted)
            if k not in done
        }
        least = min(fits, key=lambda k: fits[k].chance if fits[k].told else math.inf)
        if not fits[least].chance < level:
            done.update(fits)
            break
        done[least] = fits[least]
        _, place, period = wanted[least]
        beside = np.concatenate([beside, sine_columns(place, period)], axis=1)
    return tuple(done[k] for k in range(len(wanted)))
