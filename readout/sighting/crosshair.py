"""A frame with a crosshair becomes a sighting: find both arms, fit each, cross them."""

from __future__ import annotations

import math
from dataclasses import dataclass

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
SLACK_PX = 0.5
"""left out beside the other arm, so that a small move needs no second fit"""


def locate_crosshair(pixels: Pixels, *, full_scale: int, prior: Sighting | None = None) -> Sighting:
    """The crossing of the centre lines of the two arms, in the frame or outside it.

    A bright crosshair on a dark ground or a dark one on a bright ground, anywhere, turned by up
    to 45 degrees, its arms not quite square; arguments and result as in ``locate``.
    """
    picture = _Picture(pixels, full_scale)
    if prior is not None and (near := _from_prior(picture, prior)) is not None:
        return _sighting(picture, *near)
    lone = False
    for rough in find_crosshairs(pixels):
        upright, level = rough.upright, rough.level
        if upright is not None and level is not None:
            fits = _fit_both(picture, upright.line, level.line, _start(upright), _start(level))
            if fits is not None:
                return _sighting(picture, *fits)
        lone = lone or any(
            arm is not None and picture.fit(arm.line, _start(arm), is_level=is_level) is not None
            for arm, is_level in ((upright, False), (level, True))
        )
    return no_sighting(Quality.ONE_AXIS if lone else Quality.NO_IMAGE)


@dataclass(frozen=True, slots=True)
class _Picture:
    """A picture and the level at which its pixels are full."""

    pixels: Pixels
    full_scale: int

    def fit(
        self,
        line: Line,
        shape: Shape,
        *,
        is_level: bool,
        skip: tuple[float, float] | None = None,
    ) -> ArmFit | None:
        """A credible fit of an arm without the stretch from ``skip[0]`` to ``skip[1]``, or None."""
        skip_from, skip_to = skip or (math.inf, -math.inf)
        fit = fit_arm(
            self.pixels.T if is_level else self.pixels,
            line,
            shape,
            full_scale=self.full_scale,
            skip_from=skip_from,
            skip_to=skip_to,
        )
        return fit if fit is not None and _credible(fit) else None


def _start(arm: RoughArm) -> Shape:
    """A rough shape: only the sign of the contrast and the width matter."""
    return Shape(0.0, 0.0, float(arm.polarity), max(0.5, arm.width_px / 2), 1.5)


def _from_prior(picture: _Picture, prior: Sighting) -> tuple[ArmFit, ArmFit] | None:
    """Both arms where the last frame had them, or None if they are not there."""
    if not prior.found or prior.upright is None or prior.level is None:
        return None
    upright = Line(prior.x_px, -math.tan(math.radians(prior.upright.angle_deg)), prior.y_px)
    level = Line(prior.y_px, math.tan(math.radians(prior.level.angle_deg)), prior.x_px)
    return _fit_both(picture, upright, level, _shape_of(prior.upright), _shape_of(prior.level))


def _shape_of(arm: Arm) -> Shape:
    return Shape(arm.background, 0.0, arm.contrast, arm.line_px / 2, arm.blur_px)


def _fit_both(
    picture: _Picture, upright: Line, level: Line, upright_shape: Shape, level_shape: Shape
) -> tuple[ArmFit, ArmFit] | None:
    """Fit each arm without the stretch where the other one crosses it; None unless both hold.

    The first arm is fitted once more if the second, now known, reaches into what was taken.
    """
    left_out = _shadow(upright, upright_shape, level, level_shape)
    first = picture.fit(upright, upright_shape, is_level=False, skip=_slack(left_out))
    if first is None:
        return None
    second = picture.fit(
        level,
        level_shape,
        is_level=True,
        skip=_shadow(level, level_shape, first.line, first.shape),
    )
    if second is None or first.shape.contrast * second.shape.contrast < 0:
        return None
    shadow = _shadow(first.line, first.shape, second.line, second.shape)
    if shadow[0] < left_out[0] - SLACK_PX or shadow[1] > left_out[1] + SLACK_PX:
        first = picture.fit(first.line, first.shape, is_level=False, skip=shadow)
    return None if first is None else (first, second)


def _shadow(line: Line, shape: Shape, other: Line, other_shape: Shape) -> tuple[float, float]:
    """From where to where along an arm the other one reaches into its strip, pixels."""
    along = crossing(line, other)[1]
    half = other_shape.fades_px / other.cosine + abs(other.slope) * shape.fades_px
    return along - half, along + half


def _slack(stretch: tuple[float, float]) -> tuple[float, float]:
    return stretch[0] - SLACK_PX, stretch[1] + SLACK_PX


def _credible(fit: ArmFit) -> bool:
    return bool(
        fit.explained > LEAST_EXPLAINED
        and fit.rows > LEAST_LENGTH_WIDTHS * fit.width_px
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


def _sighting(picture: _Picture, upright: ArmFit, level: ArmFit) -> Sighting:
    """Cross the two fitted lines and carry their covariance to the crossing."""
    x, y = crossing(upright.line, level.line)
    to_point = np.linalg.inv(np.array([[1.0, -upright.line.slope], [-level.line.slope, 1.0]]))
    cov = to_point @ np.diag([upright.x_var_at(y), level.x_var_at(x)]) @ to_point.T
    height, width = picture.pixels.shape
    quality = Quality.OK
    margin = AT_EDGE_WIDTHS * max(upright.width_px, level.width_px)
    if not (margin <= x <= width - 1 - margin and margin <= y <= height - 1 - margin):
        quality |= Quality.AT_EDGE
    if max(upright.clipped, level.clipped) > SATURATED_SHARE:
        quality |= Quality.SATURATED
    if min(abs(f.peak_contrast) / f.pixel_sd for f in (upright, level)) < DIM_CONTRAST:
        quality |= Quality.DIM
    return Sighting(
        x,
        y,
        (float(cov[0, 0]), float(cov[0, 1]), float(cov[1, 1])),
        quality,
        _arm(upright, -1),
        _arm(level, 1),
        max(upright.peak, level.peak),
    )


def _arm(fit: ArmFit, clockwise: int) -> Arm:
    return Arm(
        angle_deg=clockwise * math.degrees(math.atan(fit.line.slope)),
        width_px=fit.width_px,
        contrast=fit.peak_contrast,
        background=fit.shape.background,
        line_px=2 * fit.shape.half_width,
        blur_px=fit.shape.blur,
    )
