"""What the mirror's distance does to a reading, and how far off the return still comes back whole.

Thin lens, paraxial. A ray leaves the reticle's centre, crosses the objective at height h, meets a
mirror tilted by t at the distance L, crosses the objective again at H = h + 2 t L and lands on a
sensor d beyond the focus (focal length f) at (f + d) 2 t - H d / f. The image's place is the mean
over the rays that come back, divided by 2 f:

    reading = t (1 + d / f) - <H> d / (2 f^2)

- A mirror that is centred and smaller than the beam chooses the rays: <h> = 0 and <H> = 2 t L.
- Where the objective cuts the return instead, the rays kept lie evenly about the middle of its two
  passages: <h> = -t L and <H> = t L. A reticle d_r beyond the focus sends the ray at h off with the
  slope -h d_r / f^2, whose mean t L d_r / f^2 now counts as well.

With sensor and reticle off by the same amount a clipped return shows nothing at all.
"""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import Any

import numpy as np

from readout.errors import BadInput
from readout.model import F64
from readout.units import ARCSEC_PER_RAD

MM_PER_M = 1e3


def shift_per_metre(
    tilt_arcsec: F64 | float, *, defocus_mm: float, focal_length_mm: float
) -> np.float64 | F64:
    """Change of the reading with the mirror's distance, arc-seconds per metre, -t d / f^2.

    For a mirror that is centred and smaller than the beam, its return unclipped. ``tilt_arcsec``
    from the optical axis, any shape; ``defocus_mm`` > 0 for a sensor beyond the focus, seen from
    the objective. Where the reticle lies does not matter.
    """
    _positive("focal length", focal_length_mm)
    return np.multiply(tilt_arcsec, -defocus_mm / focal_length_mm**2 * MM_PER_M)


def clipped_shift_per_metre(
    tilt_arcsec: F64 | float,
    *,
    defocus_mm: float,
    reticle_defocus_mm: float,
    focal_length_mm: float,
) -> np.float64 | F64:
    """The same where the objective clips the return, -t (d - d_r) / (2 f^2).

    ``reticle_defocus_mm`` > 0 for a reticle further from the objective than the focus.
    """
    apart_mm = defocus_mm - reticle_defocus_mm
    return shift_per_metre(tilt_arcsec, defocus_mm=apart_mm / 2, focal_length_mm=focal_length_mm)


@dataclass(frozen=True, slots=True)
class ClearRange:
    """Tilts from the optical axis, either side, that a mirror at a distance can be read at.

    Up to ``whole_arcsec`` the return comes back whole, beyond ``gone_arcsec`` none of it does.
    """

    distance_mm: float
    whole_arcsec: float
    gone_arcsec: float

    def words(self) -> str:
        """One sentence for a person."""
        if self.whole_arcsec == 0:
            whole = "the return is clipped at any tilt (the mirror fills the objective)"
        else:
            whole = f"the return is whole up to {self.whole_arcsec:.0f}″"
        return f"at {self.distance_mm:.0f} mm {whole} and gone at {self.gone_arcsec:.0f}″"

    def document(self) -> dict[str, Any]:
        """As JSON."""
        return {
            "distance_mm": self.distance_mm,
            "whole_arcsec": self.whole_arcsec,
            "gone_arcsec": self.gone_arcsec,
        }


def clear_range(distance_mm: float, *, objective_mm: float, mirror_mm: float) -> ClearRange:
    """Where vignetting begins, and where the return is gone, for a mirror centred on the axis.

    ``objective_mm``, ``mirror_mm``: free diameters. The return arrives at the objective displaced
    by L tan 2t, as a disc as wide as the mirror, or as the beam where the mirror is wider. Raises
    BadInput unless all three are positive.
    """
    _positive("distance", distance_mm)
    _positive("objective's diameter", objective_mm)
    _positive("mirror's diameter", mirror_mm)
    beam_mm = min(mirror_mm, objective_mm)
    whole, gone = (
        math.atan2(way_mm / 2, distance_mm) / 2 * ARCSEC_PER_RAD
        for way_mm in (objective_mm - beam_mm, objective_mm + beam_mm)
    )
    return ClearRange(distance_mm, whole, gone)


def _positive(what: str, value: float) -> None:
    if not (value > 0 and math.isfinite(value)):
        raise BadInput(f"a {what} of {value:g} mm cannot be: give a positive number")
