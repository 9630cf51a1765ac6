"""Two scales of one instrument, set against each other.

A factor of two has a cause of its own: what moves by an angle turns the beam by twice that angle,
and half the instruments mark the one, half the other. Such a ratio is therefore named, not
averaged away.
"""

from __future__ import annotations

import math
from dataclasses import dataclass
from enum import StrEnum

import numpy as np

from readout.angle.calibration import Calibration
from readout.angle.tilt_set import TiltSet
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


def ratio_of_steps(calibration: Calibration, tilts: TiltSet) -> ScaleVerdict | None:
    """Ratio of the steps that ``calibration`` measures to those that are known.

    Two frames are enough. For each axis in which the tilts step, the measured tilt is taken as a
    straight line over the known one; its slope counts whichever way it points, so that neither
    signs nor a turn of the axes matter. The longer of both axes is judged. None without a step.
    """
    measured = np.stack(calibration.tilt(tilts.position_px[:, 0], tilts.position_px[:, 1]), axis=1)
    best: tuple[float, ScaleVerdict] | None = None
    for axis in (0, 1):
        rows = np.flatnonzero(np.isfinite(tilts.tilt_arcsec[:, axis]))
        known = tilts.tilt_arcsec[rows, axis]
        centred = known - known.mean() if len(known) else known
        length = float(centred @ centred)
        if length <= 0 or (best is not None and length <= best[0]):
            continue
        weight = centred / length
        step = weight @ measured[rows]
        ratio = float(np.linalg.norm(step))
        place = float(weight**2 @ [_noise(calibration, tilts, int(row)) for row in rows])
        own = float(np.sum((weight * tilts.sd_arcsec[rows]) ** 2))
        shared = sum(float(weight @ s.tilt_arcsec[rows, axis]) ** 2 for s in tilts.shared)
        scale = calibration.focal_length_px_sd / calibration.focal_length_px
        ratio_u = math.sqrt(place + ratio**2 * (own + shared + scale**2))
        best = length, judge_ratio(ratio, ratio_u)
    return None if best is None else best[1]


def _noise(calibration: Calibration, tilts: TiltSet, row: int) -> float:
    """Variance of both tilts of a row together, arcsec^2, from the noise of its place."""
    x_px, y_px = tilts.position_px[row].tolist()
    xx, xy, yy = tilts.position_cov_px2[row].tolist()
    return float(np.trace(calibration.noise_cov(x_px, y_px, (xx, xy, yy))))


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
