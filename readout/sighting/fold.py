"""A strip of pixels along an arm, folded onto its profile.

Along an upright arm each row cuts the profile at another sub-pixel phase. Rows of (nearly) one
phase add up to one sampled profile; the few sums kept here hold all that a least-squares fit of
position and slope needs, so that its cost no longer depends on the size of the picture.
"""

from __future__ import annotations

import math
from dataclasses import dataclass, replace

import numpy as np
from numpy.lib.stride_tricks import sliding_window_view
from numpy.typing import NDArray

from readout.model import F64, Pixels

PHASES = 16
"""groups of phase: within one the line moves by less than 1/32 px either way"""
DEEPEST = 8
"""most rows averaged to one slice: few enough that a speck of dust spoils a few slices only"""
MOST_BLIND = 0.1
"""pixels of one phase and column count for nothing if more than this share of them is blind"""
LEAST_SLICES = 8
LEAST_COLUMNS = 5


@dataclass(frozen=True, slots=True)
class Line:
    """x = middle_x + slope (y - middle_y): an upright arm, pixels; swap x and y for a level one."""

    middle_x: float
    slope: float
    middle_y: float

    def x_at(self, y: F64 | float) -> F64:
        return np.asarray(self.middle_x + self.slope * (np.asarray(y) - self.middle_y))

    def about(self, y: float) -> Line:
        """The same line referred to another row."""
        return Line(self.middle_x + self.slope * (y - self.middle_y), self.slope, y)

    @property
    def cosine(self) -> float:
        """Width of a pixel across the arm, in pixels."""
        return 1 / math.hypot(1.0, self.slope)


@dataclass(frozen=True, slots=True)
class Strip:
    """Slices across a line, (slices, columns), each with its place on it.

    A slice is the mean of ``depth`` neighbouring rows, so few that they cut the line at one phase.
    ``rows``: middle of each slice. ``phase``: line minus centre column, in [-0.5, 0.5] px.
    ``offsets``: columns relative to the centre column. ``brightest``: largest level in each mean.
    """

    line: Line
    depth: int
    rows: F64
    phase: F64
    offsets: F64
    levels: F64
    brightest: F64

    @property
    def along(self) -> F64:
        return self.rows - self.line.middle_y

    def only(self, keep: NDArray[np.bool_]) -> Strip:
        """The slices marked in ``keep``, the line referred to their middle."""
        rows = self.rows[keep]
        return replace(
            self,
            line=self.line.about(float(rows.mean())),
            rows=rows,
            phase=self.phase[keep],
            levels=self.levels[keep],
            brightest=self.brightest[keep],
        )


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
    side instead. Returns None if fewer than 8 slices or 5 columns remain.
    """
    height, width = pixels.shape
    depth = _depth(line, height)
    first_row = np.arange(height // depth) * depth
    rows = first_row + (depth - 1) / 2
    at = line.x_at(rows)
    kept = (rows + depth / 2 < skip_from) | (rows - depth / 2 > skip_to)
    to_border = np.minimum(at, width - 1 - at)
    inside, whole = kept & (to_border >= 1), kept & (to_border >= half_columns + 0.5)
    kept = whole if 2 * np.count_nonzero(whole) > np.count_nonzero(inside) else inside
    if np.count_nonzero(kept) < LEAST_SLICES:
        return None
    at, rows, first_row = at[kept], rows[kept], first_row[kept]
    centre = np.rint(at).astype(np.intp)
    first = max(-half_columns, -int(centre.min()))
    columns = min(half_columns, width - 1 - int(centre.max())) - first + 1
    if columns < LEAST_COLUMNS:
        return None
    windows = sliding_window_view(pixels, columns, axis=1)
    block = windows[first_row[:, None] + np.arange(depth), (centre + first)[:, None]]
    return Strip(
        line.about(float(rows.mean())),
        depth,
        rows,
        at - centre,
        np.arange(first, first + columns, dtype=np.float64),
        block.sum(axis=1, dtype=np.uint32) / depth,
        block.max(axis=1).astype(np.float64),
    )


def _depth(line: Line, height: int) -> int:
    """Rows to a slice: over them the line moves by less than a phase is wide."""
    depth = DEEPEST
    while depth > 1 and (depth * abs(line.slope) * PHASES > 0.5 or height < 32 * depth):
        depth //= 2
    return depth


@dataclass(frozen=True, slots=True)
class Fold:
    """Sums over the slices of each phase; shape (phases, columns), or (phases, 1) if it is one.

    ``u``: mean distance of the pixels across the arm, px. ``n``: number of slices. With c a
    slice's contrast relative to the arm's and a its distance along the arm: ``c``, ``ca``, ``c2``,
    ``c2a``, ``c2a2`` sums of the products named, ``cp``, ``c2p``, ``c2p2``, ``c2pa`` the same with
    p, the slice's phase less the mean of its group. ``level``, ``level_c``, ``level_ca``,
    ``level2``: sums of the levels, times c, times ca, squared. ``seen``: 0 where pixels say nothing, else 1;
    ``freedom``: how many of them scatter freely about their mean.
    ``group`` (slices,): the phase each slice went into; ``deviation`` (slices,): p.
    """

    u: F64
    n: F64
    c: F64
    ca: F64
    c2: F64
    c2a: F64
    c2a2: F64
    cp: F64
    c2p: F64
    c2p2: F64
    c2pa: F64
    level: F64
    level_c: F64
    level_ca: F64
    level2: F64
    seen: F64
    freedom: F64
    group: NDArray[np.intp]
    deviation: F64


def fold_strip(
    strip: Strip,
    levels: F64,
    contrast: F64,
    *,
    replaced: NDArray[np.bool_] | None = None,
    blind: NDArray[np.bool_] | None = None,
) -> Fold:
    """Sum the slices of a strip by sub-pixel phase.

    ``levels`` (slices, columns): the strip's own, or brought to a common height. ``contrast``
    (slices,): relative to the arm's: where the arm is faint its flanks say less of its place.
    ``replaced``, ``blind`` (slices, columns), if there are any: pixels that hold what is expected
    there, and those that are full.
    """
    group = np.minimum(((strip.phase + 0.5) * PHASES).astype(np.intp), PHASES - 1)
    present = np.bincount(group, minlength=PHASES) > 0
    group = (np.cumsum(present) - 1)[group]
    groups, slices = int(group.max()) + 1, len(group)
    along = strip.along
    weights = np.empty((3, slices))
    weights[0], weights[1], weights[2] = 1.0, contrast, contrast * along
    member = np.zeros((3, groups, slices))
    member[:, group, np.arange(slices)] = weights
    each = member[0]
    n = each.sum(axis=1)
    phase = (each @ strip.phase) / n
    deviation = strip.phase - phase[group]
    scalars = np.stack(
        [
            contrast,
            contrast * along,
            contrast**2,
            contrast**2 * along,
            (contrast * along) ** 2,
            contrast * deviation,
            contrast**2 * deviation,
            (contrast * deviation) ** 2,
            contrast**2 * deviation * along,
        ],
        axis=1,
    )
    c, ca, c2, c2a, c2a2, cp, c2p, c2p2, c2pa = (each @ scalars).T[:, :, None]
    level, level_c, level_ca = (member.reshape(-1, slices) @ levels).reshape(3, groups, -1)
    seen, freedom = np.ones_like(level), np.broadcast_to(n[:, None] - 1, level.shape)
    if blind is not None:
        seen = 1.0 * (each @ blind < MOST_BLIND * n[:, None])
    if replaced is not None:
        freedom = np.maximum(freedom - each @ replaced, 0.0)
    return Fold(
        (strip.offsets[None, :] - phase[:, None]) * strip.line.cosine,
        n[:, None],
        c,
        ca,
        c2,
        c2a,
        c2a2,
        cp,
        c2p,
        c2p2,
        c2pa,
        level,
        level_c,
        level_ca,
        each @ levels**2,
        seen,
        freedom,
        group,
        deviation,
    )
