"""The uncertainty budget of one angle, or of the difference of two.

What acts on the tilt X (for Y the letters change places):

- *noise* and *averaging*: from the pictures. A mean of n pictures has the noise of one over
  sqrt(n); what its scatter shows beyond that (air, vibration) is the line "averaging".
- *calibration*: the covariance of its parameters at this place, or for the difference, where an
  uncertain scale counts with the difference and an uncertain axis hardly at all.
- *optical axis*: the place of p0 in the picture changes the scale with the tilt. Where the axis
  lies is not part of it: an absolute tilt counts from the calibration's p0, whatever that is.
- *cross-talk*: a mirror turned by rho about the optical axis shows rho Y in X.
- *cosine*: an axis eps from square to the optical axis shows cos(eps) of the angle. The error,
  1 - cos(eps) at most, has one sign; it is not corrected for and counted as limits on both sides.
- *creep*: the sensor moves across the optical axis by so much a kelvin.
- *air*: in a gradient g of temperature across a path L the beam bends by L g dn/dT each way, so
  that the reading is off by that much. dn/dT = -0.93e-6 /K at 20 C (value from memory).
"""

from __future__ import annotations

import math
from dataclasses import dataclass, replace

import numpy as np

from readout.angle.budget import LEVEL, Budget, Contribution, Standing, absent, within
from readout.angle.budget_conditions import (
    AXIS_ERROR_DEG,
    CREEP_UM_PER_K,
    GRADIENT_K_PER_M,
    P0_PX,
    ROLL_MRAD,
    Conditions,
)
from readout.angle.calibration import Calibration
from readout.errors import BadInput
from readout.units import ARCSEC_PER_RAD

AIR_INDEX_PER_K = 0.93e-6
NO_CONDITIONS = Conditions()
_NO_ZERO = "no zero set: the tilt counts from the optical axis"


@dataclass(frozen=True, slots=True)
class Seen:
    """Where the return lay, and what the pictures say of the noise.

    ``cov_px2``: covariance (xx, xy, yy) of one picture, None if not known. ``n``: pictures
    averaged. ``x_se_arcsec, y_se_arcsec``: standard error of the mean by its scatter, None if not
    known; ``freedom``: its degrees of freedom, n - 1 where not given.
    """

    x_px: float
    y_px: float
    cov_px2: tuple[float, float, float] | None = None
    n: int = 1
    x_se_arcsec: float | None = None
    y_se_arcsec: float | None = None
    freedom: float | None = None

    def __post_init__(self) -> None:
        if not (math.isfinite(self.x_px) and math.isfinite(self.y_px)):
            raise BadInput("nothing was sighted here: a budget needs a reading of both axes")
        if self.n < 1:
            raise BadInput(f"an average of {self.n} readings cannot be: give one at least")

    @property
    def se_arcsec(self) -> tuple[float | None, float | None]:
        return self.x_se_arcsec, self.y_se_arcsec

    @property
    def scatter_freedom(self) -> float:
        return float(max(1, self.n - 1)) if self.freedom is None else self.freedom


def seen_at(
    calibration: Calibration,
    x_arcsec: float,
    y_arcsec: float,
    *,
    n: int = 1,
    x_se_arcsec: float | None = None,
    y_se_arcsec: float | None = None,
) -> Seen:
    """A zero or an average, which is kept as a tilt, as the place where its return lies."""
    x_px, y_px = calibration.position(x_arcsec, y_arcsec)
    return Seen(float(x_px), float(y_px), n=n, x_se_arcsec=x_se_arcsec, y_se_arcsec=y_se_arcsec)


@dataclass(frozen=True, slots=True)
class TiltBudget:
    """The budgets of both axes, in arc-seconds."""

    x: Budget
    y: Budget


def reading_budget(
    calibration: Calibration,
    seen: Seen,
    conditions: Conditions = NO_CONDITIONS,
    *,
    zero: Seen | None = None,
    level: float = LEVEL,
) -> TiltBudget:
    """The budgets of a tilt, or with ``zero`` of its difference from the tilt there.

    Raises BadInput for a position that is no number, and for a line of the user's with a name that
    the budget has itself.
    """
    one = _Case(calibration, seen, conditions, zero)
    x, y = (
        Budget(
            f"{'XY'[axis]} tilt{'' if zero is None else ' from zero'}",
            one.change_arcsec[axis],
            "arcsec",
            one.lines(axis),
            level=level,
        )
        for axis in (0, 1)
    )
    return TiltBudget(x, y)


class _Case:
    """One reading with all that is known of it; each method makes the lines of one cause."""

    def __init__(
        self, calibration: Calibration, seen: Seen, conditions: Conditions, zero: Seen | None
    ) -> None:
        self.calibration, self.seen, self.given, self.zero = calibration, seen, conditions, zero
        self.tilt_arcsec = _tilt(calibration, seen)
        start = (0.0, 0.0) if zero is None else _tilt(calibration, zero)
        self.change_arcsec = self.tilt_arcsec[0] - start[0], self.tilt_arcsec[1] - start[1]

    def lines(self, axis: int) -> tuple[Contribution, ...]:
        further = (self.given.further_x, self.given.further_y)[axis]
        return (
            self._noise(axis),
            self._averaging(axis),
            self._calibration(axis),
            self._optical_axis(axis),
            *self._linearity(),
            self._zero_noise(axis),
            self._drift(),
            self._crosstalk(axis),
            self._cosine(axis),
            self._creep(axis),
            self._air(),
            self._seating(),
            *further,
        )

    def _picture_sd(self, seen: Seen, axis: int) -> float | None:
        """Noise of the mean of n pictures from the covariance of one, arcsec."""
        if seen.cov_px2 is None or not all(map(math.isfinite, seen.cov_px2)):
            return None
        cov = self.calibration.noise_cov(seen.x_px, seen.y_px, seen.cov_px2)
        return math.sqrt(cov[axis, axis] / seen.n)

    def _noise(self, axis: int) -> Contribution:
        sd = self._picture_sd(self.seen, axis)
        if sd is not None:
            n = self.seen.n
            return Contribution(
                "noise",
                sd,
                "arcsec",
                common=False,
                standing=Standing.MEASURED,
                note="of one picture" if n == 1 else f"mean of {n} pictures",
            )
        if _known(self.seen.se_arcsec[axis]) is not None:
            note = "contained in averaging"
            return absent("noise", "arcsec", note, standing=Standing.NOT_APPLICABLE)
        return absent("noise", "arcsec", "no picture was measured here")

    def _averaging(self, axis: int) -> Contribution:
        se, sd = _known(self.seen.se_arcsec[axis]), self._picture_sd(self.seen, axis)
        if se is not None:
            return Contribution(
                "averaging",
                math.sqrt(max(0.0, se**2 - (sd or 0.0) ** 2)),
                "arcsec",
                freedom=self.seen.scatter_freedom,
                common=False,
                standing=Standing.MEASURED,
                note="scatter of the readings" + ("" if sd is None else " beyond their noise"),
            )
        if self.seen.n == 1:
            note = "one picture: nothing was averaged"
            return absent("averaging", "arcsec", note, standing=Standing.NOT_APPLICABLE)
        return absent("averaging", "arcsec", "scatter of the readings not known")

    def _calibration(self, axis: int) -> Contribution:
        made = self.calibration
        if not np.any(made.param_cov):
            return absent("calibration", "arcsec", "the calibration does not say how good it is")
        if self.zero is None:
            cov = made.calibration_cov(self.seen.x_px, self.seen.y_px)
        else:
            cov = made.difference_cov(
                self.seen.x_px, self.seen.y_px, self.zero.x_px, self.zero.y_px
            )
        nominal = made.method == "nominal"
        return Contribution(
            "calibration",
            math.sqrt(max(0.0, float(cov[axis, axis]))),  # rounding may make it -0
            "arcsec",
            standing=Standing.DEFAULT if nominal else Standing.MEASURED,
            note=f"{made.method}; focal length ± {self._focal_percent():.2g} %",
        )

    def _focal_percent(self) -> float:
        return 100 * self.calibration.focal_length_px_sd / self.calibration.focal_length_px

    def _optical_axis(self, axis: int) -> Contribution:
        measured = self.calibration.param_cov[4][4] > 0 or self.calibration.param_cov[5][5] > 0
        if measured and self.given.p0_px is None:
            note = "contained in the calibration"
            return absent("optical axis", "px", note, standing=Standing.NOT_APPLICABLE)
        cov = np.zeros((7, 7))
        cov[4, 4] = cov[5, 5] = 1.0
        by_p0 = replace(self.calibration, param_cov=tuple(map(tuple, cov.tolist())))
        start = self.calibration.p0_px
        if self.zero is not None:
            start = self.zero.x_px, self.zero.y_px
        per_px2 = by_p0.difference_cov(self.seen.x_px, self.seen.y_px, *start)
        return self._limits(
            "optical axis",
            self.given.p0_px,
            P0_PX,
            "px",
            math.sqrt(max(0.0, float(per_px2[axis, axis]))),
            "its place in the picture",
        )

    def _linearity(self) -> tuple[Contribution, ...]:
        names = ["linearity"] if self.zero is None else ["linearity", "linearity at the zero"]
        limit, rms = self.given.linearity_arcsec, self.calibration.residual_rms_arcsec
        if limit is not None:
            shape = self.given.linearity_distribution
            return tuple(within(name, limit, "arcsec", distribution=shape) for name in names)
        if rms is not None and self.calibration.n > 0:
            note = "what the calibration left over, rms"
            return tuple(
                Contribution(name, rms, "arcsec", standing=Standing.DEFAULT, note=note)
                for name in names
            )
        return tuple(absent(name, "arcsec", "no residuals show it") for name in names)

    def _zero_noise(self, axis: int) -> Contribution:
        if self.zero is None:
            return absent("zero", "arcsec", _NO_ZERO, standing=Standing.NOT_APPLICABLE)
        se, sd = _known(self.zero.se_arcsec[axis]), self._picture_sd(self.zero, axis)
        if se is None and sd is None:
            return absent("zero", "arcsec", "its noise is not known")
        larger = max(se or 0.0, sd or 0.0)
        return Contribution(
            "zero",
            larger,
            "arcsec",
            freedom=self.zero.scatter_freedom if se == larger else math.inf,
            standing=Standing.MEASURED,
            note="of one picture" if self.zero.n == 1 else f"mean of {self.zero.n} readings",
        )

    def _drift(self) -> Contribution:
        name = "drift since zero"
        if self.zero is None:
            return absent(name, "arcsec", _NO_ZERO, standing=Standing.NOT_APPLICABLE)
        rate, hours = self.given.drift_arcsec_per_h, self.given.since_zero_h
        if rate == 0 or hours == 0:
            return within(name, 0.0, "arcsec/h", sensitivity=hours or 0.0)
        if rate is None or hours is None:
            return absent(name, "arcsec/h", "needs drift and time since the zero")
        return within(name, rate, "arcsec/h", sensitivity=hours, note=f"over {hours:g} h")

    def _crosstalk(self, axis: int) -> Contribution:
        other = self.tilt_arcsec[1 - axis] * (-1, 1)[axis]
        note = "turn of the mirror about the optical axis, times the other tilt"
        return self._limits(
            "cross-talk", self.given.roll_mrad, ROLL_MRAD, "mrad", other * 1e-3, note
        )

    def _cosine(self, axis: int) -> Contribution:
        given = self.given.axis_error_deg
        angle_deg = AXIS_ERROR_DEG if given is None else given
        return within(
            "cosine",
            2 * math.sin(math.radians(angle_deg) / 2) ** 2,
            "1",
            sensitivity=self.change_arcsec[axis],
            standing=Standing.DEFAULT if given is None else Standing.STATED,
            note=f"axis within {angle_deg:g}° of square",
        )

    def _creep(self, axis: int) -> Contribution:
        pitch_um, given = self.calibration.pitch_um, self.given
        rate, change_k = given.creep_um_per_k, given.temperature_change_k
        if rate == 0 or change_k == 0:
            return within("creep", 0.0, "K")
        if change_k is None:
            return absent("creep", "K", "change of temperature not known")
        if pitch_um is None:
            return absent("creep", "K", "the calibration does not know the pixel's pitch")
        um_per_k = CREEP_UM_PER_K if rate is None else rate
        per_um = self.calibration.scale_arcsec_per_px[axis] / pitch_um
        return within(
            "creep",
            change_k,
            "K",
            sensitivity=um_per_k * per_um,
            standing=Standing.DEFAULT if rate is None else Standing.STATED,
            note=f"{um_per_k:g} µm/K",
        )

    def _air(self) -> Contribution:
        path_m, gradient = self.given.path_m, self.given.gradient_k_per_m
        if path_m == 0 or gradient == 0:
            return within("air", 0.0, "K/m")
        if path_m is None:
            return absent("air", "K/m", "distance of the mirror not known")
        per_gradient = path_m * AIR_INDEX_PER_K * ARCSEC_PER_RAD
        return self._limits(
            "air", gradient, GRADIENT_K_PER_M, "K/m", per_gradient, f"gradient over {path_m:g} m"
        )

    def _seating(self) -> Contribution:
        if self.given.seating_arcsec is None:
            return absent("seating", "arcsec", "0 for a mirror that stays where it is")
        # New with each setting down, but the readings of one share it: no average lessens it.
        note = "new each time it is set down"
        return within("seating", self.given.seating_arcsec, "arcsec", note=note)

    @staticmethod
    def _limits(
        name: str, given: float | None, usual: float, unit: str, sensitivity: float, note: str
    ) -> Contribution:
        """Limits as given, else the usual ones, marked as such."""
        return within(
            name,
            usual if given is None else given,
            unit,
            sensitivity=sensitivity,
            standing=Standing.DEFAULT if given is None else Standing.STATED,
            note=note,
        )


def _tilt(calibration: Calibration, seen: Seen) -> tuple[float, float]:
    x, y = calibration.tilt(seen.x_px, seen.y_px)
    return float(x), float(y)


def _known(value: float | None) -> float | None:
    return value if value is not None and math.isfinite(value) else None
