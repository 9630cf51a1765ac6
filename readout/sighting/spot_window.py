"""The part of a picture about a spot, averaged to the grain the spot needs."""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

from readout.model import F64
from readout.sighting.spot_model import Mask, SpotShape, Window

REACH_SPREADS = 5.5
"""half the side of the window, in standard deviations of the light: the ground's slope takes 2 %
of the knowledge of the place there, and 8 % at four"""
LEAST_REACH_PX = 7
MOST_CELLS_A_SIDE = 80
CELLS_A_BLUR = 1.6
"""pixels are averaged while the blur stays this many cells wide: it costs 1 % of the sd"""
MATCHES = 1.3
"""factor by which a window may be too wide or too narrow for its spot"""

Point = tuple[float, float]


@dataclass(frozen=True, slots=True)
class Picture:
    """Levels, pixels to be left out (or None), and the level at which pixels saturate."""

    pixels: NDArray[Any]
    unusable: Mask | None
    ceiling: float

    def about(self, x_px: float, y_px: float, reach_px: int, cell: int) -> Window | None:
        """A square that reaches so far from a point, without what is saturated or defective.

        None outside the picture.
        """
        length = (2 * reach_px + 1) // cell * cell
        rows = _span(y_px, length, self.pixels.shape[0], cell)
        columns = _span(x_px, length, self.pixels.shape[1], cell)
        part = self.pixels[rows, columns]
        if part.size == 0:
            return None
        bad = np.asarray(part >= self.ceiling)
        if self.unusable is not None:
            bad = bad | self.unusable[rows, columns]
        levels = part.astype(np.float64)
        if cell > 1:
            levels, bad = _averaged(levels, cell), _averaged(bad.astype(np.float64), cell) > 0
        middle = (cell - 1) / 2
        return Window(levels, ~bad, columns.start + middle, rows.start + middle, cell)

    def around(self, shape: SpotShape, others: Sequence[Point]) -> Window | None:
        """A window as a spot needs it, without the places nearer to one of the others."""
        reach, cell = needed(shape)
        window = self.about(shape.x, shape.y, reach, cell)
        for x_px, y_px in others:
            to_x, to_y = x_px - shape.x, y_px - shape.y
            if window is not None and math.hypot(to_x, to_y) < 3 * reach:
                rows, columns = window.usable.shape
                x = window.x0 + cell * np.arange(columns) - (x_px + shape.x) / 2
                y = window.y0 + cell * np.arange(rows) - (y_px + shape.y) / 2
                window.usable[x[None, :] * to_x + y[:, None] * to_y >= 0] = False
        return window


def needed(shape: SpotShape) -> tuple[int, int]:
    """Reach in pixels and cell of the window a spot needs."""
    reach = max(LEAST_REACH_PX, math.ceil(REACH_SPREADS * shape.spreads_px[0]) + 1)
    grain = int(shape.spreads_px[1] * shape.blur_share / CELLS_A_BLUR)
    return reach, max(1, grain, 2 * reach // MOST_CELLS_A_SIDE)


def suits(window: Window, old: SpotShape, new: SpotShape) -> bool:
    """True if a window cut for the old shape will do for the new one."""
    wanted, cell = needed(new)
    had, _ = needed(old)
    off = max(abs(new.x - old.x), abs(new.y - old.y))
    return cell == window.cell and had / MATCHES < wanted + off < had * MATCHES


def _span(middle: float, length: int, size: int, cell: int) -> slice:
    first = max(0, round(middle - length / 2 + 0.5))
    last = min(size, round(middle + length / 2 + 0.5))
    return slice(first, first + max(0, last - first) // cell * cell)


def _averaged(values: F64, cell: int) -> F64:
    rows, columns = values.shape[0] // cell, values.shape[1] // cell
    return np.asarray(values.reshape(rows, cell, columns, cell).mean(axis=(1, 3)))
