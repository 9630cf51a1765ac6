"""Sums along short straight stretches of every slope, from a picture averaged to a small one.

The approximate discrete Radon transform (M. L. Brady, SIAM J. Comput. 27 (1998) 107), stopped
after a few doublings: two stretches of half the length, the second one moved sideways, make one of
the whole length, so that all slopes together cost little more than a few sums of the picture. A
line turned by anything up to 45 degrees then lies along one of the stretches in each band.
"""

from __future__ import annotations

import math
from dataclasses import dataclass

import cv2
import numpy as np
from numpy.typing import NDArray

from readout.model import F64, Pixels

F32 = NDArray[np.float32]

LARGEST_AREA_PX2 = 90_000
"""the picture is halved until no more pixels than this are left"""
DOUBLINGS = 3
"""a stretch is 2^3 averaged rows long, where the picture has the rows"""
LEAST_DOUBLINGS = 2
LEAST_BANDS = 6


@dataclass(frozen=True, slots=True)
class Stretches:
    """``sums``: (slopes, bands, columns), of ``rows`` averaged rows each.

    Slope k stands for ``shifts[k]`` columns from the first to the last row of a band; it is even,
    so that the middle of a stretch is a column.
    """

    sums: F32
    shifts: NDArray[np.intp]
    rows: int

    @property
    def slopes(self) -> F64:
        """Columns a row, in even steps."""
        return np.asarray(self.shifts / (self.rows - 1))

    @property
    def slope_step(self) -> float:
        return 2 / (self.rows - 1)


def averaged(pixels: Pixels) -> tuple[F32, int]:
    """The picture with each step x step pixels averaged to one, and the step, a power of 2.

    Rows and columns that do not fill a step are filled up with their neighbours.
    """
    step = 1
    while pixels.size > LARGEST_AREA_PX2 * step**2:
        step *= 2
    small: F32 = pixels.astype(np.float32)
    height, width = pixels.shape
    below, right = -height % step, -width % step
    if below or right:
        small = np.asarray(
            cv2.copyMakeBorder(small, 0, below, 0, right, cv2.BORDER_REPLICATE), dtype=np.float32
        )
    for _ in range(step.bit_length() - 1):
        size = (small.shape[1] // 2, small.shape[0] // 2)
        small = np.asarray(cv2.resize(small, size, interpolation=cv2.INTER_AREA), dtype=np.float32)
    return small, step


def stretches_of(small: F32) -> Stretches | None:
    """Sums along the stretches of each band of rows; None where there are too few rows."""
    doublings = min(DOUBLINGS, int(math.log2(max(1, small.shape[0] // LEAST_BANDS))))
    if doublings < LEAST_DOUBLINGS:
        return None
    rows = 2**doublings
    bands, columns = small.shape[0] // rows, small.shape[1]
    pad = rows - 2
    padded = cv2.copyMakeBorder(small[: bands * rows], 0, 0, pad, pad, cv2.BORDER_REPLICATE)
    sums = np.asarray(padded, dtype=np.float32)[None]
    for doubling in range(1, doublings):
        largest = 2**doubling - 1
        shifts = np.arange(-largest, largest + 1)
        reach = 2 ** (doubling - 1)
        first = np.full(shifts.size, reach)
        sums = _doubled(sums, shifts, first, sums.shape[2] - 2 * reach)
    shifts = np.arange(2 - rows, rows, 2)
    first = (sums.shape[2] - columns - shifts) // 2
    return Stretches(_doubled(sums, shifts, first, columns), shifts, rows)


def _doubled(halves: F32, shifts: NDArray[np.intp], first: NDArray[np.intp], columns: int) -> F32:
    """Stretches of twice the rows for each shift, their top rows from its column ``first`` on."""
    middle = len(halves) // 2
    whole = np.empty((shifts.size, halves.shape[1] // 2, columns), dtype=np.float32)
    for out, shift, start in zip(whole, shifts.tolist(), first.tolist(), strict=True):
        half = abs(shift) // 2
        move = abs(shift) - half
        of_half = halves[middle + (half if shift > 0 else -half)]
        below = start + (move if shift > 0 else -move)
        top, bottom = of_half[0::2, start : start + columns], of_half[1::2, below : below + columns]
        np.add(top, bottom, out=out)
    return whole
