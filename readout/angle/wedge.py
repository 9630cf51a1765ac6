"""A wedge of glass of known angle as a standard, without anything that tilts.

*In transmission*, between the instrument and a mirror that rests: the beam passes the wedge twice
and each time is turned by its deviation asin(n sin a) - a towards the thick edge, twice the
deviation in all, which the instrument, halving, reads as the single deviation. Turned in its own
plane the wedge lets the reading run on a circle: all four elements of the calibration from one
known angle.

*Two returns*: both faces of a window send the beam back. In the glass the angle between the rays
is twice the wedge angle, outside asin(n sin 2a), of which the instrument reads half: n a for small
angles (law of refraction; M. V. R. K. Murty, in D. Malacara, Optical Shop Testing, value from
memory). Where the thick edge lies the rear face is farther away, so the rear return reads as a
mirror whose edge there is farther: it lies opposite to the thick edge.

Angles of turn are those of the thick edge, seen from behind the instrument: 0 to the right, 90 up.
"""

from __future__ import annotations

import math
from dataclasses import dataclass
from enum import StrEnum

import numpy as np

from readout.angle.tilt_set import SharedInput
from readout.errors import BadInput
from readout.model import F64
from readout.units import ARCSEC_PER_RAD


class WedgeIs(StrEnum):
    """How a wedge is used."""

    IN_TRANSMISSION = "in_transmission"
    TWO_RETURNS = "two_returns"


@dataclass(frozen=True, slots=True)
class Wedge:
    """``reading_arcsec``: by how much it changes the reading, with its standard uncertainty."""

    reading_arcsec: float
    reading_sd_arcsec: float


@dataclass(frozen=True, slots=True)
class WedgeTilts:
    """What the readings change by: ``tilt_arcsec`` (n, 2), ``across_sd_arcsec`` (n,)."""

    tilt_arcsec: F64
    across_sd_arcsec: F64
    shared: tuple[SharedInput, ...]


def deviation_arcsec(angle_arcsec: float, index: float) -> float:
    """Single-pass deviation of a ray that enters at right angles to one face.

    Raises BadInput for an angle or index that no window has.
    """
    inside = _inside(angle_arcsec, index)
    return (math.asin(index * math.sin(inside)) - inside) * ARCSEC_PER_RAD


def two_returns_arcsec(angle_arcsec: float, index: float) -> float:
    """Difference of the readings of both faces, the front one square to the beam."""
    inside = _inside(angle_arcsec, index)
    return 0.5 * math.asin(index * math.sin(2 * inside)) * ARCSEC_PER_RAD


def angle_of_two_returns(reading_arcsec: float, index: float) -> float:
    """Wedge angle, arc-seconds, from the difference of both faces' readings."""
    beam = 2 * reading_arcsec / ARCSEC_PER_RAD
    return 0.5 * math.asin(math.sin(beam) / index) * ARCSEC_PER_RAD


def wedge_of_glass(
    wedge_is: WedgeIs,
    *,
    angle_arcsec: float,
    angle_sd_arcsec: float,
    index: float,
    index_sd: float,
) -> Wedge:
    """The wedge from its angle and refractive index at the lamp's colour, to first order."""
    reading = deviation_arcsec if wedge_is is WedgeIs.IN_TRANSMISSION else two_returns_arcsec
    value = reading(angle_arcsec, index)
    by_angle = (reading(angle_arcsec * 1.001, index) - value) / (angle_arcsec * 0.001)
    by_index = (reading(angle_arcsec, index + 1e-4) - value) / 1e-4
    return Wedge(value, math.hypot(by_angle * angle_sd_arcsec, by_index * index_sd))


def wedge_tilts(
    wedge: Wedge, turn_deg: F64, turn_sd_deg: F64, *, mark_sd_deg: float = 0.0
) -> WedgeTilts:
    """Changes of the reading for turns of the thick edge (n,), NaN for no wedge in the beam.

    The reading moves opposite to the thick edge. ``turn_sd_deg`` (n,): of one setting, new in each
    row. ``mark_sd_deg``: of the mark from which the turns are counted; it turns all rows together,
    and so the axes.
    """
    inserted = np.isfinite(turn_deg)
    turn = np.radians(np.where(inserted, turn_deg, 0.0))
    towards = np.stack([np.cos(turn), np.sin(turn)], axis=1) * inserted[:, None]
    tilt = -wedge.reading_arcsec * towards
    across = np.radians(turn_sd_deg) * wedge.reading_arcsec * inserted
    shared = []
    if wedge.reading_sd_arcsec > 0:
        share = wedge.reading_sd_arcsec / wedge.reading_arcsec
        shared.append(SharedInput("what the wedge is worth", share * tilt))
    if mark_sd_deg > 0:
        sideways = np.stack([-tilt[:, 1], tilt[:, 0]], axis=1)
        shared.append(SharedInput("mark of the wedge", math.radians(mark_sd_deg) * sideways))
    return WedgeTilts(tilt, across, tuple(shared))


def _inside(angle_arcsec: float, index: float) -> float:
    if not 0 < angle_arcsec < 36_000:
        raise BadInput(f"a wedge of {angle_arcsec:g}″ cannot be: give an angle up to 10°")
    if not 1 < index < 3:
        raise BadInput(f"a refractive index of {index:g} cannot be: give that of the glass")
    return angle_arcsec / ARCSEC_PER_RAD
