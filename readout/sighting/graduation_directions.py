"""In which directions a scale may lie: those of the edges in a picture, a quarter turn being one.

Marks stand square to their scale and the arms of a crosshair square to each other, so that edges of
one thing agree when their directions are folded by 90 degrees. Strong edges count no more than
weak ones that are well above the noise.
"""

from __future__ import annotations

import math

import cv2
import numpy as np
from numpy.typing import NDArray

from readout.model import F64, Pixels
from readout.sighting.graduation_arms import LongArms

SMOOTH_PX = 1.2
SURE = 5.0
CAPPED_AT = 3.0
"""an edge counts by its height, but no more than this many times the least that counts"""
LEAST_SHARE = 0.1
"""of the highest peak of the histogram, below which another is none"""
MOST = 5
SAME_DEG = 1.5


def directions_rad(pixels: Pixels, arms: LongArms, seen: NDArray[np.bool_]) -> list[float]:
    """Directions from +x towards +y, in (-45, 45] degrees, the likeliest first.

    ``seen`` (height, width): False where an arm lies. The arms' own directions come last: one of
    them may be the line a scale stands on.
    """
    found = _of_edges(pixels, seen)
    found += [math.atan(arm.line.slope) for arm in arms.levels]
    found += [-math.atan(arm.line.slope) for arm in arms.uprights]
    kept: list[float] = []
    for turn in map(folded, found):
        if all(abs(folded(turn - other)) > math.radians(SAME_DEG) for other in kept):
            kept.append(turn)
    return kept


def folded(turn_rad: float) -> float:
    """The direction within 45 degrees of +x that differs by quarter turns."""
    quarter = math.pi / 2
    return turn_rad - quarter * math.ceil(turn_rad / quarter - 0.5)


def _of_edges(pixels: Pixels, seen: NDArray[np.bool_]) -> list[float]:
    smooth = cv2.GaussianBlur(pixels.astype(np.float32), (0, 0), SMOOTH_PX)
    by_x = cv2.Sobel(smooth, cv2.CV_32F, 1, 0, ksize=3)
    by_y = cv2.Sobel(smooth, cv2.CV_32F, 0, 1, ksize=3)
    height = np.hypot(by_x, by_y)
    least = SURE * max(float(np.median(height)), 0.3)
    counted = seen & (height > least)
    weight = np.minimum(height[counted], CAPPED_AT * least)
    turn = np.degrees(np.arctan2(by_y[counted], by_x[counted])) % 90.0
    histogram, _ = np.histogram(turn, bins=90, range=(0.0, 90.0), weights=weight)
    around = sum(np.roll(histogram, k) for k in (-1, 0, 1))
    return [_middle(histogram, peak) for peak in _peaks(np.asarray(around, dtype=np.float64))]


def _peaks(around: F64) -> list[int]:
    top = np.flatnonzero((around > np.roll(around, 1)) & (around >= np.roll(around, -1)))
    top = top[around[top] > LEAST_SHARE * around.max()]
    return sorted(top.tolist(), key=lambda k: -float(around[k]))[:MOST]


def _middle(histogram: F64, peak: int) -> float:
    """Mean direction of the degrees about a peak, radians."""
    off = np.arange(-2, 3)
    weight = histogram[(peak + off) % 90]
    return math.radians(peak + 0.5 + float(weight @ off) / max(float(weight.sum()), 1e-12))
