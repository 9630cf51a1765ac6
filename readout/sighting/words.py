"""When a found crosshair deserves a word of caution: each word with its threshold."""

from __future__ import annotations

import math

from readout.model import Quality, Return
from readout.sighting.arm import ArmFit
from readout.sighting.crossing import Cov, Cross

DIM_CONTRAST = 3.0
"""an arm less than this many pixel noises high is called dim"""
DIM_SD_PX = 0.03
"""so is a position less certain than this"""
SATURATED_SHARE = 0.002
AT_EDGE_WIDTHS = 2.0
RIVAL_SHARE = 0.25
"""a second return of more than this share of the main one's contrast could be the right one"""
UNLIKE_RATIO = 4.0
"""arms whose contrasts differ by more than this are of different things"""
HIDDEN_PX = 0.1
"""what a second return whose other arm hides in the main one's may pull it by"""
FOUND_SHARE = 0.5
"""but a line fitted beside the main arm with so much of its contrast is that other arm"""
HOLLOW_SHARE = 0.03
"""a profile with such a dip in its middle is two lines"""
VERY_LOPSIDED = 100.0
LOPSIDED_PX = 0.06
"""a profile whose sides differ by what would shift it so far has something beside it; by half of
that, if they differ by so much in variance"""
BLURRED_PX = 12.0
"""blur, standard deviation, beyond which a sharper setting is worth the trouble"""
ASTIGMATIC_RATIO = 1.25
"""the arms' profiles differ in spread: the mirror or the window in the way is bent"""


def words_of(
    shape: tuple[int, ...], x: float, y: float, cov: Cov, cross: Cross, others: tuple[Return, ...]
) -> Quality:
    """The words for one crossing in a picture of ``shape``."""
    arms = (cross.upright, cross.level)
    height, width = shape
    margin = AT_EDGE_WIDTHS * max(arm.width_px for arm in arms)
    spreads = sorted(math.sqrt(arm.shape.spread) for arm in arms)
    inside = margin <= x <= width - 1 - margin and margin <= y <= height - 1 - margin
    sd = math.sqrt(max(cov[0], cov[2]))
    words = {
        Quality.AT_EDGE: not inside,
        Quality.SATURATED: max(arm.clipped for arm in arms) > SATURATED_SHARE,
        Quality.DIM: sd > DIM_SD_PX
        or min(abs(arm.peak_contrast) / arm.pixel_sd for arm in arms) < DIM_CONTRAST,
        Quality.SEVERAL_RETURNS: _rivalled(cross, others) or any(map(_crowded, arms)),
        Quality.BLURRED: max(arm.shape.blur for arm in arms) > BLURRED_PX,
        Quality.ASTIGMATIC: spreads[1] > ASTIGMATIC_RATIO * spreads[0],
    }
    quality = Quality.OK
    for word, applies in words.items():
        if applies:
            quality |= word
    return quality


def _rivalled(cross: Cross, others: tuple[Return, ...]) -> bool:
    """True if another return, or a part of one, could be the right one or pulls at this one."""
    arms = (cross.upright, cross.level)
    low, high = sorted(abs(arm.peak_contrast) for arm in arms)
    half_width = max(arm.width_px for arm in arms) / 2
    besides = [arm.shape.beside.height for arm in arms if arm.shape.beside is not None]
    return high > UNLIKE_RATIO * low or any(
        other.share > RIVAL_SHARE
        or (
            other.lone
            and other.share * half_width > HIDDEN_PX
            and not any(height > FOUND_SHARE * other.share for height in besides)
        )
        for other in others
    )


def _crowded(arm: ArmFit) -> bool:
    """True if something else lies on the arm or close beside it."""
    beside = arm.shape.beside
    return (
        arm.graduated
        or arm.hollow > HOLLOW_SHARE
        or arm.lopsided_px > LOPSIDED_PX
        or (arm.lopsided > VERY_LOPSIDED and arm.lopsided_px > LOPSIDED_PX / 2)
        or (beside is not None and beside.height > RIVAL_SHARE)
    )
