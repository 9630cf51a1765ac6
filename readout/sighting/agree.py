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
from readout.sighting.peaks import Peaks

STEEPEST = 1.08
"""tangent of 47 degrees: a line at 45 is sure to be met upright or level"""
SLOPES = 145
CELL_COLUMNS = 2
SLOPE_SLACK = 1.3
"""steps of slope by which a ridge may be wrong"""
TOLERANCES = (3.0, 2.0, 1.5)
"""columns a ridge may be off the line, closer at each refinement"""
SURE = 4.5
"""a ridge this many noise sd high is hardly noise"""
LEAST_BANDS = 3
LEAST_SHARE = 0.12
LEAST_STRENGTH = 8.0
MOST_LINES = 6
MOST_TRIES = 12


@dataclass(frozen=True, slots=True)
class AgreedLine:
    """A line in averaged columns and rows, its ridges' median width, and its strength.

    ``strength``: sum of ln(1 + height / noise sd) over the bands it is seen in.
    ``first``, ``last``: the bands it is seen in.
    """

    line: Line
    width: float
    strength: float
    first: int
    last: int


def lines_of(peaks: Peaks) -> list[AgreedLine]:
    """The lines that most bands agree on, each of other ridges than the ones before."""
    height = peaks.height.copy()
    lines: list[AgreedLine] = []
    middle = float(peaks.y.mean())
    votes = _Votes.of(peaks, middle)
    for _ in range(MOST_TRIES):
        weight = np.log1p(height)
        cell = votes.fullest(weight)
        if cell is None:
            break
        line, used = _refined(peaks, height, cell)
        found = _agreed(peaks, height, line, used)
        if found is not None:
            lines.append(found)
        height[used] = 0.0
        if len(lines) == MOST_LINES:
            break
    return lines


@dataclass(frozen=True, slots=True)
class _Votes:
    """Cells each ridge votes for, (voters, slopes near its own)."""

    voter: tuple[NDArray[np.intp], ...]
    cell: NDArray[np.intp]
    share: F64
    slopes: F64
    columns: int
    first_column: float
    middle_y: float

    @classmethod
    def of(cls, peaks: Peaks, middle_y: float) -> _Votes:
        slopes = np.linspace(-STEEPEST, STEEPEST, SLOPES)
        step = slopes[1] - slopes[0]
        voter = np.nonzero(peaks.height > 0)
        reach = int(np.ceil(SLOPE_SLACK * peaks.slope_step / step))
        own = np.rint((peaks.slope[voter] + STEEPEST) / step).astype(np.intp)
        slope = own[:, None] + np.arange(-reach, reach + 1)[None, :]
        valid = (slope >= 0) & (slope < SLOPES)
        slope = np.clip(slope, 0, SLOPES - 1)
        along = peaks.y[voter[0], 0] - middle_y
        first = -STEEPEST * middle_y - 2
        columns = int((peaks.columns - 2 * first) / CELL_COLUMNS) + 2
        at = (peaks.x[voter][:, None] - slopes[slope] * along[:, None] - first) / CELL_COLUMNS
        at = np.clip(at, 0, columns - 2)
        low = at.astype(np.intp)
        part = at - low
        cell = slope * columns + low
        return cls(
            voter,
            np.concatenate([cell, cell + 1], axis=1),
            np.concatenate([(1 - part) * valid, part * valid], axis=1),
            slopes,
            columns,
            first,
            middle_y,
        )

    def fullest(self, weight: F64) -> Line | None:
        """The line most voted for; None where no votes are left."""
        shares = self.share * weight[self.voter][:, None]
        table = np.bincount(self.cell.ravel(), shares.ravel(), SLOPES * self.columns)
        best = int(table.argmax())
        if table[best] < LEAST_STRENGTH / 2:
            return None
        slope, column = divmod(best, self.columns)
        x = column * CELL_COLUMNS + self.first_column
        return Line(x, float(self.slopes[slope]), self.middle_y)


def _refined(peaks: Peaks, height: F64, line: Line) -> tuple[Line, NDArray[np.bool_]]:
    """A straight line through the ridges nearby, and which they are."""
    wide = np.maximum(1.0, peaks.width / 3)
    for tolerance in TOLERANCES:
        alike = np.abs(peaks.slope - line.slope) <= 1.5 * SLOPE_SLACK * peaks.slope_step
        off = peaks.x - line.x_at(peaks.y)
        near = (np.abs(off) <= tolerance * wide) & alike & (height > 0)
        weight = np.where(near, np.minimum(height, 30.0), 0.0)
        weight *= weight >= weight.max(axis=1, keepdims=True)  # one a band
        total = weight.sum()
        if total == 0:
            break
        along = peaks.y - line.middle_y
        mean_y = (weight * along).sum() / total
        mean_off = (weight * off).sum() / total
        spread = (weight * (along - mean_y) ** 2).sum()
        turn = (weight * (along - mean_y) * off).sum() / spread if spread > 0 else 0.0
        line = Line(
            float(line.middle_x + mean_off - turn * mean_y), float(line.slope + turn), line.middle_y
        )
    off = np.abs(peaks.x - line.x_at(peaks.y))
    return line, (off <= np.maximum(TOLERANCES[-1] * wide, 2.0)) & (height > 0)


def _agreed(peaks: Peaks, height: F64, line: Line, used: NDArray[np.bool_]) -> AgreedLine | None:
    """The line if it is seen in enough bands."""
    if abs(line.slope) > STEEPEST:
        return None
    highest = np.where(used, height, 0.0).max(axis=1)
    x = line.x_at(peaks.y[:, 0])
    inside = (x > -1) & (x < peaks.columns)
    seen = np.nonzero(highest > SURE)[0]
    strength = float(np.log1p(highest[highest > SURE / 2]).sum())
    if seen.size < max(LEAST_BANDS, LEAST_SHARE * inside.sum()) or strength < LEAST_STRENGTH:
        return None
    return AgreedLine(
        line, float(np.median(peaks.width[used])), strength, int(seen[0]), int(seen[-1])
    )
