"""A crosshair anywhere in a frame, without knowing where: a rough line for each arm.

The picture is averaged and summed along short stretches of every slope; stretches that stand out
vote for straight lines. A line that enough bands agree on may be an arm. Nothing is assumed of
place, brightness, width, polarity or turn; upright and level arms are sought each by itself.
"""

from __future__ import annotations

import cv2
import numpy as np

from readout.model import Pixels
from readout.sighting.agree import LEAST_OF_STRONGEST, AgreedLine, lines_of
from readout.sighting.companions import with_companions
from readout.sighting.distinct import without_doubles, without_valleys
from readout.sighting.fold import Line
from readout.sighting.peaks import peaks_of
from readout.sighting.rough import RoughArm, RoughArms
from readout.sighting.stretches import F32, averaged, stretches_of

__all__ = ["RoughArm", "RoughArms", "find_arms"]

MOST_ARMS = 6


def find_arms(pixels: Pixels) -> RoughArms:
    """What may be an arm in a picture (height, width) about which nothing is known. Never raises.

    Upright lines are turned by up to 47 degrees from the picture's vertical, level ones from its
    horizontal: a line near 45 degrees may be in both lists.
    """
    if pixels.size == 0:
        return RoughArms((), ())
    small, step_px = averaged(pixels)
    across = np.asarray(cv2.transpose(small), dtype=np.float32)
    return RoughArms(_arms(pixels, small, step_px), _arms(pixels.T, across, step_px))


def _arms(pixels: Pixels, small: F32, step_px: int) -> tuple[RoughArm, ...]:
    """Arms upright in a picture and in its average."""
    stretches = stretches_of(small)
    peaks = None if stretches is None else peaks_of(stretches, step_px)
    if peaks is None:
        return ()
    arms: list[RoughArm] = []
    plainer_first = sorted(zip((1, -1), peaks, strict=True), key=lambda of: -of[1].height.sum())
    for polarity, of_polarity in plainer_first:
        strongest = max(map(_strength, arms), default=0.0)
        arms += [_in_pixels(line, polarity, step_px) for line in lines_of(of_polarity, strongest)]
    if not arms:
        return ()
    arms.sort(key=_strength, reverse=True)
    first, *companions = with_companions(pixels, arms[0], step_px)
    last_row = pixels.shape[0] - 1
    others = without_doubles(arms[1:], companions, last_row)
    arms = without_valleys([first, *companions, *others], last_row)
    arms.sort(key=_strength, reverse=True)
    least = LEAST_OF_STRONGEST * arms[0].strength
    return tuple(arm for arm in arms[:MOST_ARMS] if arm.strength > least)


def _strength(arm: RoughArm) -> float:
    return arm.strength


def _in_pixels(found: AgreedLine, polarity: int, step_px: int) -> RoughArm:
    line = Line(
        (found.line.middle_x + 0.5) * step_px - 0.5,
        found.line.slope,
        (found.line.middle_y + 0.5) * step_px - 0.5,
    )
    return RoughArm(line, polarity, found.width * step_px, found.strength)
