"""A strip of pixels along an arm, folded onto its profile.

Along an upright arm each row cuts the profile at another sub-pixel phase. Rows of (nearly) one
phase add up to one sampled profile; the few sums kept here hold all that a least-squares fit of
position and slope needs, so that its cost no longer depends on the size of the picture.
"""

from __future__ import annotations

import math
from dataclasses import dataclass, replace
from typing import Any

import numpy as np
from numpy.lib.stride_tricks import as_strided
from numpy.typing import NDArray

from readout.model import F64, Pixels

PHASES = 8
"""groups of phase: within one the line moves by less than 1/16 px either way, which blurs the
profile by far less than its own blur, and known to first order"""
DEEPEST = 8
"""most rows averaged to one slice: few enough that a speck of dust spoils a few slices only"""
MOST_BLIND = 0.02
"""pixels of one phase and column count for nothing if more than this share of them is clipped: the
rest would be the darker ones"""
SMEAR_PX = 0.25
SLANT_PX = 4.0
"""a shadow that moves along the arm by more than this over half the strip is left out pixel by
pixel: that takes more time, and whole rows would cost more than 1 per cent of them"""
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
class Shadow:
    """Where another line lies over an arm: within ``reach_px`` of it, to either side.

    ``line``: as the arm's own picture sees it with rows and columns exchanged.
    """

    line: Line
    reach_px: float

    def distance(self, x: F64, y: F64) -> F64:
        """Distance of places from the line, px."""
        return np.asarray(np.abs(y - self.line.x_at(x)) * self.line.cosine)


@dataclass(frozen=True, slots=True)
class Strip:
    """Slices across a line, (slices, columns), each with its place on it.

    A slice is the mean of ``depth`` neighbouring rows, so few that the line hardly moves.
    ``rows``: middle of each slice. ``phase``: line minus centre column, in [-0.5, 0.5] px.
    ``offsets``: columns relative to the centre column. ``clipped``, ``missing``: places at full
    scale, or not to be used, in any of the rows; None if there are none. ``peak``: the brightest
    level.
    """

    line: Line
    depth: int
    rows: F64
    phase: F64
    offsets: F64
    levels: F64
    clipped: NDArray[np.bool_] | None
    missing: NDArray[np.bool_] | None
    peak: float

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
            clipped=None if self.clipped is None else self.clipped[keep],
            missing=None if self.missing is None else self.missing[keep],
        )


def cut_strip(
    pixels: Pixels,
    line: Line,
    half_columns: int,
    *,
    full_scale: float = math.inf,
    unusable: NDArray[np.bool_] | None = None,
    deepest: int = DEEPEST,
    shadow: Shadow | None = None,
) -> Strip | None:
    """Cut the strip of ``half_columns`` either side of ``line`` out of a picture.

    ``deepest``: most rows to a slice. What lies in the ``shadow`` of another arm is left out, and
    rows in which the border cuts the strip; where most rows are so, the whole strip is narrowed on
    that side instead. Returns None if fewer than 8 slices or 5 columns remain.
    """
    height, width = pixels.shape
    depth = _depth(line, height, deepest)
    first_row = np.arange(height // depth) * depth
    rows = first_row + (depth - 1) / 2
    at = line.x_at(rows)
    kept = _out_of(shadow, at, rows, half_columns, depth)
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
    places = first_row[:, None] + np.arange(depth), (centre + first)[:, None]
    block = _stretches(pixels, columns)[places]
    peak = float(block.max())
    missing = None if unusable is None else _stretches(unusable, columns)[places].any(axis=1)
    offsets = np.arange(first, first + columns, dtype=np.float64)
    if shadow is not None and _slants(shadow, half_columns):
        across = shadow.distance(centre[:, None] + offsets, rows[:, None])
        shadowed = across < shadow.reach_px + depth / 2
        missing = shadowed if missing is None else missing | shadowed
    return Strip(
        line.about(float(rows.mean())),
        depth,
        rows,
        at - centre,
        offsets,
        block.sum(axis=1, dtype=np.float64 if block.dtype.kind == "f" else np.uint32) / depth,
        np.asarray((block >= full_scale).any(axis=1)) if peak >= full_scale else None,
        missing,
        peak,
    )


def _slants(shadow: Shadow, half_columns: int) -> bool:
    """True if a shadow crosses the strip so slantingly that whole rows would be a waste."""
    return half_columns * abs(shadow.line.slope) > SLANT_PX


def _out_of(
    shadow: Shadow | None, at: F64, rows: F64, half_columns: int, depth: int
) -> NDArray[np.bool_]:
    """Rows that are not wholly in the shadow; none of it in any row if it does not slant."""
    if shadow is None:
        return np.ones(rows.shape, dtype=np.bool_)
    drift = half_columns * abs(shadow.line.slope)
    reach = shadow.reach_px + depth / 2
    wholly = reach - drift if _slants(shadow, half_columns) else reach + drift
    return shadow.distance(at, rows) >= wholly


def _stretches(picture: NDArray[Any], columns: int) -> NDArray[Any]:
    """Every stretch of so many pixels along a row, (rows, places, columns), without a copy."""
    height, width = picture.shape
    down, right = picture.strides
    shape = (height, width - columns + 1, columns)
    return as_strided(picture, shape, (down, right, right), writeable=False)


def _depth(line: Line, height: int, depth: int) -> int:
    """Rows to a slice: over them the line moves no more than blurs a sharp one by 1 per cent."""
    while depth > 1 and (depth * abs(line.slope) > SMEAR_PX or height < 32 * depth):
        depth //= 2
    return depth


@dataclass(frozen=True, slots=True)
class FoldedContrast:
    """Sums over the slices of each phase, (phases, 1), of products.

    c is a slice's contrast relative to the arm's, a its distance along the arm, p its phase less
    the mean of its group.
    """

    c: F64
    ca: F64
    c2: F64
    c2a: F64
    c2a2: F64
    cp: F64
    c2p: F64
    c2p2: F64
    c2pa: F64


@dataclass(frozen=True, slots=True)
class Fold:
    """Sums over the slices of each phase; (phases, columns), or (phases, 1) if columns are alike.

    ``u``: mean distance of the pixels across the arm, px. ``n``: number of slices. ``of``: sums
    of what the slices are like. ``level``, ``level_c``, ``level_ca``, ``level_cp``, ``level2``:
    sums of the levels, times c, times ca, times cp, squared. ``seen``: 0 where pixels say nothing,
    else 1. ``group``, ``deviation`` (slices,): the phase each slice went into, and p.
    ``contrasted``: whether c differs from 1 anywhere.
    """

    u: F64
    n: F64
    of: FoldedContrast
    level: F64
    level_c: F64
    level_ca: F64
    level_cp: F64
    level2: F64
    seen: F64
    group: NDArray[np.intp]
    deviation: F64
    contrasted: bool


def fold_strip(
    strip: Strip,
    levels: F64,
    contrast: F64 | None = None,
    missing: NDArray[np.bool_] | None = None,
) -> Fold:
    """Sum the slices of a strip by sub-pixel phase.

    ``levels`` (slices, columns): the strip's own, or freed of their grounds. ``contrast``
    (slices,): relative to the arm's, if it is not the same everywhere. ``missing`` (slices,
    columns): pixels left out, if there are any.
    """
    group = np.minimum(((strip.phase + 0.5) * PHASES).astype(np.intp), PHASES - 1)
    present = np.bincount(group, minlength=PHASES) > 0
    group = (np.cumsum(present) - 1)[group]
    groups, slices = int(np.count_nonzero(present)), len(group)
    member = np.zeros((groups, slices))
    member[group, np.arange(slices)] = 1.0
    slices_of = member.sum(axis=1)
    phase = (member @ strip.phase) / slices_of
    deviation = strip.phase - phase[group]
    c = np.ones(slices) if contrast is None else contrast
    ca, cp = c * strip.along, c * deviation
    products = np.stack([c, ca, c * c, c * ca, ca * ca, cp, c * cp, cp * cp, cp * ca])
    n: F64 = slices_of[:, None]
    if missing is None:
        sums = (products @ member.T)[:, :, None]
        seen = np.ones((groups, len(strip.offsets)))
    else:
        there = 1.0 - missing
        levels = levels * there
        each = (products[:, None, :] * member).reshape(-1, slices) @ there
        sums = each.reshape(len(products), groups, -1)
        n = member @ there
        seen = (n >= 1).astype(np.float64)
        n = np.maximum(n, 1.0)
    if strip.clipped is not None:
        seen = np.where(member @ strip.clipped < MOST_BLIND * slices_of[:, None], seen, 0.0)
    level, level_ca = member @ levels, (member * ca) @ levels
    level_c = level if contrast is None else (member * c) @ levels
    return Fold(
        (strip.offsets[None, :] - phase[:, None]) * strip.line.cosine,
        n,
        FoldedContrast(*sums),
        level,
        level_c,
        level_ca,
        (member * cp) @ levels,
        member @ levels**2,
        seen,
        group,
        deviation,
        contrast is not None,
    )
