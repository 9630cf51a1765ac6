"""Whether the picture stood still while frames of it were taken to be averaged.

Means over small squares of pixels are compared between parts of the sequence. Their noise comes
from differences of neighbouring frames, which a slow motion hardly touches (J. von Neumann et al.,
Ann. Math. Stat. 12 (1941) 153). More or less light in all of the picture alike is no motion.
"""

from __future__ import annotations

import cv2
import numpy as np
from numpy.typing import NDArray

from readout.model import Pixels

F32 = NDArray[np.float32]

SQUARE_PX = 8
FEWEST = 4
SDS = 6.0
LEAST_SHARE = 0.002
"""of full scale: what a square may change by whatever its noise"""
MOST_GAIN = 0.05
"""the light may rise or fall by this share, not more"""


def squares(pixels: Pixels) -> F32:
    """Means over squares of 8 pixels; a rest at the right and lower border is shared out."""
    height, width = pixels.shape
    size = max(1, width // SQUARE_PX), max(1, height // SQUARE_PX)
    return np.asarray(
        cv2.resize(pixels.astype(np.float32), size, interpolation=cv2.INTER_AREA), np.float32
    )


def stood_still(frames: list[F32], full_scale: int) -> bool:
    """Whether ``frames``, the ``squares`` of four or more in the order they came, show one picture.

    The first half is compared with the second, and both ends with the rest.
    """
    seen = np.stack(frames).astype(np.float64)
    n = len(seen)
    variance = np.mean(np.diff(seen, axis=0) ** 2, axis=0) / 2
    least = LEAST_SHARE * full_scale
    for part in (n // 2, max(1, n // 4), n - max(1, n // 4)):
        before, after = seen[:part].mean(axis=0), seen[part:].mean(axis=0)
        gain = float(before.mean()) / max(float(after.mean()), least)
        if abs(before.mean() - after.mean()) > max(MOST_GAIN * before.mean(), least):
            return False
        sd = np.sqrt(variance * (1 / part + 1 / (n - part)))
        if np.any(np.abs(before - gain * after) > np.maximum(SDS * sd, least)):
            return False
    return True
