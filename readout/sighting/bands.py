"""A crosshair anywhere in a frame, without knowing where: a rough line for each arm.

The strongest ridges of each band vote for straight lines, as in the Hough transform (Duda and
Hart, Commun. ACM 15 (1972) 11). A line that enough bands agree on is an arm. Nothing is assumed of
place, brightness, width or polarity; the turn is sought within +-12 degrees.
"""

from __future__ import annotations

import math
from collections.abc import Iterator
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from readout.model import F64, Pixels
from readout.sighting.fold import Line
from readout.sighting.ridges import Ridges, averaged, ridges_of
from readout.sighting.rough import RoughArm

RIDGES_PER_BAND = 3
STEEPEST = math.tan(math.radians(12))
SLOPES = 31
CELL_COLUMNS = 3
"""votes this many columns apart count for one line: half a step of slope moves its ends by 2"""
SURE = 4.5
"""a ridge this many noise sd high is hardly noise: some 10^4 places are looked at"""
TOLERANCES = (4.0, 2.5, 1.5)
"""columns a ridge may be off the line, closer at each refinement"""
LEAST_BANDS = 5
LEAST_SHARE = 0.1
"""an arm must be seen in this share of the bands"""


@dataclass(frozen=True, slots=True)
class RoughCrosshair:
    """The best upright and the best level arm of one polarity; None where there is none.

    The level arm's line is that of the transposed picture.
    """

    upright: RoughArm | None
    level: RoughArm | None


@dataclass(frozen=True, slots=True)
class _Votes:
    """Ridges as points: column ``x`` and row ``y`` in columns, height in noise sd, width, band."""

    x: F64
    y: F64
    height: F64
    width: NDArray[np.intp]
    band: NDArray[np.intp]

    @property
    def weight(self) -> F64:
        """The brighter of two lines wins, but no blob with its few bands."""
        return np.asarray(np.log1p(self.height) * (self.height > SURE / 2))


def find_crosshairs(pixels: Pixels) -> Iterator[RoughCrosshair]:
    """Rough arms, first those of the polarity that stands out more, then the other."""
    small, step_px = averaged(pixels)
    upright, level = ridges_of(small, step_px), ridges_of(small.T, step_px)
    if upright is None or level is None:
        return
    outstanding = {
        polarity: sum(
            float(np.median((polarity * ridges.heights).max(axis=1))) for ridges in (upright, level)
        )
        for polarity in (1, -1)
    }
    for polarity in sorted(outstanding, key=lambda sign: -outstanding[sign]):
        yield RoughCrosshair(_arm(upright, polarity), _arm(level, polarity))


def _arm(ridges: Ridges, polarity: int) -> RoughArm | None:
    """The line of one polarity that most bands agree on."""
    votes = _strongest(ridges, polarity)
    line = _refined(votes, _most_voted(votes, ridges.heights.shape[1]))
    if line is None:
        return None
    found, seen = line
    if seen.size < max(LEAST_BANDS, LEAST_SHARE * len(ridges.heights)):
        return None
    if abs(found.slope) > STEEPEST:
        return None
    step = ridges.step_px
    return RoughArm(
        Line((found.middle_x + 0.5) * step - 0.5, found.slope, found.middle_y * step),
        polarity,
        float(np.median(votes.width[seen])) * step,
        float(votes.weight[seen].sum()),
    )


def _strongest(ridges: Ridges, polarity: int) -> _Votes:
    """The few highest ridges of each band, none within reach of a higher one."""
    left = np.maximum(polarity * ridges.heights, 0.0)
    band, column = np.arange(len(left)), np.arange(left.shape[1])
    at, heights, widths = [], [], []
    for _ in range(RIDGES_PER_BAND):
        peak = left.argmax(axis=1)
        at.append(peak)
        heights.append(left[band, peak])
        widths.append(ridges.widths[band, peak])
        left[np.abs(column[None, :] - peak[:, None]) <= 2 * widths[-1][:, None]] = 0.0
    return _Votes(
        np.concatenate(at).astype(np.float64),
        np.tile(ridges.band_middles_px / ridges.step_px, RIDGES_PER_BAND),
        np.concatenate(heights),
        np.concatenate(widths),
        np.tile(band, RIDGES_PER_BAND),
    )


def _most_voted(votes: _Votes, columns: int) -> Line:
    """The fullest cell of the table of slopes and columns."""
    middle_y = float(votes.y.mean())
    slopes = np.linspace(-STEEPEST, STEEPEST, SLOPES)
    crossing = votes.x[None, :] - slopes[:, None] * (votes.y - middle_y)[None, :]
    cells = 2 * columns
    cell = np.clip(np.rint(crossing) + columns // 2, 0, cells - 1).astype(np.intp)
    cell += np.arange(SLOPES)[:, None] * cells
    weights = np.broadcast_to(votes.weight, cell.shape)
    table = np.bincount(cell.ravel(), weights.ravel(), SLOPES * cells).reshape(SLOPES, cells)
    sums = np.cumsum(table, axis=1)
    together = sums[:, CELL_COLUMNS:] - sums[:, :-CELL_COLUMNS]
    slope, first = np.unravel_index(int(together.argmax()), together.shape)
    middle = float(first) + 1 + (CELL_COLUMNS - 1) / 2
    return Line(middle - columns // 2, float(slopes[slope]), middle_y)


def _refined(votes: _Votes, line: Line) -> tuple[Line, NDArray[np.intp]] | None:
    """A straight line through one ridge a band, and those of them that are hardly noise."""
    seen = np.zeros(0, dtype=np.intp)
    for tolerance in TOLERANCES:
        near = np.abs(votes.x - line.x_at(votes.y)) <= tolerance
        near &= votes.height > SURE / 2
        best = _highest_of_each(votes.band, np.where(near, votes.height, 0.0))
        if best.size < LEAST_BANDS:
            return None
        slope, middle_x = np.polyfit(
            votes.y[best] - line.middle_y, votes.x[best], 1, w=np.sqrt(votes.weight[best])
        )
        line = Line(float(middle_x), float(slope), line.middle_y)
        seen = best[votes.height[best] > SURE]
    return line, seen


def _highest_of_each(band: NDArray[np.intp], height: F64) -> NDArray[np.intp]:
    """Index of the highest ridge of each band that has one above 0."""
    order = np.argsort(-height, kind="stable")
    _, first = np.unique(band[order], return_index=True)
    best = order[first]
    return np.asarray(best[height[best] > 0])
