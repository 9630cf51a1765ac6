"""What a division of a graduated scale means: never guessed, for half the instruments differ.

A mirror that tilts by an angle turns the beam by twice that angle. Some makers mark the one, some
the other; a scale marked in micrometres needs the focal length it stands in. Marks are ruled at
equal distances, so that a division is a constant step of the beam's slope; near the axis the slope
of a mirror's tilt t is 2t, of a beam's angle b it is b.
"""

from __future__ import annotations

import math
from dataclasses import dataclass
from enum import StrEnum

from readout.errors import BadInput
from readout.units import ARCSEC_PER_RAD

BOTH = (
    'say marked_as = "mirror_tilt" if a division is the angle of the mirror, or "beam_angle" if it '
    "is that of the returning beam, which turns by twice as much: half the instruments mark one, "
    "half the other, and a lever step shows which"
)


class MarkedAs(StrEnum):
    """Which angle a division is."""

    MIRROR_TILT = "mirror_tilt"
    BEAM_ANGLE = "beam_angle"

    @property
    def slope_per_angle(self) -> int:
        """By how much more than the marked angle the beam turns."""
        return 2 if self is MarkedAs.MIRROR_TILT else 1


@dataclass(frozen=True, slots=True)
class Division:
    """``slope``: step of the returning beam's slope from one mark to the next.

    ``rel_sd``: relative standard uncertainty of the scale as a whole (ruling, and the focal length
    where one was used), common to all marks; None where nobody has said. ``spacing_um``: distance
    of the marks, if that was given. ``told``: the division in words.
    """

    slope: float
    rel_sd: float | None
    told: str
    spacing_um: float | None = None


def division(
    *,
    spacing_arcsec: float | None = None,
    marked_as: MarkedAs | None = None,
    spacing_um: float | None = None,
    focal_length_mm: float | None = None,
    rel_sd: float | None = None,
    focal_length_rel_sd: float | None = None,
) -> Division:
    """A division by its angle and which angle that is, or by its width and the focal length.

    Raises BadInput where something is missing, contradictory or impossible.
    """
    given = {
        "spacing_arcsec": spacing_arcsec,
        "spacing_um": spacing_um,
        "focal_length_mm": focal_length_mm,
    }
    for name, value in given.items():
        if value is not None and not (value > 0 and math.isfinite(value)):
            raise BadInput(f"{name} is {value:g}: give a positive number")
    for name, share in (("rel_sd", rel_sd), ("focal_length_rel_sd", focal_length_rel_sd)):
        if share is not None and not 0 <= share < 1:
            raise BadInput(f"{name} is {share:g}: give a share of the whole, 0.001 for 0.1 %")
    if (spacing_arcsec is None) == (spacing_um is None):
        raise BadInput(
            "what a division of the scale means is not said: give spacing_arcsec with marked_as, "
            "or spacing_um with focal_length_mm, and not both"
        )
    if spacing_arcsec is not None:
        if marked_as is None:
            raise BadInput(f"spacing_arcsec = {spacing_arcsec:g} may mean two things: {BOTH}")
        if focal_length_mm is not None:
            raise BadInput(
                "a scale marked in angles needs no focal_length_mm: take it out, or give "
                "spacing_um in place of spacing_arcsec"
            )
        slope = marked_as.slope_per_angle * spacing_arcsec / ARCSEC_PER_RAD
        means = marked_as.replace("_", " ")
        return Division(slope, rel_sd, f"a division is {spacing_arcsec:g}″ of {means}")
    assert spacing_um is not None
    if marked_as is not None:
        raise BadInput("a scale marked in micrometres has no marked_as: take it out")
    if focal_length_mm is None:
        raise BadInput(
            f"spacing_um = {spacing_um:g} needs the focal_length_mm of the objective in whose "
            "focal plane the scale lies"
        )
    both = (
        None
        if None in (rel_sd, focal_length_rel_sd)
        else math.hypot(rel_sd or 0.0, focal_length_rel_sd or 0.0)
    )
    told = f"a division is {spacing_um:g} µm in the focal plane of {focal_length_mm:g} mm"
    return Division(spacing_um * 1e-3 / focal_length_mm, both, told, spacing_um)
