"""Where in a picture a graduated scale lies: direction, rough places and lengths of its marks."""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from readout.model import F64, Pixels
from readout.sighting.graduation_arms import LongArms, seen_beside
from readout.sighting.graduation_chain import Chain, best_chain
from readout.sighting.graduation_directions import directions_rad, folded
from readout.sighting.graduation_view import F32, View, response, row_peaks, turned_view

SIZES_PX = (1.0, 1.7, 2.8, 4.5)
LEAST_STEP_SIZES = 3.5
"""marks closer than this many of their sizes run into each other"""
MOST_ROWS = 8
TURNS = 4
STILL_IT = 0.6
"""a scale seen along a better direction has as many marks, but for some"""
RESTS_ROWS = 0.7
"""a scale whose ends lie this far off the row of its middle is turned anew"""
SAME_RAD = math.radians(2.5)
"""a direction so near to that of a scale found needs no search of its own"""
SQUARE_RAD = math.radians(4.0)
LONG_SHARE = 0.5
"""of its greatest height, above which a mark is said to be there"""


@dataclass(frozen=True, slots=True)
class RoughScale:
    """A scale about where it lies.

    ``column, row`` (n,): the marks in its view; ``first_row,
    last_row`` (n,): how far each reaches. ``numbers`` (n,). ``polarity``: -1 for dark marks.
    ``merit``: the more and the higher its marks, the greater.
    """

    view: View
    column: F64
    row: F64
    first_row: F64
    last_row: F64
    numbers: NDArray[np.intp]
    polarity: int
    size_px: float
    merit: float

    @property
    def step_px(self) -> float:
        return float(np.median(np.diff(self.column) / np.diff(self.numbers)))


def search_scale(pixels: Pixels, arms: LongArms, turn_rad: float) -> RoughScale | None:
    """The best scale that lies about along a direction, followed until its direction rests."""
    best: RoughScale | None = None
    for _ in range(TURNS):
        seen = seen_beside(arms, pixels.shape, turn_rad)
        found = _in_view(turned_view(pixels, seen, turn_rad))
        if found is None or (best is not None and found.merit < STILL_IT * best.merit):
            break
        best = found
        slope, span = _lean(found)
        if abs(slope) * span / 2 < RESTS_ROWS:
            break
        turn_rad += math.atan(slope)
    return best


def _lean(scale: RoughScale) -> tuple[float, float]:
    """Rows a column by which the marks' middles go, and the length of the scale in columns."""
    middle = (scale.first_row + scale.last_row) / 2
    apart = scale.column[:, None] - scale.column[None, :]
    far = apart > 0.3 * np.ptp(scale.column)
    rises = (middle[:, None] - middle[None, :])[far] / apart[far]
    return float(np.median(rises)), float(np.ptp(scale.column))


def _in_view(view: View) -> RoughScale | None:
    """The chain of most and highest marks.

    Side lobes are twice as many and less than half as high: they lose.
    """
    best: tuple[float, F32, float, int, NDArray[np.intp], int, Chain] | None = None
    for size in SIZES_PX:
        if min(view.levels.shape) < 10 * size:
            continue
        of_dark = response(view, size)
        for polarity in (-1, 1):
            heights = of_dark if polarity < 0 else -of_dark
            for row, peaks in _richest(heights, size):
                seen = (heights[row] != 0).tolist()
                chain = best_chain(peaks.tolist(), least_step=LEAST_STEP_SIZES * size, seen=seen)
                if chain is None:
                    continue
                height = float(np.median(heights[row, peaks[chain.members]]))
                merit = chain.score * height
                if best is None or merit > best[0]:
                    best = (merit, heights, size, row, peaks, polarity, chain)
    return None if best is None else _measured(view, *best)


def _richest(heights: F32, size: float) -> list[tuple[int, NDArray[np.intp]]]:
    """Rows with the most peaks, no more than there is time for."""
    step = max(2, round(2 * size))
    rows = [(row, row_peaks(heights[row], size)) for row in range(0, len(heights), step)]
    rows.sort(key=lambda of: -len(of[1]))
    return [of for of in rows[:MOST_ROWS] if len(of[1]) >= 5]


def _measured(
    view: View,
    merit: float,
    heights: F32,
    size: float,
    row: int,
    peaks: NDArray[np.intp],
    polarity: int,
    chain: Chain,
) -> RoughScale:
    columns = peaks[chain.members]
    last = heights.shape[1] - 1
    near = np.max([heights[:, np.clip(columns + k, 0, last)] for k in (-1, 0, 1)], axis=0)
    limits = np.array([_reach(near[:, k], row) for k in range(len(columns))], dtype=np.float64)
    return RoughScale(
        view,
        columns.astype(np.float64),
        np.full(len(columns), float(row)),
        limits[:, 0],
        limits[:, 1],
        np.array(chain.numbers),
        polarity,
        size,
        merit,
    )


def _reach(height: F32, row: int) -> tuple[int, int]:
    """First and last row about ``row`` in which a mark is there."""
    there = height > LONG_SHARE * height[row]
    above = np.flatnonzero(~there[:row])
    below = np.flatnonzero(~there[row:])
    first = int(above[-1]) + 1 if above.size else 0
    return first, row + int(below[0]) - 1 if below.size else len(height) - 1


def search_scales(pixels: Pixels, arms: LongArms) -> list[RoughScale]:
    """What may be a scale, the likeliest first."""
    both = seen_beside(arms, pixels.shape, 0.0) & seen_beside(arms, pixels.shape, math.pi / 2)
    found: list[RoughScale] = []
    for direction in directions_rad(pixels, arms, both):
        for turn in (direction, direction + math.pi / 2):
            if any(abs(turn - scale.view.turn_rad) < SAME_RAD for scale in found):
                continue
            scale = search_scale(pixels, arms, turn)
            if scale is not None:
                found.append(scale)
    return sorted(found, key=lambda scale: -scale.merit)


def square_to(one: RoughScale, other: RoughScale) -> bool:
    """True for two scales at right angles."""
    between_rad = one.view.turn_rad - other.view.turn_rad
    return abs(folded(between_rad)) < SQUARE_RAD and abs(math.sin(between_rad)) > 0.5
