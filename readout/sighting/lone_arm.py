"""One arm in view: it gives the displacement along its own normal, and no more.

An upright arm tells x if y is known. Where the other arm is out of sight the crossing lies
somewhere along the arm: anywhere in the picture or within its own length beyond either end. That
range, times the tangent of the arm's turn, is spread evenly: a standard deviation of 1/sqrt(12) of
it (JCGM 100:2008, 4.3.7). Beyond a limit the value is none.
"""

from __future__ import annotations

import math

from readout.model import Quality, Sighting, no_sighting
from readout.sighting.arm import ArmFit, arm_of

RANGE_LENGTHS = 3.0
"""the crossing is sought over the picture's length and once that beyond either end"""
LARGEST_SD_PX = 1.0
"""a coordinate less certain than this is left out"""


def lone_arm(shape: tuple[int, ...], upright: ArmFit | None, level: ArmFit | None) -> Sighting:
    """What one arm says; of two of different polarity or direction, neither is trusted."""
    nothing = no_sighting(Quality.ONE_AXIS)
    if (upright is None) == (level is None):
        return nothing
    height, width = shape
    if upright is not None:
        x, var = _coordinate(upright, height)
        return nothing if math.isnan(x) else _only(x, var, upright, is_level=False)
    assert level is not None
    y, var = _coordinate(level, width)
    return nothing if math.isnan(y) else _only(y, var, level, is_level=True)


def _coordinate(arm: ArmFit, length: int) -> tuple[float, float]:
    """Place of an arm across, and its variance, with the place along it unknown."""
    middle = (length - 1) / 2
    spread = RANGE_LENGTHS * length * arm.line.slope / math.sqrt(12)
    var = arm.x_var_at(middle) + spread**2
    if var > LARGEST_SD_PX**2:
        return math.nan, math.nan
    return float(arm.line.x_at(middle)), var


def _only(value: float, var: float, arm: ArmFit, *, is_level: bool) -> Sighting:
    nan = math.nan
    if is_level:
        return Sighting(
            nan, value, (nan, nan, var), Quality.ONE_AXIS, None, arm_of(arm, 1), arm.peak
        )
    return Sighting(value, nan, (var, nan, nan), Quality.ONE_AXIS, arm_of(arm, -1), None, arm.peak)
