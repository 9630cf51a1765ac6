"""What stands out along bands across a picture: ridges, in units of the noise.

The picture is averaged into bands across an arm. A *ridge* is a stretch of a band that is brighter
(or darker) than the stretches of the same width on both its sides: a step is none, nor a gradient.
"""

from __future__ import annotations

import math
from dataclasses import dataclass

import cv2
import numpy as np
from numpy.typing import NDArray

from readout.model import F64, Pixels

LARGEST_BAND_PX = 16
"""most rows averaged into a band: a line turned by 10 degrees crosses it within 3 px"""
BANDS = 24
"""at least so many bands, where the picture has the rows"""
LONG_SIDE = 320
"""about as many places as the averaged picture keeps along its longer side"""
LEAST_COLUMNS = 16
WIDTHS = (1, 2, 4, 8)
"""widths of the ridges looked for, in averaged columns"""
CLEARLY = 1.15
"""a wider stretch must stand out by this much more to be preferred"""
ROUNDING_SD = 0.3
"""noise of a pixel is at least that of rounding to whole levels"""


@dataclass(frozen=True, slots=True)
class Ridges:
    """Ridges of every band, (bands, columns): height in noise sd (negative: dark) and width.

    Columns and bands are ``step_px`` and ``band_px`` pixels of the picture.
    """

    heights: F64
    widths: NDArray[np.intp]
    step_px: int
    band_px: int

    @property
    def band_middles_px(self) -> F64:
        """Row of the picture in the middle of each band."""
        return np.asarray((np.arange(len(self.heights)) + 0.5) * self.band_px - 0.5)


def averaged(pixels: Pixels) -> tuple[F64, int]:
    """The picture with each step x step pixels averaged to one, and the step."""
    height, width = pixels.shape
    step = max(1, round(max(height, width) / LONG_SIDE))
    rows, columns = height // step, width // step
    if rows == 0 or columns == 0:
        return np.zeros((rows, columns)), step
    whole = np.asarray(pixels[: rows * step, : columns * step], dtype=np.float32)
    small = cv2.resize(whole, (columns, rows), interpolation=cv2.INTER_AREA)
    return np.asarray(small, dtype=np.float64), step


def ridges_of(small: F64, step_px: int) -> Ridges | None:
    """Ridges of an averaged picture across its upright arm; transpose it for the level one.

    None for a picture too small to hold any.
    """
    rows, columns = small.shape
    deep = int(np.clip(rows // BANDS, 1, max(1, LARGEST_BAND_PX // step_px)))
    bands = rows // deep
    if bands == 0 or columns < LEAST_COLUMNS:
        return None
    banded = small[: bands * deep].reshape(bands, deep, columns).mean(axis=1)
    rounding = ROUNDING_SD / (step_px * math.sqrt(deep))
    heights = np.zeros(banded.shape)
    widths = np.ones(banded.shape, dtype=np.intp)
    for width in WIDTHS:
        if 5 * width >= columns:
            break
        ridge = _standing_out(banded, width, rounding / math.sqrt(width))
        better = np.abs(ridge) > CLEARLY * np.abs(heights)
        heights[better] = ridge[better]
        widths[better] = width
    return Ridges(heights, widths, step_px, deep * step_px)


def _standing_out(banded: F64, width: int, least_noise: float) -> F64:
    """Height of ridges of one width over the nearer of their two sides, in noise sd."""
    columns = banded.shape[1]
    gap = width + max(1, width // 2)
    pad = gap + width
    padded = np.pad(banded, ((0, 0), (pad, pad)), mode="reflect")
    sums = np.cumsum(padded, axis=1)
    stretch = (sums[:, width:] - sums[:, :-width]) / width
    start = pad - width // 2 - 1
    middle = stretch[:, start : start + columns]
    left = middle - stretch[:, start - gap : start - gap + columns]
    right = middle - stretch[:, start + gap : start + gap + columns]
    noise = 1.4826 * float(np.median(np.abs(left + right)[:, ::2])) / 2
    both = np.minimum(left, right).clip(min=0) + np.maximum(left, right).clip(max=0)
    return both / max(noise, least_noise)
