"""A picture turned until the marks of a scale stand upright, and what stands out in it."""

from __future__ import annotations

import math
from dataclasses import dataclass

import cv2
import numpy as np
from numpy.typing import NDArray
from scipy.ndimage import maximum_filter1d

from readout.model import F64, Pixels

F32 = NDArray[np.float32]
ROUNDING_LEVELS = 0.3
SURE = 5.0
SIDE_LOBE_SIZES = 2.0
LEAST_OF_NEAR = 0.6
LENGTH_WIDTHS = 6.0
"""marks are sought by their sum over this many sizes along them"""


@dataclass(frozen=True, slots=True)
class View:
    """The picture turned by -``turn_rad`` about its middle, in a frame that holds all of it.

    ``levels`` and ``inside`` (rows, columns); a column is a place along the scale, a row a place
    along the marks. ``to_picture`` (2, 3): from (column, row, 1) to (x, y).
    """

    turn_rad: float
    levels: F32
    inside: NDArray[np.bool_]
    to_picture: F64

    def places(self, column: F64, row: F64) -> F64:
        """Points of the view in the picture, (n, 2)."""
        return np.stack([column, row, np.ones_like(column)], axis=-1) @ self.to_picture.T


def turned_view(pixels: Pixels, seen: NDArray[np.bool_], turn_rad: float) -> View:
    """The view along a direction (from +x towards +y); ``seen``: False where an arm lies."""
    height, width = pixels.shape
    c, s = math.cos(turn_rad), math.sin(turn_rad)
    columns = math.ceil(abs(c) * width + abs(s) * height)
    rows = math.ceil(abs(s) * width + abs(c) * height)
    middle = np.array([(columns - 1) / 2, (rows - 1) / 2])
    turn = np.array([[c, -s], [s, c]])
    shift = np.array([(width - 1) / 2, (height - 1) / 2]) - turn @ middle
    to_picture = np.concatenate([turn, shift[:, None]], axis=1)
    flags = cv2.INTER_LINEAR | cv2.WARP_INVERSE_MAP
    levels = cv2.warpAffine(
        pixels.astype(np.float32),
        to_picture,
        (columns, rows),
        flags=flags,
        borderMode=cv2.BORDER_REPLICATE,
    )
    inside = cv2.warpAffine(
        seen.astype(np.uint8),
        to_picture,
        (columns, rows),
        flags=cv2.INTER_NEAREST | cv2.WARP_INVERSE_MAP,
        borderValue=0,
    )
    return View(
        turn_rad,
        np.asarray(levels, dtype=np.float32),
        np.asarray(inside, dtype=np.bool_),
        np.asarray(to_picture),
    )


def response(view: View, size_px: float) -> F32:
    """How much each place looks like the middle of an upright dark mark, in sds of the noise.

    Second derivative across of a Gaussian of ``size_px``, averaged along the mark. Lit marks are
    negative. 0 outside the picture and near what is not to be seen.
    """
    half = math.ceil(4 * size_px)
    across = np.arange(-half, half + 1) / size_px
    kernel = (across**2 - 1) * np.exp(-0.5 * across**2)
    kernel -= kernel.mean()
    kernel /= math.sqrt(float(kernel @ kernel))
    length = max(3, round(LENGTH_WIDTHS * size_px))
    summed = cv2.sepFilter2D(
        view.levels,
        cv2.CV_32F,
        kernel,
        np.full(length, 1 / length),
        borderType=cv2.BORDER_REPLICATE,
    )
    reach = 2 * math.ceil(2.5 * size_px) + 1
    hidden = cv2.dilate((~view.inside).astype(np.uint8), np.ones((1, reach), np.uint8)) > 0
    seen = summed[~hidden]
    if seen.size == 0:
        return np.zeros_like(summed)
    noise = 1.4826 * float(np.median(np.abs(seen)))
    noise = max(noise, ROUNDING_LEVELS / math.sqrt(length))
    out = np.asarray(summed / noise, dtype=np.float32)
    out[hidden] = 0.0
    return out


def row_peaks(row: F64 | F32, size_px: float) -> NDArray[np.intp]:
    """Columns of the maxima of one row of a response that stand out.

    The response to a mark has two side lobes of the other sign, 0.45 as high: they are none. Nor is
    the flank of one that is hidden, which is highest where it is last seen.
    """
    before, middle, after = row[:-2], row[1:-1], row[2:]
    is_top = (middle > SURE) & (middle >= before) & (middle > after)
    top = np.flatnonzero(is_top & (before != 0) & (after != 0)) + 1
    if top.size == 0:
        return top
    about = maximum_filter1d(np.abs(row), 2 * math.ceil(SIDE_LOBE_SIZES * size_px) + 1)
    return np.asarray(top[row[top] > LEAST_OF_NEAR * about[top]])
