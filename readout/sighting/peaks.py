"""What stands out along each band of a picture, in units of the noise.

A *ridge* is a stretch that is brighter (or darker) than the stretches of the same width on both its
sides: a step is none, nor a gradient, nor the ground beside a strong line. Beyond the border of the
picture the ground is taken to go on as straight as it came.
"""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass, replace

import cv2
import numpy as np
from numpy.typing import NDArray

from readout.model import F64
from readout.sighting.stretches import F32, Stretches

WIDTHS = (1, 3, 9)
"""widths of the ridges looked for, in averaged columns: odd, so that each has a middle column"""
WIDEST_PX = 24
CLEARLY = 1.1
"""a wider stretch must stand out by this much more to be preferred"""
ROUNDING_SD = 0.3
"""noise of a pixel is at least that of rounding to whole levels"""
FAINTEST = 2.8
"""a ridge lower than this many noise sd is not looked at"""
PEAKS_PER_BAND = 12
APART = 2
"""columns to either side within which only the highest ridge counts"""
NOISE_SAMPLES = 3000


@dataclass(frozen=True, slots=True)
class Peaks:
    """The highest ridges of one polarity, those of a band together, its highest first; shape (n,).

    ``x``: column of the middle; ``y``: row of the middle of the ``band``, both averaged.
    ``height`` in noise sd; ``slope`` in columns a row, one of steps of ``slope_step``; ``width`` in
    columns. ``rows``, ``columns``: of the averaged picture.
    """

    band: NDArray[np.intp]
    x: F64
    y: F64
    height: F64
    slope: F64
    width: F64
    slope_step: float
    rows: int
    columns: int

    def only(self, of: slice) -> Peaks:
        """Some of the peaks."""
        return replace(
            self,
            band=self.band[of],
            x=self.x[of],
            y=self.y[of],
            height=self.height[of],
            slope=self.slope[of],
            width=self.width[of],
        )


@dataclass(frozen=True, slots=True)
class _Ridges:
    """Ridges of one width in levels: bright ones, then dark ones, both positive.

    ``heights``: (polarities, slopes, bands, places), the first place in column ``width // 2``.
    """

    heights: F32
    width: int
    noise: float


def peaks_of(stretches: Stretches, step_px: int) -> tuple[Peaks, Peaks] | None:
    """The bright and the dark peaks; None for a picture too narrow to hold any."""
    least_noise = ROUNDING_SD * stretches.rows**0.5 / step_px
    ridges = [
        _ridges(sums, width, least_noise * width**0.5, stretches.sums.shape[:2])
        for sums, width in _widened(stretches, step_px)
    ]
    return _peaks(ridges, stretches) if ridges else None


def _widened(stretches: Stretches, step_px: int) -> Iterator[tuple[F32, int]]:
    """Sums over stretches of each width that the picture has room for, (slopes * bands, places)."""
    columns = stretches.sums.shape[2]
    sums = stretches.sums.reshape(-1, columns)
    for width in WIDTHS:
        gaps = 3 * _gap(width)
        if columns - width + 1 < gaps or (width > 1 and width * step_px > WIDEST_PX):
            return
        if width > 1:  # three of the width before
            third = width // 3
            end = sums.shape[1] - 2 * third
            two = cv2.add(sums[:, :end], sums[:, third : third + end])
            sums = np.asarray(cv2.add(two, sums[:, 2 * third :]), dtype=np.float32)
        yield sums, width


def _gap(width: int) -> int:
    """Columns from a stretch to the one beside it that it is compared with."""
    return width + max(1, width // 2)


def _ridges(sums: F32, width: int, least_noise: float, shape: tuple[int, ...]) -> _Ridges:
    """How far each stretch stands out over the nearer of its two sides.

    ``rise`` is the step from each stretch to the one to its right, ``bend`` how much the rise
    grows. On sloping ground the foot of a strong line would be a ridge of the other polarity; but
    there the bend towards its other side is nothing but noise.
    """
    gap = _gap(width)
    places = sums.shape[1]
    rise = cv2.subtract(sums[:, gap:], sums[:, :-gap])
    fall = cv2.subtract(sums[:, :-gap], sums[:, gap:])
    bend = cv2.subtract(rise[:, gap:], rise[:, :-gap])
    sampled = np.abs(bend.ravel()[:: max(1, bend.size // NOISE_SAMPLES)])
    middle = sampled.size // 2
    noise = max(1.4826 / 2 * float(np.partition(sampled, middle)[middle]), least_noise)
    slack = np.float32(FAINTEST * noise)
    bright, dark = heights = np.empty((2, *sums.shape), dtype=np.float32)
    for height, up, down, polarity in ((bright, rise, fall, 1), (dark, fall, rise, -1)):
        cv2.min(up[:, :-gap], down[:, gap:], dst=height[:, gap:-gap])
        for border, over, change in (
            (slice(0, gap), down[:, :gap], down[:, gap : 2 * gap]),
            (slice(places - gap, places), up[:, -gap:], up[:, -2 * gap : -gap]),
        ):
            cv2.subtract(over, np.abs(change), dst=height[:, border])
        if width > 1:
            limit = slack + bend if polarity > 0 else slack - bend
            for inner in (slice(2 * gap, places), slice(0, places - 2 * gap)):
                cv2.min(height[:, inner], limit, dst=height[:, inner])
    return _Ridges(heights.reshape(2, *shape, places), width, noise)


def _peaks(ridges: list[_Ridges], stretches: Stretches) -> tuple[Peaks, Peaks]:
    """The highest ridges of each band, those of a band and polarity apart from each other."""
    _, bands, columns = stretches.sums.shape
    best = np.zeros((2 * bands, columns), dtype=np.float32)
    for k, ridge in enumerate(ridges):
        highest = ridge.heights.max(axis=1).reshape(2 * bands, -1)
        highest *= np.float32(1 / (ridge.noise * CLEARLY**k))
        first = ridge.width // 2
        inner = slice(first, columns - first)
        if first > 0:  # a wide stretch that reaches a narrow ridge at its edge is no wide ridge
            highest[highest < _highest_within(best, first + APART)[:, inner]] = 0.0
        np.maximum(best[:, inner], highest, out=best[:, inner])
    place = np.flatnonzero((best >= _highest_within(best, APART)) & (best > FAINTEST))
    row, column, height = place // columns, place % columns, best.ravel()[place]
    order = np.lexsort((-height, row))
    order = order[np.arange(row.size) - np.searchsorted(row, row) < PEAKS_PER_BAND]
    row, column = row[order], column[order]
    band = row % bands
    shape = _shape_of(ridges, stretches, row // bands, band, column)
    both = Peaks(
        band,
        shape[0],
        np.asarray((band + 0.5) * stretches.rows - 0.5),
        height[order].astype(np.float64),
        shape[1],
        shape[2],
        stretches.slope_step,
        bands * stretches.rows,
        columns,
    )
    dark = int(np.searchsorted(row, bands))
    return both.only(slice(0, dark)), both.only(slice(dark, None))


def _highest_within(heights: F32, columns: int) -> F32:
    """The highest at most so many columns to either side, of each place."""
    window = np.ones((1, 2 * columns + 1), dtype=np.uint8)
    return np.asarray(cv2.dilate(heights, window), dtype=np.float32)


def _shape_of(
    ridges: list[_Ridges],
    stretches: Stretches,
    sign: NDArray[np.intp],
    band: NDArray[np.intp],
    column: NDArray[np.intp],
) -> tuple[F64, F64, F64]:
    """Middle, slope and width of the ridge at each place; ``sign`` 0: bright, 1: dark."""
    best = np.zeros(band.size)
    x, slope, width = column.astype(np.float64), np.zeros(band.size), np.ones(band.size)
    for k, ridge in enumerate(ridges):
        last = ridge.heights.shape[3] - 1
        place = column - ridge.width // 2
        within = (place >= 0) & (place <= last)
        place = np.clip(place, 0, last)
        at = ridge.heights[sign, :, band, place].argmax(axis=1)
        before, height, after = (
            ridge.heights[sign, at, band, np.clip(place + aside, 0, last)] for aside in (-1, 0, 1)
        )
        noises = within * height / (ridge.noise * CLEARLY**k)
        better = noises > best
        best[better] = noises[better]
        bend = np.maximum(2 * height - before - after, 1e-6)
        aside = np.clip((after - before) / (2 * bend), -0.5, 0.5) * ((place > 0) & (place < last))
        middle = place + ridge.width // 2 + aside
        x[better], slope[better] = middle[better], stretches.slopes[at[better]]
        width[better] = ridge.width
    return x, slope, width
