"""Straight lines that the ridges of many bands agree on.

Each ridge votes for the lines through it that have about its slope, as in the Hough transform
(R. O. Duda and P. E. Hart, Commun. ACM 15 (1972) 11). The fullest cell is a line; its ridges are
taken out, and the next fullest is sought.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from readout.model import F64
from readout.sighting.fold import Line
from readout.sighting.peaks import FAINTEST, Peaks

STEEPEST = 1.08
"""tangent of 47 degrees: a line at 45 is sure to be met upright or level"""
SLOPES = 97
CELL_COLUMNS = 2
SLOPE_SLACK = 0.8
"""steps of slope by which a ridge may be wrong"""
TOLERANCES = (3.0, 1.5)
"""columns a ridge may be off the line, closer at the second refinement"""
HIGHEST = 30.0
"""a ridge higher than this many noise sd draws a line no more than one as high"""
LEAST_BANDS = 3
MISSING = 0.5
"""what a band without a ridge takes from the strength, as a share of what one with a ridge gives"""
LEAST_STRENGTH = 3.0
LEAST_OF_STRONGEST = 0.07
LEAST_VOTES = 0.5
"""the votes for a line are spread over a few cells: one holds at least half its strength"""
MOST_LINES = 6
MOST_VAIN = 3
"""so many fullest cells that turn out to be no line end the search"""


@dataclass(frozen=True, slots=True)
class AgreedLine:
    """A line in averaged columns and rows, the median width of its ridges, and its strength.

    ``strength``: sum of ln(height / least height looked at) over the bands where it is seen, less
    half their median for each band between them where it is not.
    """

    line: Line
    width: float
    strength: float


def lines_of(peaks: Peaks, strongest: float = 0.0) -> list[AgreedLine]:
    """The lines that most bands agree on, each of other ridges than the ones before.

    Lines that are weak beside the strongest, or beside the ``strongest`` already known, are
    shadows of dust, of edges and of the blocks of compression, and left out.
    """
    lines: list[AgreedLine] = []
    weight = np.log(peaks.height / FAINTEST)
    votes = _Votes.of(peaks)
    least = max(LEAST_STRENGTH, LEAST_OF_STRONGEST * strongest)
    vain = 0
    while len(lines) < MOST_LINES and vain < MOST_VAIN:
        line = votes.fullest(weight, LEAST_VOTES * least)
        if line is None:
            break
        line, near = _refined(peaks, weight, line)
        found = _agreed(peaks, weight, line, near)
        if found is not None and found.strength >= least:
            lines.append(found)
            least = max(least, LEAST_OF_STRONGEST * found.strength)
        else:
            vain += 1
        weight[near] = 0.0
    return lines


@dataclass(frozen=True, slots=True)
class _Votes:
    """Cells each ridge votes for and the share of its vote in each, (ridges, votes)."""

    cell: NDArray[np.intp]
    share: F64
    slopes: F64
    columns: int
    first_column: float
    middle_y: float

    @classmethod
    def of(cls, peaks: Peaks) -> _Votes:
        slopes = np.linspace(-STEEPEST, STEEPEST, SLOPES)
        step = slopes[1] - slopes[0]
        middle_y = (peaks.rows - 1) / 2
        reach = int(SLOPE_SLACK * peaks.slope_step / step + 1)
        own = np.rint((peaks.slope + STEEPEST) / step).astype(np.intp)
        slope = own[:, None] + np.arange(-reach, reach + 1)[None, :]
        valid = (slope >= 0) & (slope < SLOPES)
        slope = np.clip(slope, 0, SLOPES - 1)
        first = -STEEPEST * middle_y
        columns = int((peaks.columns - 2 * first) / CELL_COLUMNS) + 2
        at = peaks.x[:, None] - slopes[slope] * (peaks.y - middle_y)[:, None] - first
        at = np.clip(at / CELL_COLUMNS, 0, columns - 2)
        low = at.astype(np.intp)
        part = at - low
        cell = slope * columns + low
        return cls(
            np.concatenate([cell, cell + 1], axis=1),
            np.concatenate([(1 - part) * valid, part * valid], axis=1),
            slopes,
            columns,
            first,
            middle_y,
        )

    def fullest(self, weight: F64, least: float) -> Line | None:
        """The line most voted for; None where none has as many votes as the least."""
        table = np.bincount(
            self.cell.ravel(), (self.share * weight[:, None]).ravel(), SLOPES * self.columns
        )
        best = int(table.argmax())
        if table[best] < least:
            return None
        slope, column = divmod(best, self.columns)
        x = column * CELL_COLUMNS + self.first_column
        return Line(x, float(self.slopes[slope]), self.middle_y)


def _refined(peaks: Peaks, weight: F64, line: Line) -> tuple[Line, NDArray[np.intp]]:
    """A straight line through the ridges nearby, and which they are."""
    wide = np.maximum(1.0, peaks.width / 3)
    for tolerance in TOLERANCES:
        off = peaks.x - line.x_at(peaks.y)
        near = np.abs(off) <= tolerance * wide
        near &= np.abs(peaks.slope - line.slope) <= 1.5 * SLOPE_SLACK * peaks.slope_step
        used = np.nonzero(near & (weight > 0))[0]
        used = used[np.diff(peaks.band[used], prepend=-1) > 0]  # the highest of each band
        if used.size < 2:
            break
        line = _through(line, peaks.y[used], off[used], np.minimum(peaks.height[used], HIGHEST))
    off = np.abs(peaks.x - line.x_at(peaks.y))
    return line, np.nonzero(off <= np.maximum(TOLERANCES[-1] * wide, 2.0))[0]


def _through(line: Line, y: F64, off: F64, weight: F64) -> Line:
    """The line moved and turned to the weighted least squares of points ``off`` it."""
    total = weight.sum()
    along = y - line.middle_y
    mean_along, mean_off = weight @ along / total, weight @ off / total
    along = along - mean_along
    turn = weight @ (along * off) / max(weight @ along**2, 1e-9)
    moved = mean_off - turn * mean_along
    return Line(float(line.middle_x + moved), float(line.slope + turn), line.middle_y)


def _agreed(peaks: Peaks, weight: F64, line: Line, near: NDArray[np.intp]) -> AgreedLine | None:
    """The line if it is seen in enough bands that follow each other."""
    seen = near[weight[near] > 0]
    seen = seen[np.diff(peaks.band[seen], prepend=-1) > 0]
    if seen.size < LEAST_BANDS or abs(line.slope) > STEEPEST:
        return None
    of_band = np.full(peaks.band[-1] + 2, -MISSING * float(np.median(weight[seen])))
    of_band[0] = 0.0
    of_band[peaks.band[seen] + 1] = weight[seen]
    total = np.cumsum(of_band)
    strength = float((total - np.minimum.accumulate(total)).max())
    return AgreedLine(line, float(np.median(peaks.width[seen])), strength)
