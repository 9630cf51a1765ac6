"""Is the sensor in the focal plane? The check with two tilts at several distances.

A mirror moved along a way does two things to a reading: a sensor d beyond the focus makes it
shrink with the distance L (``distance``), and the way, never straight, tilts the mirror. So at
each distance two tilts are read, a repeatable step apart. The way's tilt is in both and drops out
of their difference D, which knows the defocus alone:

    D = S (1 + d / f - L d / f^2),   a straight line in L of intercept a and slope b,
    d = r f^2 / (1 - r f)   with r = -b / a.

Only the ratio counts: neither the step nor the scale of the readings need be known. With d in hand
the mean of the two readings, freed of it, is what the way did. Here is what comes of it;
``distance_fit`` finds it.
"""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import Any

import numpy as np
from scipy.special import ndtri, stdtrit

from readout.angle.distance import shift_per_metre
from readout.rows import rounded
from readout.units import decimals_for, signed

SCHEMA = "readout.distance_check/1"

EXAMPLE_TILT_ARCSEC = 600.0
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


def _student(freedom: float) -> float:
    return (
        float(stdtrit(freedom, EVEN_CHANCE))
        if math.isfinite(freedom)
        else float(ndtri(EVEN_CHANCE))
    )
