"""What a camera does to its levels before they leave it: the response curve of a display."""

from __future__ import annotations

import numpy as np

from readout.model import Pixels


def display_encoded(pixels: Pixels, full_scale: int, *, gamma: float = 0.45) -> Pixels:
    """Levels raised to a power between 0 and full scale, as uint8: what is made for a screen.

    ``pixels``: linear levels of any depth, black at 0. With more bits than eight before the curve
    the dark steps stay as fine as a camera's own.
    """
    share = np.arange(full_scale + 1) / full_scale
    curve = np.rint(255 * share**gamma).astype(np.uint8)
    return np.asarray(curve[np.minimum(pixels, full_scale)])
