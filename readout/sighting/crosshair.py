"""A frame with a crosshair becomes a sighting: find both arms, fit each, cross them."""

from __future__ import annotations

import math

import numpy as np

from readout.model import Arm, Pixels, Quality, Sighting, no_sighting
from readout.sighting.arm import ArmFit, fit_arm
from readout.sighting.find import RoughArm, find_crosshairs
from readout.sighting.fold import Line
from readout.sighting.solve import Shape

LEAST_EXPLAINED = 0.7
"""share of a folded strip that a crosshair arm must explain, else it is something else"""
LARGEST_SD_PX = 0.5
"""a position less certain than this is none"""
LEAST_LENGTH_WIDTHS = 4.0
"""a thing shorter than this many of its widths is a blob, not an arm"""
DIM_CONTRAST = 3.0
"""an arm less than this many pixel noises high is called dim"""
SATURATED_SHARE = 0.002
AT_EDGE_WIDTHS = 2.0
SLACK_PX = 2.0
"""left out beside the other arm, so that a small move needs no second fit"""


def locate_crosshair(pixels: Pixels, *, full_scale: int, prior: Sighting | None = None) -> Sighting:
    """The crossing of the centre lines of the two arms, in the frame or outside it.

    A bright crosshair on a dark ground or a dark one on a bright ground, anywhere, turned by up
    to 10 degrees; arguments and result as in ``locate``.
    """
    if prior is not None and (near := _from_prior(pixels, prior)) is not None:
        return _sighting(pixels, full_scale, *near)
    lone = False
    for rough in find_crosshairs(pixels):
        upright, level = rough.upright, rough.level
        if upright is not None and level is not None:
            fits = _fit_both(pixels, upright.line, level.line, _start(upright), _start(level))
            if fits is not None:
                return _sighting(pixels, full_scale, *fits)
        lone = lone or _stands_alone(pixels, upright) or _stands_alone(pixels.T, level)
    return no_sighting(Quality.ONE_AXIS if lone else Quality.NO_IMAGE)


def _stands_alone(pixels: Pixels, arm: RoughArm | None) -> bool:
    """True if a rough arm is a real one, though it has no partner."""
    fit = None if arm is None else fit_arm(pixels, arm.line, _start(arm))
    return fit is not None and _credible(fit)


def _start(arm: RoughArm) -> Shape:
    """A rough shape: only the sign of the contrast and the width matter."""
    return Shape(0.0, 0.0, float(arm.polarity), max(0.5, arm.width_px / 2), 1.5)


def _from_prior(pixels: Pixels, prior: Sighting) -> tuple[ArmFit, ArmFit] | None:
    """Both arms where the last frame had them, or None if they are not there."""
    if not prior.found or prior.upright is None or prior.level is None:
        return None
    upright = Line(prior.x_px, -math.tan(math.radians(prior.upright.angle_deg)), prior.y_px)
    level = Line(prior.y_px, math.tan(math.radians(prior.level.angle_deg)), prior.x_px)
    return _fit_both(pixels, upright, level, _shape_of(prior.upright), _shape_of(prior.level))


def _shape_of(arm: Arm) -> Shape:
    return Shape(arm.background, 0.0, arm.contrast, arm.width_px / 2, max(0.5, arm.width_px / 5))


def _fit_both(
    pixels: Pixels, upright: Line, level: Line, upright_shape: Shape, level_shape: Shape
) -> tuple[ArmFit, ArmFit] | None:
    """Fit each arm without the stretch where the other one crosses it; None unless both hold."""
    y_left_out, reach = crossing(upright, level)[1], level_shape.reach_px + SLACK_PX
    first = _fit_without(pixels, upright, upright_shape, y_left_out, reach)
    if first is None:
        return None
    x, _ = crossing(first.line, level)
    reach_of_first = first.shape.reach_px + SLACK_PX
    second = _fit_without(pixels.T, level, level_shape, x, reach_of_first)
    if second is None or first.shape.contrast * second.shape.contrast < 0:
        return None
    _, y = crossing(first.line, second.line)
    if abs(y - y_left_out) + second.shape.reach_px > reach:  # something of the other arm was in
        reach = second.shape.reach_px + SLACK_PX
        first = _fit_without(pixels, first.line, first.shape, y, reach)
    return None if first is None else (first, second)


def _fit_without(
    pixels: Pixels, line: Line, shape: Shape, middle: float, reach: float
) -> ArmFit | None:
    """A credible fit of an arm without the stretch where the other one crosses it, or None."""
    fit = fit_arm(pixels, line, shape, skip_from=middle - reach, skip_to=middle + reach)
    return fit if fit is not None and _credible(fit) else None


def _credible(fit: ArmFit) -> bool:
    return bool(
        fit.explained > LEAST_EXPLAINED
        and fit.rows > LEAST_LENGTH_WIDTHS * fit.shape.width_px
        and math.sqrt(fit.cov[0, 0]) < LARGEST_SD_PX
        and np.all(np.isfinite(fit.cov))
    )


def crossing(upright: Line, level: Line) -> tuple[float, float]:
    """Intersection (x, y) in pixels of an upright line x(y) and a level line y(x)."""
    y_at_middle = level.middle_x + level.slope * (upright.middle_x - level.middle_y)
    y = (y_at_middle - level.slope * upright.slope * upright.middle_y) / (
        1 - upright.slope * level.slope
    )
    return float(upright.x_at(y)), float(y)


def _sighting(pixels: Pixels, full_scale: int, upright: ArmFit, level: ArmFit) -> Sighting:
    """Cross the two fitted lines and carry their covariance to the crossing."""
    x, y = crossing(upright.line, level.line)
    to_point = np.linalg.inv(np.array([[1.0, -upright.line.slope], [-level.line.slope, 1.0]]))
    cov = to_point @ np.diag([upright.x_var_at(y), level.x_var_at(x)]) @ to_point.T
    height, width = pixels.shape
    quality = Quality.OK
    margin = AT_EDGE_WIDTHS * max(upright.shape.width_px, level.shape.width_px)
    if not (margin <= x <= width - 1 - margin and margin <= y <= height - 1 - margin):
        quality |= Quality.AT_EDGE
    clipped = max(float(np.mean(fit.strip.levels >= full_scale)) for fit in (upright, level))
    if clipped > SATURATED_SHARE:
        quality |= Quality.SATURATED
    if min(abs(f.shape.peak_contrast) / f.pixel_sd for f in (upright, level)) < DIM_CONTRAST:
        quality |= Quality.DIM
    return Sighting(
        x,
        y,
        (float(cov[0, 0]), float(cov[0, 1]), float(cov[1, 1])),
        quality,
        _arm(upright, -1),
        _arm(level, 1),
        float(max(fit.strip.levels.max() for fit in (upright, level))),
    )


def _arm(fit: ArmFit, clockwise: int) -> Arm:
    return Arm(
        angle_deg=clockwise * math.degrees(math.atan(fit.line.slope)),
        width_px=fit.shape.width_px,
        contrast=fit.shape.peak_contrast,
        background=fit.shape.background,
    )
