"""Two scales of one instrument, set against each other.

A factor of two has a cause of its own: what moves by an angle turns the beam by twice that angle,
and half the instruments mark the one, half the other. Such a ratio is therefore named, not
averaged away.
"""

from __future__ import annotations

import math
from dataclasses import dataclass
from enum import StrEnum

from readout.angle.calibration import Calibration
from readout.errors import BadInput

NEAR = 0.1
"""a ratio within this share of 0.5 or 2, or within three uncertainties, is taken for it"""
COVERAGE = 3.0


class Ratio(StrEnum):
    """What a ratio of two scales says."""

    AGREES = "agrees"
    """1 within the uncertainties"""
    HALF = "half"
    DOUBLE = "double"
    DIFFERS = "differs"
    """none of them"""


@dataclass(frozen=True, slots=True)
class ScaleVerdict:
    """``ratio`` of the first scale to the second, its standard uncertainty, and what it says."""

    ratio: float
    ratio_u: float
    says: Ratio
    text: str


def compare_scales(one: Calibration, other: Calibration) -> ScaleVerdict:
    """Ratio of the tilt per pixel that ``one`` gives to the one that ``other`` gives.

    Both must be of the same picture size; their uncertainties are taken as independent of each
    other. Raises BadInput for pictures of different size.
    """
    sizes = [(c.image_width_px, c.image_height_px) for c in (one, other)]
    if sizes[0] != sizes[1]:
        raise BadInput(
            f"{one.id or 'the first calibration'} is for pictures of {sizes[0][0]} × "
            f"{sizes[0][1]} and the other for {sizes[1][0]} × {sizes[1][1]}: compare two of one "
            "camera and size"
        )
    ratio = other.focal_length_px / one.focal_length_px
    shares = [c.focal_length_px_sd / c.focal_length_px for c in (one, other)]
    return judge_ratio(ratio, ratio * math.hypot(*shares))


def judge_ratio(ratio: float, ratio_u: float) -> ScaleVerdict:
    """What a ratio of a measured to an expected angle, or of two scales, says."""
    said = f"the ratio is {ratio:.4g} ± {ratio_u:.2g}"
    factor = min((0.5, 1.0, 2.0), key=lambda f: abs(math.log(ratio / f)))
    off = abs(ratio / factor - 1)
    within = COVERAGE * ratio_u / factor
    if factor == 1.0 and off <= within:
        text = f"{said}: they agree within their uncertainties"
        return ScaleVerdict(ratio, ratio_u, Ratio.AGREES, text)
    if factor != 1.0 and off <= max(NEAR, within):
        text = (
            f"{said}, a factor of {factor:g}: one of them takes a beam's angle for a mirror's tilt"
        )
        return ScaleVerdict(ratio, ratio_u, Ratio.HALF if factor < 1 else Ratio.DOUBLE, text)
    return ScaleVerdict(
        ratio,
        ratio_u,
        Ratio.DIFFERS,
        f"{said}, and no factor of two explains it: measure lengths and heights again, and check "
        "that nothing was moved or focused in between",
    )


def refuse_factor_of_two(one: Calibration, other: Calibration) -> None:
    """Raise BadInput, naming both, where one scale is half or twice the other."""
    verdict = compare_scales(one, other)
    if verdict.says in (Ratio.HALF, Ratio.DOUBLE):
        raise BadInput(
            f"{one.method} against {other.method}: {verdict.text}; find out whether a division "
            "means mirror tilt or beam angle, then calibrate anew"
        )
