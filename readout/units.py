"""Units of small angles, and printing a number with the digits its uncertainty allows.

The radian is the coherent unit; a degree is pi/180 rad, a second of arc 1/3600 of a degree
(SI Brochure, 9th edition, table 8). ``mm/m`` is the slope, the tangent of the angle.
"""

from __future__ import annotations

import math
from enum import StrEnum

import numpy as np

from readout.model import F64

ARCSEC_PER_RAD = 180.0 * 3600.0 / math.pi

MINUS = "\N{MINUS SIGN}"
THIN_SPACE = "\N{NARROW NO-BREAK SPACE}"


class Unit(StrEnum):
    """A unit an angle can be shown in; logs and files always hold arc-seconds."""

    ARCSEC = "arcsec"
    URAD = "urad"
    MM_PER_M = "mm/m"


def from_arcsec(angle_arcsec: F64 | float, unit: Unit) -> F64:
    """Convert an angle in arc-seconds to ``unit``; any shape, NaN stays NaN."""
    rad = np.asarray(angle_arcsec, dtype=np.float64) / ARCSEC_PER_RAD
    match unit:
        case Unit.ARCSEC:
            return np.asarray(angle_arcsec, dtype=np.float64)
        case Unit.URAD:
            return rad * 1e6
        case Unit.MM_PER_M:
            return np.tan(rad) * 1e3


def decimals_for(sd: float, *, most: int = 6) -> int:
    """Decimals to print for a value of standard uncertainty ``sd``: two significant digits of it.

    The rule of the GUM (JCGM 100:2008, 7.2.6). ``most`` where sd is 0, negative or not finite.
    """
    if not math.isfinite(sd) or sd <= 0:
        return most
    return min(most, max(0, 1 - math.floor(math.log10(sd))))


def signed(value: float, decimals: int) -> str:
    """``value`` with its sign, a true minus and thin spaces between thousands; "–" for NaN."""
    if not math.isfinite(value):
        return "\N{EN DASH}"
    text = f"{abs(value):,.{decimals}f}".replace(",", THIN_SPACE)
    negative = value < 0 and float(f"{value:.{decimals}f}") != 0.0
    return (MINUS if negative else "+") + text
