"""Arms that lie across a scale: which lines of a picture are long, and what they hide."""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from readout.model import F64, Pixels
from readout.sighting.arm import fit_arm
from readout.sighting.fold import Line
from readout.sighting.rough import RoughArm, RoughArms
from readout.sighting.shape import Shape

ALONG_RAD = math.radians(12.0)
"""an arm so near to a scale's own direction does not hide its marks from the search"""
OWN_RAD = math.radians(1.5)
PARALLEL_RAD = math.radians(1.5)
ARM_WIDTHS, ARM_PX = 1.3, 3.0
"""an arm that cannot be fitted hides this many of its widths, and so many pixels more"""
EXPLAINED = 0.7
"""share of its profile that a fitted arm must explain"""
LONG = 0.25
"""share of the picture through which an arm must go; a mark of a scale is shorter"""
BLOCK_PX = 6
THERE = 0.4
"""of its greatest height, above which an arm is there"""


@dataclass(frozen=True, slots=True)
class LongArm:
    """An arm through a good part of the picture, dark (-1) or bright (1), and how far either side
    of it that is seen.
    """

    line: Line
    polarity: int
    half_px: float


@dataclass(frozen=True, slots=True)
class LongArms:
    """``uprights``, and ``levels`` with lines of the transposed picture."""

    uprights: tuple[LongArm, ...]
    levels: tuple[LongArm, ...]


def long_arms(pixels: Pixels, arms: RoughArms) -> LongArms:
    """The arms that go through a good part of the picture, fitted where that can be done."""
    return LongArms(
        tuple(_fitted(pixels, arm) for arm in arms.uprights if _is_long(pixels, arm)),
        tuple(_fitted(pixels.T, arm) for arm in arms.levels if _is_long(pixels.T, arm)),
    )


def without_own_line(
    arms: LongArms,
    scale_rad: float,
    middle_px: tuple[float, float],
    within_px: float,
    polarity: int,
) -> LongArms:
    """The arms but for the line that the marks of a scale stand on.

    It goes along the scale, no farther than ``within_px`` from its middle, and is dark or bright as
    the marks are.
    """
    x, y = middle_px

    def is_own(arm: LongArm, turn_rad: float, along: float, across: float) -> bool:
        off = abs(float(arm.line.x_at(along)) - across) * arm.line.cosine
        return (
            arm.polarity == polarity
            and off < within_px
            and _apart_rad(turn_rad, scale_rad) < OWN_RAD
        )

    return LongArms(
        tuple(
            arm
            for arm in arms.uprights
            if not is_own(arm, math.pi / 2 - math.atan(arm.line.slope), y, x)
        ),
        tuple(arm for arm in arms.levels if not is_own(arm, math.atan(arm.line.slope), x, y)),
    )


def _fitted(pixels: Pixels, arm: RoughArm) -> LongArm:
    rough = Shape(0.0, 0.0, float(arm.polarity), arm.width_px / 3, arm.width_px / 4)
    fit = fit_arm(pixels, arm.line, rough)
    if fit is None or fit.explained < EXPLAINED:
        return LongArm(
            arm.line, arm.polarity, (ARM_WIDTHS * arm.width_px + ARM_PX) / arm.line.cosine
        )
    return LongArm(fit.line, arm.polarity, (fit.shape.reach_px + 1) / fit.line.cosine)


def _is_long(pixels: Pixels, arm: RoughArm) -> bool:
    return _length_share(pixels, arm) > LONG


def _length_share(pixels: Pixels, arm: RoughArm) -> float:
    """Part of the rows in which an upright line stands out from what is beside it."""
    height, width = pixels.shape
    rows = np.arange(height)
    at = arm.line.x_at(rows.astype(np.float64))
    beside = (1.5 * arm.width_px + 3) / arm.line.cosine
    inside = (at > beside + 1) & (at < width - 2 - beside)
    if np.count_nonzero(inside) < 4 * BLOCK_PX:
        return 0.0
    rows, at = rows[inside], at[inside]
    middle = _mean(pixels, rows, at, max(1, round(arm.width_px / 3)))
    sides = [_mean(pixels, rows, at + off, 1) for off in (-beside, beside)]
    stands = arm.polarity * (middle - (sides[0] + sides[1]) / 2)
    blocks = stands[: len(stands) // BLOCK_PX * BLOCK_PX].reshape(-1, BLOCK_PX).mean(axis=1)
    return float(np.mean(blocks > THERE * np.sort(blocks)[-2]))


def _mean(pixels: Pixels, rows: NDArray[np.intp], at: F64, half: int) -> F64:
    """Mean of the pixels about a place in each row."""
    first = np.rint(at).astype(np.intp)
    columns = np.clip(first[:, None] + np.arange(-half, half + 1), 0, pixels.shape[1] - 1)
    return np.asarray(pixels[rows[:, None], columns].mean(axis=1))


def seen_beside(
    arms: LongArms, shape: tuple[int, int], scale_rad: float, *, along_rad: float = ALONG_RAD
) -> NDArray[np.bool_]:
    """True where no arm lies; (height, width).

    Arms within ``along_rad`` of a scale's direction are left in view: they go along with it. So
    are three and more that are parallel: a return has one arm a direction, they are long marks.
    """
    seen = np.ones(shape, dtype=np.bool_)
    rows, columns = np.arange(float(shape[0]))[:, None], np.arange(float(shape[1]))[None, :]
    for arm in _single(arms.uprights):
        if _apart_rad(math.pi / 2 - math.atan(arm.line.slope), scale_rad) > along_rad:
            seen &= np.abs(columns - arm.line.x_at(rows)) > arm.half_px
    for arm in _single(arms.levels):
        if _apart_rad(math.atan(arm.line.slope), scale_rad) > along_rad:
            seen &= np.abs(rows - arm.line.x_at(columns)) > arm.half_px
    return seen


def _single(arms: tuple[LongArm, ...]) -> list[LongArm]:
    turns = [math.atan(arm.line.slope) for arm in arms]
    return [
        arm
        for arm, turn in zip(arms, turns, strict=True)
        if sum(abs(turn - other) < PARALLEL_RAD for other in turns) < 3
    ]


def _apart_rad(one: float, other: float) -> float:
    """Angle between two lines, 0 to a quarter turn."""
    return abs((one - other + math.pi / 2) % math.pi - math.pi / 2)
