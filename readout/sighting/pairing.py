"""Which rough arms may belong together: an upright and a level one, about square, of one polarity.

A line near 45 degrees is upright as well as level; arms out of square may even both be on one side
of it. Such lines are offered both ways.
"""

from __future__ import annotations

import math

from readout.sighting.fold import Line
from readout.sighting.rough import RoughArm, RoughArms

STEEP = 0.75
"""a line with more slope than this may pass for one of the other direction"""
LEAST_SQUARE_DEG = 65.0
"""arms at less than this angle are none of one reticle"""
SAME_PX = 3.0


def both_ways(arms: RoughArms, width: int, height: int) -> RoughArms:
    """The arms, those near 45 degrees in both lists."""
    return RoughArms(
        arms.uprights + _turned_over(arms.levels, arms.uprights, height),
        arms.levels + _turned_over(arms.uprights, arms.levels, width),
    )


def pairs(arms: RoughArms) -> list[tuple[RoughArm, RoughArm]]:
    """Pairs of an upright and a level arm, those of the greatest strength together first."""
    both = [
        (upright, level)
        for upright in arms.uprights
        for level in arms.levels
        if upright.polarity == level.polarity
        and angle_deg(upright.line, level.line) >= LEAST_SQUARE_DEG
    ]
    return sorted(both, key=lambda pair: -(pair[0].strength + pair[1].strength))


def angle_deg(upright: Line, level: Line) -> float:
    """Angle between an upright and a level line, 0 to 90 degrees."""
    between = math.pi / 2 - abs(math.atan(upright.slope) + math.atan(level.slope))
    return math.degrees(between)


def _turned_over(
    lines: tuple[RoughArm, ...], known: tuple[RoughArm, ...], length: float
) -> tuple[RoughArm, ...]:
    """Steep lines of one direction as lines of the other, but for those known there already.

    ``length`` of the picture along the other direction.
    """
    turned = [
        RoughArm(turned_over(arm.line, length / 2), arm.polarity, arm.width_px, arm.strength)
        for arm in lines
        if abs(arm.line.slope) >= STEEP
    ]
    return tuple(
        arm for arm in turned if not any(same_line(arm.line, o.line, length) for o in known)
    )


def turned_over(line: Line, middle: float) -> Line:
    """x(y) as y(x), or the other way round, referred to ``middle``."""
    slope = 1 / line.slope
    return Line(line.middle_y + slope * (middle - line.middle_x), slope, middle)


def same_line(one: Line, other: Line, length: float) -> bool:
    """True if two lines of one direction are within some pixels at both ends of the picture."""
    return all(abs(float(one.x_at(y)) - float(other.x_at(y))) < SAME_PX for y in (0.0, length))
