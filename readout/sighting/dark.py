"""What a camera shows by itself: pixels that are hot, and the level at which it saturates."""

from __future__ import annotations

from collections.abc import Iterable

import numpy as np
from numpy.typing import NDArray

from readout.errors import BadInput
from readout.model import F64, Pixels

F32 = NDArray[np.float32]
Mask = NDArray[np.bool_]

HOT_SDS = 6.0
"""a pixel this many sd of its like above or below the others is hot or dead: of 10^6 good ones
none is"""
ROUNDING_SD = 0.29
FRAMES_FOR_NOISE = 8
NOISY = 6.0
"""a pixel with this many times the others' variance is unsteady"""
PILED_UP = 4.0
"""the top level holds this many times what the levels below it hold"""
LEAST_PILE = 6
NEAR_TOP = 0.75
LEVELS_BELOW = 8


def mean_frame(frames: Iterable[Pixels]) -> F32:
    """Mean of equal frames, levels. Subtracted, it adds its own noise, 1/n of a frame's variance,
    which is the same in every frame: a fixed error, not one that averages away.
    """
    return _moments(frames)[0].astype(np.float32)


def defective_pixels(dark_frames: Iterable[Pixels], *, sds: float = HOT_SDS) -> Mask:
    """Pixels not to be used, from frames taken in the dark (lamp off, objective covered).

    Those whose mean lies ``sds`` standard deviations of the pixels' means from the median, at
    least one level; with eight frames and more also the unsteady ones.
    """
    mean, variance, n = _moments(dark_frames)
    middle = float(np.median(mean))
    spread = 1.4826 * float(np.median(np.abs(mean - middle)))
    wrong = np.abs(mean - middle) > max(sds * max(spread, ROUNDING_SD / n**0.5), 1.0)
    if n >= FRAMES_FOR_NOISE:
        usual = max(float(np.median(variance)), ROUNDING_SD**2)
        # Beyond what the scatter of a variance from n frames explains.
        wrong |= variance > usual * (NOISY + sds * (2 / (n - 1)) ** 0.5)
    return np.asarray(wrong)


def _moments(frames: Iterable[Pixels]) -> tuple[F64, F64, int]:
    """Mean and variance of each pixel, and the number of frames."""
    total: F64 | None = None
    squares: F64 | None = None
    n = 0
    for frame in frames:
        levels = np.asarray(frame, dtype=np.float64)
        if total is None or squares is None:
            total, squares = np.zeros(levels.shape), np.zeros(levels.shape)
        if levels.shape != total.shape:
            raise BadInput(f"frames of {levels.shape} and {total.shape}: take them in one size")
        total += levels
        squares += levels**2
        n += 1
    if total is None or squares is None:
        raise BadInput("no frame given: take at least one")
    mean = total / n
    variance = (squares - n * mean**2) / (n - 1) if n > 1 else np.zeros_like(mean)
    return mean, np.maximum(variance, 0.0), n


def saturation_level(pixels: Pixels, full_scale: int) -> int | None:
    """The level at which a frame's pixels pile up: where the sensor clips, maybe below full scale.

    Many cameras end at 235 or 250. None where nothing piles up: the frame has no saturated pixel,
    and says nothing. What lies in the lower three quarters of the range is never taken for it.
    """
    counts = np.bincount(np.minimum(pixels.ravel(), full_scale), minlength=full_scale + 1)
    top = int(np.flatnonzero(counts)[-1]) if pixels.size else 0
    if top < NEAR_TOP * full_scale:
        return None
    below = counts[max(0, top - LEVELS_BELOW) : top]
    if counts[top] < LEAST_PILE or counts[top] < PILED_UP * max(1.0, float(below.mean())):
        return None
    return top
