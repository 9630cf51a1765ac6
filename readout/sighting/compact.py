"""Bright compact things anywhere in a frame: what stands out above everything around it.

At each of a series of sizes the smoothed picture is compared with the brightest place on a ring
about every point. A line, an edge or a slope has a place on the ring as bright as the middle and
does not stand out; a spot does, whatever its shape. Single hot pixels are taken out by a median.
"""

from __future__ import annotations

import math
from dataclasses import dataclass, replace
from typing import Any

import cv2
import numpy as np
from numpy.typing import NDArray

RING_CELLS = 4
"""radius of the ring: a spot of the size looked for has faded out there"""
SURE = 7.0
"""a thing this many noise sd high is hardly noise: some 10^6 places are looked at"""
LEAST_SHARE = 0.1
"""things less high than this share of the highest of the same size are of no interest"""
MOST_OF_A_SIZE = 12
LEAST_CELLS = 12
ROUNDING_SD = 0.3
PLACES_FOR_NOISE = 8192

F32 = NDArray[np.float32]


@dataclass(frozen=True, slots=True)
class Compact:
    """A bright thing: where, size (its sd is about ``cell_px``), height in levels and noise sd."""

    x_px: float
    y_px: float
    cell_px: int
    height: float
    score: float

    def moved(self, x_px: int, y_px: int) -> Compact:
        """The same in a picture of which the one searched was a part."""
        return replace(self, x_px=self.x_px + x_px, y_px=self.y_px + y_px)


def find_compact(pixels: NDArray[Any]) -> list[Compact]:
    """Bright things, the highest first; each once, at the size at which it is highest."""
    if min(pixels.shape) < LEAST_CELLS:
        return []
    kept_type = pixels.dtype in (np.uint8, np.uint16, np.float32)
    levels = np.ascontiguousarray(pixels, dtype=None if kept_type else np.float32)
    picture = np.asarray(cv2.medianBlur(levels, 3), dtype=np.float32)
    found: list[Compact] = []
    cell = 1
    while min(picture.shape) >= LEAST_CELLS:
        found += _of_one_size(picture, cell)
        picture = _halved(picture)
        cell *= 2
    found.sort(key=lambda thing: -thing.height)
    kept: list[Compact] = []
    for thing in found:
        if all(_apart(thing, other) for other in kept):
            kept.append(thing)
    return kept


def _apart(thing: Compact, other: Compact) -> bool:
    reach = 3.0 * max(thing.cell_px, other.cell_px)
    return math.hypot(thing.x_px - other.x_px, thing.y_px - other.y_px) > reach


def _halved(picture: F32) -> F32:
    rows, columns = picture.shape[0] // 2, picture.shape[1] // 2
    whole = picture[: 2 * rows, : 2 * columns]
    return np.asarray(cv2.resize(whole, (columns, rows), interpolation=cv2.INTER_AREA))


def _ring() -> NDArray[np.uint8]:
    kernel = np.zeros((2 * RING_CELLS + 1,) * 2, np.uint8)
    around = np.arange(16) * (math.pi / 8)
    row = np.rint(RING_CELLS * (1 + np.sin(around))).astype(int)
    column = np.rint(RING_CELLS * (1 + np.cos(around))).astype(int)
    kernel[row, column] = 1
    return kernel


_RING = _ring()


def _of_one_size(picture: F32, cell: int) -> list[Compact]:
    smooth = cv2.GaussianBlur(picture, (3, 3), 0)
    height = cv2.subtract(smooth, cv2.dilate(smooth, _RING))
    step = max(1, math.isqrt(smooth.size // PLACES_FOR_NOISE))
    apart = smooth[::step, 5::step] - smooth[::step, :-5:step]
    steps = np.abs(apart).ravel()
    noise = 1.4826 * float(np.partition(steps, steps.size // 2)[steps.size // 2]) / math.sqrt(2)
    noise = max(noise, ROUNDING_SD / cell)
    found: list[Compact] = []
    for _ in range(MOST_OF_A_SIZE):
        _, best, _, (column, row) = cv2.minMaxLoc(height)
        if best < SURE * noise or (found and best < LEAST_SHARE * found[0].height):
            break
        found.append(
            Compact((column + 0.5) * cell - 0.5, (row + 0.5) * cell - 0.5, cell, best, best / noise)
        )
        cv2.circle(height, (column, row), RING_CELLS, 0.0, -1)
    return found
