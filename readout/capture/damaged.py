"""What stands in for a picture that came damaged."""

from __future__ import annotations

import numpy as np

from readout.model import Pixels


def blank(shape: tuple[int, ...], full_scale: int) -> Pixels:
    """A black picture of the size and depth of the others.

    A damaged picture keeps its row in time, with the flag ``damaged`` and no position: black
    cannot be mistaken for a crosshair, half a picture can.
    """
    if full_scale > 255:
        return np.zeros(shape, np.uint16)
    return np.zeros(shape, np.uint8)
