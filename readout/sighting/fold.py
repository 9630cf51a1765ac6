"""A strip of pixels along an arm, folded onto its profile.

Along an upright arm each row cuts the profile at another sub-pixel phase. Rows of (nearly) one
phase add up to one sampled profile; the few sums kept here hold all that a least-squares fit of
position and slope needs, so that its cost no longer depends on the size of the picture.
"""

from __future__ import annotations

import math
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from readout.model import F64, Pixels

PHASES = 32


@dataclass(frozen=True, slots=True)
class Line:
    """x = middle_x + slope (y - middle_y): an upright arm, pixels; swap x and y for a level one."""

    middle_x: float
    slope: float
    middle_y: float

    def x_at(self, y: F64 | float) -> F64:
        return np.asarray(self.middle_x + self.slope * (np.asarray(y) - self.middle_y))

    @property
    def cosine(self) -> float:
        """Width of a pixel across the arm, in pixels."""
        return 1 / math.hypot(1.0, self.slope)


@dataclass(frozen=True, slots=True)
class Strip:
    """Rows of pixels centred on a line, (rows, columns), with each row's place on it.

    ``phase``: line minus centre column, in [-0.5, 0.5] px. ``along``: row minus ``line.middle_y``.
    ``offsets``: columns relative to the centre column.
    """

    line: Line
    levels: F64
    rows: F64
    phase: F64
    offsets: F64

    @property
    def along(self) -> F64:
        return self.rows - self.line.middle_y

    def only(self, keep: NDArray[np.bool_]) -> Strip:
        """The rows marked in ``keep``."""
        return replace(self, levels=self.levels[keep], rows=self.rows[keep], phase=self.phase[keep])

    def about_its_middle(self) -> Strip:
        """The same strip, its line referred to the mean of its rows."""
        middle = float(self.rows.mean())
        return replace(self, line=Line(float(self.line.x_at(middle)), self.line.slope, middle))


def cut_strip(
    pixels: Pixels,
    line: Line,
    half_columns: int,
    *,
    skip_from: float = math.inf,
    skip_to: float = -math.inf,
) -> Strip | None:
    """Cut the strip of ``half_columns`` either side of ``line`` out of a picture.

    Rows from ``skip_from`` to ``skip_to`` (where the other arm crosses) are left out, and rows in
    which the border cuts the strip; where most rows are so, the whole strip is narrowed on that
    side instead. Returns None if fewer than 8 rows or 5 columns remain.
    """
    height, width = pixels.shape
    rows = np.arange(height, dtype=np.float64)
    rows = rows[(rows < skip_from) | (rows > skip_to)]
    to_border = np.minimum(line.x_at(rows), width - 1 - line.x_at(rows))
    inside = rows[to_border >= 1]
    whole = rows[to_border >= half_columns + 1]
    rows = whole if 2 * whole.size > inside.size else inside
    if rows.size < 8:
        return None
    at = line.x_at(rows)
    centre = np.rint(at).astype(np.intp)
    first = max(-half_columns, -int(centre.min()))
    last = min(half_columns, width - 1 - int(centre.max()))
    if last - first < 4:
        return None
    offsets = np.arange(first, last + 1)
    levels = pixels[rows.astype(np.intp)[:, None], centre[:, None] + offsets[None, :]].astype(
        np.float64
    )
    return Strip(line, levels, rows, at - centre, offsets.astype(np.float64))


@dataclass(frozen=True, slots=True)
class Fold:
    """Sums over the rows of each phase; shape (phases, columns) where a column matters.

    ``u``: mean distance of the pixels across the arm, px. ``n``, ``along``, ``along2``: number of
    rows, sum of their distances along the arm and of its squares, shape (phases, 1).
    ``phase2``, ``phase_along``: sums of (phase - mean)^2 and (phase - mean)*along.
    ``level``, ``level_along``, ``level2``: sums of the levels, times along, squared.
    ``group``, ``deviation`` (rows,): each row's phase, and by how much it differs from the mean.
    """

    u: F64
    n: F64
    along: F64
    along2: F64
    phase2: F64
    phase_along: F64
    level: F64
    level_along: F64
    level2: F64
    group: NDArray[np.intp]
    deviation: F64


def fold_strip(strip: Strip) -> Fold:
    """Sum the rows of a strip by sub-pixel phase."""
    group = np.minimum(((strip.phase + 0.5) * PHASES).astype(np.intp), PHASES - 1)
    present, group = np.unique(group, return_inverse=True)
    member = np.zeros((present.size, group.size))
    member[group, np.arange(group.size)] = 1.0
    n = member.sum(axis=1, keepdims=True)
    phase = (member @ strip.phase)[:, None] / n
    deviation = strip.phase - phase[group, 0]
    member_along = member * strip.along
    return Fold(
        u=(strip.offsets[None, :] - phase) * strip.line.cosine,
        n=n,
        along=member_along.sum(axis=1, keepdims=True),
        along2=(member_along @ strip.along)[:, None],
        phase2=(member @ deviation**2)[:, None],
        phase_along=(member_along @ deviation)[:, None],
        level=member @ strip.levels,
        level_along=member_along @ strip.levels,
        level2=member @ strip.levels**2,
        group=group,
        deviation=deviation,
    )
