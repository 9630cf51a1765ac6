"""The marks of a graduated scale in one frame, each to a small part of a pixel, with covariance.

The scale is found at any turn, engraved or lit, between and under whatever else is in the picture:
peaks at even steps in a view turned along it. Its marks are then fitted in the frame's own pixels.
What lies across a mark (an arm of the return, a grain of dust) makes it fit worse than the others,
and it is left out by name.
"""

from __future__ import annotations

import math
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from readout.least_squares import linear_least_squares
from readout.model import F64, Pixels
from readout.sighting.find import find_arms
from readout.sighting.graduation_arms import (
    LongArms,
    long_arms,
    seen_beside,
    without_own_line,
)
from readout.sighting.graduation_axis import axis_slope
from readout.sighting.graduation_marks import FittedMarks, RoughMarks, fit_marks
from readout.sighting.graduation_search import RoughScale, search_scales, square_to
from readout.sighting.shape import Shape

SMALLEST_PX = 24
LEAST_MARKS = 4
CUTS = 4
RESTS_RAD = 5e-4
START_SHARE = 0.6
"""half width and blur at first, of the size at which the marks stand out most"""
BEYOND_PX = 3.0
"""looked at beyond the ends of a mark"""
LONGEST_STEPS, LONGEST_PX = 1.5, 50.0
"""farther from the axis than this a mark is not looked at: it says no more"""
LONGER = 1.3
"""a mark this many times as long as the usual one is a longer one"""
ALONG_RAD, ALONG_LOOSE_RAD = math.radians(0.4), math.radians(12.0)
MUCH_MORE = 3.0
SQUARE_WITHIN_RAD = math.radians(0.3)
"""a line that is less square to the marks is another one"""
LARGEST_SD_PX = 0.35
MOST_TRIED = 6
CROOKED = 0.15
"""marks off their curve by this share of a step are counted wrong, or are none"""
OFF_SCALE = 5.0
SMOOTH_DEGREE = 3
"""of the curve on which marks lie but for their errors, whatever the lens"""


@dataclass(frozen=True, slots=True)
class Scale:
    """One scale: n marks in order along it.

    ``numbers`` (n,): counted from the first one, marks that are missing or hidden counted too;
    growing to the right on a level scale and downwards on an upright one. ``place_px`` (n, 2):
    where each crosses the scale's axis; ``cov_px2`` (n, n): covariance of the places along the
    scale. ``turn_rad``: direction along the scale, from +x towards +y; ``turn_sd_rad``: infinite
    where no line shows it. ``mark_turn_rad, mark_turn_sd_rad``: direction square to the marks.
    ``longer`` (n,): marks longer than most. ``polarity``: -1 for dark marks. ``left_out``: numbers
    of marks seen but spoilt. ``shape``: of a mark across.
    """

    numbers: NDArray[np.intp]
    place_px: F64
    cov_px2: F64
    turn_rad: float
    turn_sd_rad: float
    mark_turn_rad: float
    mark_turn_sd_rad: float
    longer: NDArray[np.bool_]
    polarity: int
    left_out: tuple[int, ...]
    shape: Shape

    @property
    def upright(self) -> bool:
        """True for a scale that runs from top to bottom rather than from left to right."""
        return abs(math.sin(self.turn_rad)) > abs(math.cos(self.turn_rad))

    @property
    def step_px(self) -> float:
        """Mean distance of neighbouring marks."""
        return float(np.ptp(self.along_px) / np.ptp(self.numbers))

    @property
    def along_px(self) -> F64:
        """Places along the scale, (n,)."""
        along = np.array([math.cos(self.mark_turn_rad), math.sin(self.mark_turn_rad)])
        return np.asarray(self.place_px @ along)


@dataclass(frozen=True, slots=True)
class Graduation:
    """What a frame shows: a level scale, an upright one, both, or none."""

    level: Scale | None
    upright: Scale | None

    @property
    def scales(self) -> tuple[Scale, ...]:
        return tuple(scale for scale in (self.level, self.upright) if scale is not None)


def find_graduation(pixels: Pixels, *, full_scale: int) -> Graduation:
    """Every graduated scale of a frame, at most one in each direction.

    ``pixels`` (height, width): uint8 or uint16. A scale needs five marks in view, six pixels apart
    or more. Never raises on a bad picture.
    """
    if min(pixels.shape) < SMALLEST_PX:
        return Graduation(None, None)
    arms = long_arms(pixels, find_arms(pixels))
    first: RoughScale | None = None
    scales: list[Scale] = []
    for rough in search_scales(pixels, arms)[:MOST_TRIED]:
        if first is not None and not square_to(first, rough):
            continue
        scale = _measured(pixels, arms, rough, full_scale)
        if scale is not None:
            first = first or rough
            scales.append(_forwards(scale))
        if len(scales) == 2:
            break
    level = next((scale for scale in scales if not scale.upright), None)
    return Graduation(level, next((scale for scale in scales if scale.upright), None))


def _forwards(scale: Scale) -> Scale:
    """The scale counted to the right, or downwards if it is upright."""
    turn = scale.turn_rad
    if (math.sin(turn) if scale.upright else math.cos(turn)) >= 0:
        return scale
    last = int(scale.numbers[-1])
    return replace(
        scale,
        numbers=last - scale.numbers[::-1],
        place_px=scale.place_px[::-1],
        cov_px2=scale.cov_px2[::-1, ::-1],
        turn_rad=math.remainder(turn + math.pi, 2 * math.pi),
        mark_turn_rad=math.remainder(scale.mark_turn_rad + math.pi, 2 * math.pi),
        longer=scale.longer[::-1],
        left_out=tuple(sorted(last - number for number in scale.left_out)),
    )


def _measured(pixels: Pixels, arms: LongArms, rough: RoughScale, full_scale: int) -> Scale | None:
    """The marks fitted, along the direction that they and their line show.

    An arm almost along the scale hides its marks, unless it is the line they stand on; where much
    more is told by letting it lie upon them, it does not.
    """
    turn = rough.view.turn_rad
    row = float(np.median((rough.first_row + rough.last_row) / 2))
    middle = rough.view.places(np.array([float(np.median(rough.column))]), np.array([row]))[0]
    reach = float(np.median(rough.last_row - rough.first_row)) / 2 + BEYOND_PX
    x, y = middle.tolist()
    others = without_own_line(arms, turn, (x, y), reach, rough.polarity)
    views = [
        seen_beside(others, pixels.shape, turn, along_rad=along_rad)
        for along_rad in (ALONG_RAD, ALONG_LOOSE_RAD)
    ]
    if np.array_equal(views[0], views[1]):
        views.pop()
    found = [_measured_beside(pixels, rough, seen, full_scale) for seen in views]
    scales = [scale for scale in found if scale is not None]
    most = max((_told(scale) for scale in scales), default=0.0)
    return next((scale for scale in scales if MUCH_MORE * _told(scale) >= most), None)


def _told(scale: Scale) -> float:
    """How much the marks say of the division: the inverse variance of a step, but for a factor."""
    number = scale.numbers - scale.numbers.mean()
    return float(number**2 @ (1 / np.diag(scale.cov_px2)))


def _measured_beside(
    pixels: Pixels, rough: RoughScale, seen: NDArray[np.bool_], full_scale: int
) -> Scale | None:
    axis_row = float(np.median((rough.first_row + rough.last_row) / 2))
    sought, fit = _fitted(pixels, rough, axis_row, seen, full_scale)
    if fit is None:
        return None
    along = np.array([math.cos(sought.across_rad), math.sin(sought.across_rad)])
    place = np.stack([sought.x_px, sought.y_px], axis=1) + fit.shift_px[:, None] * along
    fitted = fit.fitted & (np.sign(fit.contrast) == rough.polarity)
    place[~fitted] = np.nan
    sd_px = np.sqrt(np.diag(fit.cov_px2))
    if np.nanmedian(sd_px) > LARGEST_SD_PX:
        return None
    keep = _on_scale(rough.numbers, place @ along, sd_px, CROOKED * rough.step_px)
    if 2 * np.count_nonzero(keep) < max(2 * LEAST_MARKS, len(keep)):
        return None
    mark_turn = sought.across_rad - fit.turn_rad
    turn, turn_sd = mark_turn, math.inf
    axis = axis_slope(
        pixels,
        rough.view,
        rough.column,
        (float(rough.first_row.min()) - BEYOND_PX, float(rough.last_row.max()) + BEYOND_PX),
        fit.shape,
        polarity=rough.polarity,
        seen=seen,
        full_scale=full_scale,
    )
    if axis is not None:
        along_line = rough.view.turn_rad + math.atan(axis[0])
        doubt = math.hypot(OFF_SCALE * math.hypot(axis[1], fit.turn_sd_rad), SQUARE_WITHIN_RAD)
        if abs(along_line - mark_turn) < doubt:
            turn, turn_sd = along_line, axis[1]
    length = rough.last_row - rough.first_row
    return Scale(
        rough.numbers[keep] - rough.numbers[keep][0],
        place[keep],
        fit.cov_px2[np.ix_(keep, keep)],
        turn,
        turn_sd,
        mark_turn,
        fit.turn_sd_rad,
        (length > LONGER * np.median(length))[keep],
        rough.polarity,
        tuple((rough.numbers[~keep] - rough.numbers[keep][0]).tolist()),
        fit.shape,
    )


def _fitted(
    pixels: Pixels,
    rough: RoughScale,
    axis_row: float,
    seen: NDArray[np.bool_],
    full_scale: int,
) -> tuple[RoughMarks, FittedMarks | None]:
    """The marks cut out anew along their better direction until it rests."""
    place = rough.view.places(rough.column, np.full(rough.column.size, axis_row))
    shape = Shape(0.0, 0.0, 1.0, START_SHARE * rough.size_px, START_SHARE * rough.size_px)
    step = rough.step_px
    longest = min(LONGEST_STEPS * step, LONGEST_PX)
    sought = RoughMarks(
        place[:, 0],
        place[:, 1],
        rough.view.turn_rad,
        np.maximum(rough.first_row - axis_row - BEYOND_PX, -longest),
        np.minimum(rough.last_row - axis_row + BEYOND_PX, longest),
        min(step / 2, 1.25 * shape.reach_px + 2),
        shape,
    )
    fit = None
    for cuts in range(CUTS):
        fit = fit_marks(pixels, sought, usable=seen, full_scale=full_scale)
        if fit is None or (cuts > 0 and abs(fit.turn_rad) < RESTS_RAD):
            break
        sought = replace(
            sought,
            across_rad=sought.across_rad - fit.turn_rad,
            half_px=min(step / 2, 1.25 * fit.shape.reach_px + 2),
            shape=fit.shape,
        )
    return sought, fit


def _on_scale(
    numbers: NDArray[np.intp], along_px: F64, sd_px: F64, crooked_px: float
) -> NDArray[np.bool_]:
    """Marks fitted that lie where the others let expect them: the worst is taken out first.

    None of them, where they are off by ``crooked_px`` or more.
    """
    keep = np.isfinite(along_px)
    while np.count_nonzero(keep) >= LEAST_MARKS:
        degree = min(SMOOTH_DEGREE, int(np.count_nonzero(keep)) - 3)
        at = (numbers - numbers[keep].mean()) / np.ptp(numbers[keep])
        fit = linear_least_squares(
            np.vander(at[keep], degree + 1), along_px[keep], 1 / sd_px[keep] ** 2
        )
        off = np.abs(fit.residuals) / sd_px[keep]
        usual = max(1.0, 1.4826 * float(np.median(off)))
        if off.max() <= OFF_SCALE * usual:
            return keep & (np.abs(fit.residuals).max() < crooked_px)
        keep[np.flatnonzero(keep)[np.argmax(off)]] = False
    return np.zeros_like(keep)
