"""The response curve of a camera, and the table that undoes it.

A camera with a tone curve gives levels that are not proportional to the light. The place of an
uneven line then depends on the brightness: a line with a side lobe of 10 % moved by 0.007 px for
30 % more light at gamma 0.45, and not at all once the curve was undone.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import cv2
import numpy as np
from numpy.typing import NDArray
from scipy.interpolate import PchipInterpolator

from readout.errors import BadInput
from readout.model import F64, Pixels

F32 = NDArray[np.float32]

LEAST_POINTS = 4


@dataclass(frozen=True, slots=True)
class Response:
    """``table[level]``: the level a camera in proportion to the light would have given.

    It leaves 0 light and the largest level where they are. Noise: a level's standard deviation is
    multiplied by the slope of the table, its rounding too (0.29 of the slope in place of 0.29).
    For a camera that bends after its noise the variance becomes again the straight line in the
    light that the fits expect; the bent one was not.
    """

    table: F32

    @property
    def full_scale(self) -> int:
        """The largest level the table knows."""
        return len(self.table) - 1

    def undone(self, samples: Pixels) -> F32:
        """Levels in proportion to the light, of the shape of ``samples``."""
        if samples.dtype == np.uint8 and len(self.table) == 256:
            return np.asarray(cv2.LUT(np.ascontiguousarray(samples), self.table))
        return np.take(self.table, samples, mode="clip")


def power_response(gamma: float, full_scale: int, *, black: float = 0.0) -> Response:
    """The curve level = black + (full_scale - black) * light^gamma undone, light from 0 to 1.

    ``gamma`` as cameras name it: 1 is straight, 0.45 the curve of a picture for a screen. Levels
    below ``black`` are noise about no light and go on with the curve's mirror image, so that their
    mean stays. Raises BadInput for numbers that make no curve.
    """
    if not (gamma > 0 and 0 <= black < full_scale):
        raise BadInput(f"no response curve has gamma {gamma} and black level {black}: check both")
    share = (np.arange(full_scale + 1) - black) / (full_scale - black)
    light = np.sign(share) * np.abs(share) ** (1 / gamma)
    return Response((light * full_scale).astype(np.float32))


def measured_response(
    light: Sequence[float] | F64, levels: Sequence[float] | F64, full_scale: int
) -> Response:
    """The curve through measured points undone: mean levels of one patch at known amounts of light.

    ``light`` in any unit, in proportion to the exposure time; ``levels`` with the dark level taken
    in where it was measured, at light 0. Between the points the curve is monotone and smooth
    (F. N. Fritsch and R. E. Carlson, SIAM J. Numer. Anal. 17 (1980) 238), beyond them straight.
    The table is scaled so that the highest point keeps its level. Raises BadInput where the points
    are too few or do not rise.
    """
    x, y = np.asarray(levels, dtype=np.float64), np.asarray(light, dtype=np.float64)
    order = np.argsort(y)
    x, y = x[order], y[order]
    if x.shape != y.shape or x.size < LEAST_POINTS or not np.all(np.isfinite([x, y])):
        raise BadInput(
            f"a response curve needs {LEAST_POINTS} or more pairs of light and level: "
            "measure at more exposures"
        )
    if np.any(np.diff(x) <= 0) or np.any(np.diff(y) <= 0):
        raise BadInput(
            "the levels do not rise with the light: leave out saturated and repeated exposures"
        )
    if x[0] < 0 or x[-1] > full_scale:
        raise BadInput(f"levels outside 0 to {full_scale}: these are not this camera's")
    curve = PchipInterpolator(x, y)
    at = np.arange(full_scale + 1, dtype=np.float64)
    table = curve(np.clip(at, x[0], x[-1]))
    first, last = float(curve.derivative()(x[0])), float(curve.derivative()(x[-1]))
    table += first * np.minimum(at - x[0], 0) + last * np.maximum(at - x[-1], 0)
    return Response((table * (x[-1] / y[-1])).astype(np.float32))
