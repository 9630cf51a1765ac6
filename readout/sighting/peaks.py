"""What stands out along each band of a picture, in units of the noise.

A *ridge* is a stretch that is brighter (or darker) than the stretches of the same width on both its
sides: a step is none, nor a gradient. Beyond the border of the picture the ground is taken to go
on as straight as it came.
"""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass

import cv2
import numpy as np
from numpy.typing import NDArray

from readout.model import F64
from readout.sighting.stretches import F32, Stretches

WIDTHS = (1, 3, 9)
"""widths of the ridges looked for, in averaged columns: odd, so that each has a middle column"""
CLEARLY = 1.1
"""a wider stretch must stand out by this much more to be preferred"""
ROUNDING_SD = 0.3
"""noise of a pixel is at least that of rounding to whole levels"""
FAINTEST = 2.5
"""a ridge lower than this many noise sd is not looked at"""
PEAKS_PER_BAND = 12
APART = 5
"""columns among which only the highest ridge counts"""
NOISE_SAMPLES = 3000


@dataclass(frozen=True, slots=True)
class Peaks:
    """The highest ridges of each band, all of one polarity; (bands, peaks), highest first.

    ``x``: column of the middle; ``y``: row of the middle of each band, (bands, 1), both averaged.
    ``height`` in noise sd, 0 where a band has no more; ``slope`` in columns a row, one of steps of
    ``slope_step``; ``width`` in columns. ``columns``: of the averaged picture.
    """

    x: F64
    y: F64
    height: F64
    slope: F64
    width: F64
    columns: int
    slope_step: float


@dataclass(frozen=True, slots=True)
class _Ridges:
    """Ridges of one width in levels, (slopes, bands, places), from column ``width // 2`` on.

    Bright ones are positive in ``bright``, dark ones negative in ``dark``.
    """

    bright: F32
    dark: F32
    width: int
    noise: float

    def of(self, polarity: int) -> F32:
        return self.bright if polarity > 0 else self.dark


def peaks_of(stretches: Stretches, step_px: int) -> tuple[Peaks, Peaks] | None:
    """The bright and the dark peaks; None for a picture too narrow to hold any."""
    least_noise = ROUNDING_SD * stretches.rows**0.5 / step_px
    ridges = [
        _ridges(sums, width, least_noise * width**0.5, stretches.sums.shape[:2])
        for sums, width in _widened(stretches)
    ]
    if not ridges:
        return None
    return _peaks(ridges, stretches, 1), _peaks(ridges, stretches, -1)


def _widened(stretches: Stretches) -> Iterator[tuple[F32, int]]:
    """Sums over stretches of each width that the picture has room for, (slopes * bands, places)."""
    columns = stretches.sums.shape[2]
    sums = stretches.sums.reshape(-1, columns)
    for width in WIDTHS:
        if 5 * width >= columns:
            return
        if width > 1:  # three of the width before
            third = width // 3
            end = sums.shape[1] - 2 * third
            sums = np.asarray(
                cv2.add(cv2.add(sums[:, :end], sums[:, third : third + end]), sums[:, 2 * third :]),
                dtype=np.float32,
            )
        yield sums, width


def _ridges(sums: F32, width: int, least_noise: float, shape: tuple[int, ...]) -> _Ridges:
    """How far each stretch stands out over the nearer of its two sides."""
    gap = width + max(1, width // 2)
    places = sums.shape[1]
    over_right = cv2.subtract(sums[:, :-gap], sums[:, gap:])
    over_left = cv2.subtract(sums[:, gap:], sums[:, :-gap])
    bright = np.empty(sums.shape, dtype=np.float32)
    dark = np.empty(sums.shape, dtype=np.float32)
    inner = slice(gap, places - gap)
    bright[:, inner] = cv2.min(over_left[:, :-gap], over_right[:, gap:])
    dark[:, inner] = cv2.max(over_left[:, :-gap], over_right[:, gap:])
    for side, over in (
        (slice(0, gap), over_right),
        (slice(places - 1, places - gap - 1, -1), over_left[:, ::-1]),
    ):
        near = over[:, :gap]
        beyond = near - over[:, gap : 2 * gap]
        bright[:, side] = np.minimum(near, beyond)
        dark[:, side] = np.maximum(near, beyond)
    every = max(1, sums.size // NOISE_SAMPLES)
    curvature = np.abs((over_left[:, :-gap] + over_right[:, gap:]).ravel()[::every])
    middle = curvature.size // 2
    noise = 1.4826 / 2 * float(np.partition(curvature, middle)[middle])
    return _Ridges(
        bright.reshape(*shape, places), dark.reshape(*shape, places), width, max(noise, least_noise)
    )


def _peaks(ridges: list[_Ridges], stretches: Stretches, polarity: int) -> Peaks:
    """The highest ridges of one polarity in each band."""
    _, bands, columns = stretches.sums.shape
    best = np.zeros((bands, columns), dtype=np.float32)
    handicap = 1.0
    for ridge in ridges:
        of = ridge.of(polarity)
        highest = of.max(axis=0) if polarity > 0 else -of.min(axis=0)
        first = ridge.width // 2
        inner = best[:, first : columns - first]
        np.maximum(inner, highest / np.float32(ridge.noise * handicap), out=inner)
        handicap *= CLEARLY
    highest = cv2.dilate(best, np.ones((1, APART), dtype=np.uint8))
    band, column = np.nonzero((best == highest) & (best > FAINTEST))
    height = best[band, column]
    order = np.lexsort((-height, band))
    band, column, height = band[order], column[order], height[order]
    first_of_band = np.searchsorted(band, np.arange(bands))
    rank = np.arange(band.size) - first_of_band[band]
    kept = rank < PEAKS_PER_BAND
    band, column, rank, height = band[kept], column[kept], rank[kept], height[kept]
    x, slope, width = _shape_of(ridges, stretches, polarity, band, column)
    table = np.zeros((4, bands, PEAKS_PER_BAND))
    table[:, band, rank] = x, height, slope, width
    y = np.asarray((np.arange(bands)[:, None] + 0.5) * stretches.rows - 0.5)
    return Peaks(table[0], y, table[1], table[2], table[3], columns, 1 / max(1, stretches.rows - 1))


def _shape_of(
    ridges: list[_Ridges],
    stretches: Stretches,
    polarity: int,
    band: NDArray[np.intp],
    column: NDArray[np.intp],
) -> tuple[F64, F64, F64]:
    """Middle, slope and width of the ridge at each place."""
    best = np.zeros(band.size)
    x, slope, width = column.astype(np.float64), np.zeros(band.size), np.ones(band.size)
    handicap = 1.0
    every = np.arange(band.size)
    for ridge in ridges:
        of = ridge.of(polarity)
        place = np.clip(column - ridge.width // 2, 1, of.shape[2] - 2)
        heights = polarity * of[:, band, place]
        at = heights.argmax(axis=0)
        height = heights[at, every]
        better = height > best * ridge.noise * handicap
        handicap *= CLEARLY
        before = polarity * of[at, band, place - 1]
        after = polarity * of[at, band, place + 1]
        bend = 2 * height - before - after
        aside = np.where(bend > 0, (after - before) / (2 * np.where(bend > 0, bend, 1)), 0.0)
        middle = place + ridge.width // 2 + np.clip(aside, -0.5, 0.5) + stretches.shifts[at] % 2 / 2
        best = np.where(better, height / ridge.noise / handicap, best)
        x, slope = np.where(better, middle, x), np.where(better, stretches.slopes[at], slope)
        width = np.where(better, float(ridge.width), width)
    return x, slope, width
