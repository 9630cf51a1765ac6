"""One arm in view: it gives the displacement along its own normal, and no more.

An upright arm tells x if y is known. Where the other arm is out of sight the crossing lies
somewhere along the arm: anywhere in the picture or within its own length beyond either end. That
range, times the tangent of the arm's turn, is spread evenly: a standard deviation of 1/sqrt(12) of
it (JCGM 100:2008, 4.3.7). Beyond a limit the value is none.
"""

from __future__ import annotations

import math

from readout.model import Arm, Quality, Sighting, no_sighting
from readout.sighting.arm import ArmFit, arm_of

RANGE_LENGTHS = 3.0
"""the crossing is sought over the picture's length and once that beyond either end"""
LARGEST_SD_PX = 1.0
"""a coordinate less certain than this is left out"""


def lone_arm(shape: tuple[int, ...], upright: ArmFit | None, level: ArmFit | None) -> Sighting:
    """What one arm says; of two that are no crosshair together, neither is trusted."""
    height, width = shape
    if upright is not None and level is None:
        x, var = _coordinate(upright, height)
        arms = arm_of(upright, -1), None
        return _only(upright, (x, math.nan), (var, math.nan, math.nan), arms)
    if level is not None and upright is None:
        y, var = _coordinate(level, width)
        return _only(level, (math.nan, y), (math.nan, math.nan, var), (None, arm_of(level, 1)))
    return no_sighting(Quality.ONE_AXIS)


def with_its_range(
    sighting: Sighting, width: int, height: int
) -> tuple[float, float, tuple[float, float, float]] | None:
    """Middle and covariance (xx, xy, yy) of the places a lone arm leaves open, px; None if none.

    Along the arm the place is anywhere in its range, across it is known: as a point with a long
    thin covariance it can be turned into any axes.
    """
    if sighting.upright is not None and math.isfinite(sighting.x_px):
        slope, var = -math.tan(math.radians(sighting.upright.angle_deg)), _range_var(height)
        return sighting.x_px, (height - 1) / 2, (sighting.cov_px2[0], slope * var, var)
    if sighting.level is not None and math.isfinite(sighting.y_px):
        slope, var = math.tan(math.radians(sighting.level.angle_deg)), _range_var(width)
        return (width - 1) / 2, sighting.y_px, (var, slope * var, sighting.cov_px2[2])
    return None


def _range_var(length: int) -> float:
    return (RANGE_LENGTHS * length) ** 2 / 12


def _coordinate(arm: ArmFit, length: int) -> tuple[float, float]:
    """Place of an arm across, and its variance, with the place along it unknown."""
    middle = (length - 1) / 2
    var = arm.x_var_at(middle) + _range_var(length) * arm.line.slope**2
    return (float(arm.line.x_at(middle)), var) if var < LARGEST_SD_PX**2 else (math.nan, math.nan)


def _only(
    fit: ArmFit,
    place: tuple[float, float],
    cov: tuple[float, float, float],
    arms: tuple[Arm | None, Arm | None],
) -> Sighting:
    return Sighting(*place, cov, Quality.ONE_AXIS, *arms, fit.peak)
