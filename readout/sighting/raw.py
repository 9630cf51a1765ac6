"""Samples as sensors give them: packed luma, shifted bits, a mosaic of colours.

A mosaic is never interpolated: that mixes neighbours and adds an error that goes with the
sub-pixel phase. One colour's plane is taken instead, a picture of half the size whose pixels stand
two apart, from an offset that is known exactly.
"""

from __future__ import annotations

from dataclasses import dataclass
from enum import StrEnum
from typing import Any

import cv2
import numpy as np
from numpy.typing import NDArray

from readout.errors import BadInput
from readout.model import Pixels


class Mosaic(StrEnum):
    """The four colours of the top-left square of a Bayer mosaic, row by row."""

    RGGB = "RGGB"
    BGGR = "BGGR"
    GRBG = "GRBG"
    GBRG = "GBRG"


class Colour(StrEnum):
    """A colour of the mosaic; of green there are two in a square, and their mean is taken."""

    RED = "R"
    GREEN = "G"
    BLUE = "B"


@dataclass(frozen=True, slots=True)
class Plane:
    """One colour of a mosaic. Its pixel (0, 0) stands at (``x0_px, y0_px``) in the frame, the
    next ones two pixels on.

    The mean of the two greens halves the variance of a pixel and stands in the middle of its
    square. Red or blue alone is right for a lamp of that colour.
    """

    mosaic: Mosaic
    colour: Colour = Colour.GREEN

    @property
    def places(self) -> tuple[tuple[int, int], ...]:
        """(row, column) of the colour within the square: one, or green's two."""
        return tuple(divmod(k, 2) for k, letter in enumerate(self.mosaic) if letter == self.colour)

    @property
    def x0_px(self) -> float:
        return sum(column for _, column in self.places) / len(self.places)

    @property
    def y0_px(self) -> float:
        return sum(row for row, _ in self.places) / len(self.places)

    def taken_from(self, picture: NDArray[Any]) -> NDArray[Any]:
        """The colour's pixels: of the sensor's type, or float32 where two greens are averaged.

        Samples in, samples out; a last odd row or column is left out.
        """
        rows, columns = picture.shape[0] // 2 * 2, picture.shape[1] // 2 * 2
        parts = [
            np.ascontiguousarray(picture[row:rows:2, column:columns:2])
            for row, column in self.places
        ]
        if len(parts) == 1:
            return parts[0]
        return np.asarray(cv2.addWeighted(parts[0], 0.5, parts[1], 0.5, 0.0, dtype=cv2.CV_32F))

    def any_of(self, mask: NDArray[np.bool_]) -> NDArray[np.bool_]:
        """True where any of the pixels taken together is marked."""
        rows, columns = mask.shape[0] // 2 * 2, mask.shape[1] // 2 * 2
        marked = [mask[row:rows:2, column:columns:2] for row, column in self.places]
        return np.asarray(np.logical_or.reduce(marked))


@dataclass(frozen=True, slots=True)
class Depth:
    """How samples sit in their words: ``bits`` of them, ``shift`` empty ones below."""

    bits: int
    shift: int

    @property
    def full_scale(self) -> int:
        """The largest sample once the empty bits are taken away."""
        return int((1 << self.bits) - 1)


USUAL_BITS = (8, 10, 12, 14, 16)


def depth_of(pixels: Pixels) -> Depth:
    """Bits used in 16-bit words: 10 or 12 at the bottom, or at the top with zeros below.

    From what no sample of the frame has ever set; a frame of few different levels (covered,
    without noise) may seem to have fewer bits than it has: judge by a frame with light in it.
    """
    used = int(np.bitwise_or.reduce(np.asarray(pixels), axis=None)) if pixels.size else 0
    if used == 0:
        return Depth(8 * pixels.dtype.itemsize, 0)
    shift = (used & -used).bit_length() - 1
    word = 8 * pixels.dtype.itemsize
    at_top = used.bit_length() == word and shift > 0
    if at_top:
        bits = min(usual for usual in USUAL_BITS if usual >= word - shift)
        return Depth(bits, word - bits)
    bits = min(usual for usual in USUAL_BITS if usual >= used.bit_length())
    return Depth(bits, 0)


_FIRST_LUMA = {"YUYV": 0, "YUY2": 0, "UYVY": 1}


def luma_of(packed: NDArray[np.uint8], order: str) -> Pixels:
    """The luma samples of a packed 4:2:2 picture of shape (height, width, 2), untouched.

    Going through colours and back adds an error of up to 0.003 px that goes with the sub-pixel
    phase. ``order``: YUYV, YUY2 or UYVY. Raises BadInput for another order or shape.
    """
    if order not in _FIRST_LUMA or packed.ndim != 3 or packed.shape[2] != 2:
        raise BadInput(f"no packed 4:2:2 picture: order {order}, shape {packed.shape}")
    return np.ascontiguousarray(packed[:, :, _FIRST_LUMA[order]])
