"""Which lines are lines of their own: neither one met twice nor the ground between two others."""

from __future__ import annotations

import numpy as np

from readout.model import F64
from readout.sighting.rough import RoughArm

SAME_WIDTHS = 1.0
VALLEY_WIDTHS = 2.5
"""a ridge is compared with what lies up to 2.5 of its widths to either side"""


def without_doubles(arms: list[RoughArm], known: list[RoughArm], last_row: int) -> list[RoughArm]:
    """The arms that are none of the known ones."""
    return [
        arm
        for arm in arms
        if not any(
            arm.polarity == other.polarity
            and np.abs(_apart_px(arm, other, last_row)).max() < SAME_WIDTHS * other.width_px
            for other in known
        )
    ]


def without_valleys(arms: list[RoughArm], last_row: int) -> list[RoughArm]:
    """The arms but those that are the ground between two lines of the other polarity.

    The stronger of the two must be stronger than what lies between: a dark line keeps the bright
    seams that sharpening has drawn on both its sides.
    """
    return [arm for arm in arms if not _is_valley(arm, arms, last_row)]


def _is_valley(arm: RoughArm, arms: list[RoughArm], last_row: int) -> bool:
    left = right = 0.0
    for other in arms:
        if other.polarity != arm.polarity:
            apart = _apart_px(arm, other, last_row)
            if np.abs(apart).max() <= VALLEY_WIDTHS * arm.width_px + other.width_px / 2:
                if apart.max() < 0:
                    left = max(left, other.strength)
                elif apart.min() > 0:
                    right = max(right, other.strength)
    return min(left, right) > 0 and max(left, right) > arm.strength


def _apart_px(arm: RoughArm, other: RoughArm, last_row: int) -> F64:
    """How far to the right another line is in the first and last row of a picture."""
    rows = np.array([0.0, float(last_row)])
    return np.asarray(other.line.x_at(rows) - arm.line.x_at(rows))
