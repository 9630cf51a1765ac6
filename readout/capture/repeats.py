"""Frames a camera or server delivers twice.

The noise of a sensor never repeats, so a picture equal to the one before, pixel for pixel, is the
same exposure again: it carries no new information and would make an average look better than it
is. A picture of one level only (mirror covered, lamp off) may repeat.
"""

from __future__ import annotations

import numpy as np

from readout.model import Pixels, Quality


class RepeatWatch:
    """Compares each picture with the one before."""

    def __init__(self) -> None:
        self._before: Pixels | None = None

    def quality_of(self, pixels: Pixels) -> Quality:
        """``DUPLICATE`` if this picture equals the last one given, else no flag."""
        before, self._before = self._before, pixels
        if before is None or not np.array_equal(before, pixels) or pixels.min() == pixels.max():
            return Quality.OK
        return Quality.DUPLICATE
