"""A crosshair anywhere in a frame, without knowing where: a rough line for each arm.

The picture is averaged into bands across an arm. In each band a *ridge* stands out of both its
neighbours (a step does not, and nor does a gradient); its strongest ridges of every width vote for
straight lines, as in the Hough transform (Duda and Hart, Commun. ACM 15 (1972) 11). A line that
enough bands agree on is an arm. Nothing is assumed of place, brightness, width or polarity; the
turn is sought within +-12 degrees.
"""

from __future__ import annotations

import math
from dataclasses import dataclass

import cv2
import numpy as np
from numpy.typing import NDArray

from readout.model import F64, Pixels
from readout.sighting.fold import Line

LARGEST_BAND_PX = 16
"""most rows averaged into a band: a line turned by 10 degrees crosses it within 3 px"""
BANDS = 24
"""at least so many bands, where the picture has the rows"""
COLUMNS = 320
"""about as many columns as the averaged picture keeps"""
WIDTHS = (1, 2, 4, 8)
"""widths of the ridges looked for, in averaged columns"""
RIDGES_PER_BAND = 3
STEEPEST = math.tan(math.radians(12))
SLOPES = 49
SURE = 4.5
"""a ridge this many noise sd high is hardly noise: some 10^4 places are looked at"""
LEAST_BANDS = 5
LEAST_SHARE = 0.1
"""an arm must be seen in this share of the bands"""


@dataclass(frozen=True, slots=True)
class RoughArm:
    """A line seen in many bands: where, how strong (noise sd), bright or dark, how wide (px)."""

    line: Line
    strength: float
    polarity: int
    width_px: float


def find_upright_arms(pixels: Pixels) -> list[RoughArm]:
    """The best bright and the best dark upright arm, strongest first; none, one or two.

    Pass the transposed picture for the level arm.
    """
    height, width = pixels.shape
    bands = height // int(np.clip(height // BANDS, 1, LARGEST_BAND_PX))
    step = max(1, round(width / COLUMNS))
    columns = max(1, width // step)
    if bands < LEAST_BANDS or columns < 16:
        return []
    averaged = cv2.resize(pixels.astype(np.float32), (columns, bands), interpolation=cv2.INTER_AREA)
    floor = 0.3 / math.sqrt(width / columns * height / bands)
    strengths, scales = _ridges(np.asarray(averaged, dtype=np.float64), floor)
    row_of_band = (np.arange(bands) + 0.5) * height / bands - 0.5
    found = []
    for polarity in (1, -1):
        arm = _vote(np.maximum(polarity * strengths, 0), scales, row_of_band / (width / columns))
        if arm is not None:
            line, strength, scale = arm
            per_column = width / columns
            found.append(
                RoughArm(
                    Line(
                        (line.middle_x + 0.5) * per_column - 0.5,
                        line.slope,
                        line.middle_y * per_column,
                    ),
                    strength,
                    polarity,
                    scale * per_column,
                )
            )
    return sorted(found, key=lambda arm: -arm.strength)


def _ridges(averaged: F64, floor: float) -> tuple[F64, NDArray[np.intp]]:
    """Height of the best ridge at each place, in noise sd, and its width in columns.

    A ridge is a stretch brighter (or darker) than the stretches of the same width on *both* its
    sides. ``floor``: least noise sd of a column, from quantisation.
    """
    bands, columns = averaged.shape
    best = np.zeros(averaged.shape)
    widths = np.ones(averaged.shape, dtype=np.intp)
    for width in WIDTHS:
        gap = width + max(1, width // 2)
        pad = gap + width
        if pad >= columns:
            break
        padded = np.pad(averaged, ((0, 0), (pad, pad)), mode="reflect")
        sums = np.concatenate([np.zeros((bands, 1)), np.cumsum(padded, axis=1)], axis=1)
        stretch = (sums[:, width:] - sums[:, :-width]) / width
        start = pad - width // 2
        middle = stretch[:, start : start + columns]
        left = middle - stretch[:, start - gap : start - gap + columns]
        right = middle - stretch[:, start + gap : start + gap + columns]
        noise = 1.4826 * float(np.median(np.abs(left + right))) / 2
        ridge = np.where(left * right > 0, np.sign(left) * np.minimum(abs(left), abs(right)), 0.0)
        ridge /= max(noise, floor / math.sqrt(width))
        better = np.abs(ridge) > 1.15 * np.abs(best)
        best = np.where(better, ridge, best)
        widths = np.where(better, width, widths)
    return best, widths


def _vote(
    heights: F64, widths: NDArray[np.intp], row_of_band: F64
) -> tuple[Line, float, float] | None:
    """The line most bands agree on: (line, typical height, typical width), all in columns."""
    bands, columns = heights.shape
    left = heights.copy()
    band = np.arange(bands)
    at, votes, width = [], [], []
    for _ in range(RIDGES_PER_BAND):
        peak = left.argmax(axis=1)
        at.append(peak)
        votes.append(left[band, peak])
        width.append(widths[band, peak])
        near = (
            np.abs(np.arange(columns)[None, :] - peak[:, None]) <= 2 * widths[band, peak][:, None]
        )
        left[near] = 0.0
    x = np.concatenate(at).astype(np.float64)
    height = np.concatenate(votes)
    scale = np.concatenate(width)
    y = np.tile(row_of_band, RIDGES_PER_BAND)
    vote = np.log1p(height) * (height > SURE / 2)  # the brighter of two lines, but no blob, wins
    middle_y = float(row_of_band.mean())
    slopes = np.linspace(-STEEPEST, STEEPEST, SLOPES)
    crossing = x[None, :] - slopes[:, None] * (y - middle_y)[None, :]
    bins = 2 * columns
    cell = np.clip(np.rint(crossing) + columns // 2, 0, bins - 1).astype(np.intp)
    cell += np.arange(SLOPES)[:, None] * bins
    counts = np.bincount(cell.ravel(), np.broadcast_to(vote, cell.shape).ravel(), SLOPES * bins)
    table = counts.reshape(SLOPES, bins)
    table[:, 1:-1] = table[:, :-2] + table[:, 1:-1] + table[:, 2:]
    best_slope, best_cell = np.unravel_index(int(table.argmax()), table.shape)
    slope, middle_x = float(slopes[best_slope]), float(best_cell - columns // 2)
    in_band = np.tile(band, RIDGES_PER_BAND)
    sure = np.zeros(0, dtype=np.intp)
    for tolerance in (4.0, 3.0, 2.0, 2.0, 1.5):
        near = np.abs(x - middle_x - slope * (y - middle_y)) <= tolerance
        best = _highest_of_each(in_band, np.where(near & (height > SURE / 2), height, 0.0))
        if best.size < LEAST_BANDS:
            return None
        slope, middle_x = np.polyfit(y[best] - middle_y, x[best], 1, w=np.sqrt(vote[best]))
        sure = best[height[best] > SURE]
    seen = sure.size
    if seen < max(LEAST_BANDS, LEAST_SHARE * bands) or abs(slope) > STEEPEST:
        return None
    return (
        Line(float(middle_x), float(slope), middle_y),
        float(np.median(height[sure])) * math.sqrt(seen / bands),
        float(np.median(scale[sure])),
    )


def _highest_of_each(band: NDArray[np.intp], height: F64) -> NDArray[np.intp]:
    """Index of the highest ridge of each band that has one above 0."""
    order = np.argsort(-height, kind="stable")
    _, first = np.unique(band[order], return_index=True)
    best = order[first]
    return np.asarray(best[height[best] > 0])
