"""Lines close beside one that was found, too close for the averaged picture to tell apart.

Two faces of a window give two returns of one reticle, parallel and a few pixels apart. The rows of
the picture itself, moved along the line that was found, add up to its profile; each maximum of the
profile that stands out is a line.
"""

from __future__ import annotations

from dataclasses import replace

import numpy as np

from readout.model import F64, Pixels
from readout.sighting.fold import Line
from readout.sighting.rough import RoughArm

GROUPS, ROWS_PER_GROUP = 8, 16
"""rows are averaged in groups along the arm; the median group knows nothing of the other arm"""
NOISE_OF_SPREAD = 0.26
"""sd of the median of 8 normal values over the mean distance of the second from the seventh"""
REACH_STEPS = 6
"""pixels to either side, in steps of the averaged picture"""
LEAST_STRENGTH = 0.1
LEAST_NOISES = 6.0
LEAST_SHARE = 0.015
"""a companion rises by this share of the line's own height above the valley between them"""


def with_companions(pixels: Pixels, arm: RoughArm, step_px: int) -> list[RoughArm]:
    """The arm and the lines close beside it, the strongest first.

    The strength of a companion is that of the arm times the ratio of their contrasts, a tenth at
    least.
    ``pixels`` is turned so that the arm is upright in it.
    """
    reach = REACH_STEPS * step_px + round(arm.width_px)
    profile = _profile(pixels, arm.line, reach)
    if profile is None:
        return [arm]
    level, noise = profile
    maxima = _maxima(arm.polarity * level, noise)
    if len(maxima) < 2:
        return [arm]
    highest = maxima[0][1]
    return [
        replace(
            arm,
            line=replace(arm.line, middle_x=arm.line.middle_x + at - reach),
            strength=arm.strength * max(LEAST_STRENGTH, height / highest),
        )
        for at, height in maxima
    ]


def _profile(pixels: Pixels, line: Line, reach: int) -> tuple[F64, float] | None:
    """Level at each whole distance from a line, (2 reach + 1,), and its noise sd."""
    height, width = pixels.shape
    rows = np.arange(height)
    centre = np.rint(line.x_at(rows.astype(np.float64))).astype(np.intp)
    rows = rows[(centre >= reach) & (centre < width - reach)]
    wanted = GROUPS * ROWS_PER_GROUP
    if rows.size < wanted // 2:
        return None
    rows = rows[np.linspace(0, rows.size - 1, wanted).astype(np.intp)]
    columns = centre[rows][:, None] + np.arange(-reach, reach + 1)
    levels = pixels[rows[:, None], columns]
    means = np.sort(levels.reshape(GROUPS, ROWS_PER_GROUP, -1).mean(axis=1), axis=0)
    middle = (means[GROUPS // 2 - 1] + means[GROUPS // 2]) / 2
    return middle, float(np.median(means[-2] - means[1])) * NOISE_OF_SPREAD


def _maxima(level: F64, noise: float) -> list[tuple[float, float]]:
    """Place and height over the ground of each maximum that stands out, the highest first.

    It must rise above the valley between it and every higher one.
    """
    inner = level[1:-1]
    places = np.nonzero((inner > level[:-2]) & (inner >= level[2:]))[0] + 1
    places = places[np.argsort(-level[places], kind="stable")]
    ground = float(np.median(level))
    found: list[tuple[float, float]] = []
    for place in places.tolist():
        before, here, after = (float(level[place + aside]) for aside in (-1, 0, 1))
        height = here - ground
        least = max(LEAST_NOISES * noise, LEAST_SHARE * (found[0][1] if found else height))
        if height < least:
            break
        between = (level[min(place, round(at)) : max(place, round(at)) + 1] for at, _ in found)
        if all(here - valley.min() > least for valley in between):
            found.append((place + (after - before) / 2 / (2 * here - before - after), height))
    return found
