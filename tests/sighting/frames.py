"""Frames with known truth for the tests of the sighting; the same for the same generator."""

from __future__ import annotations

import numpy as np

from readout.model import Pixels
from readout.simulation.crosshair import Crosshair, crosshair_image
from readout.simulation.sensor import Sensor, expose

SENSOR = Sensor(bits=8, gain_levels_per_electron=0.03, read_noise_electrons=6.0)
BRIGHT = Crosshair(line_px=5.0, blur_px=1.3, background=400.0, contrast=6000.0)
DARK = Crosshair(line_px=5.0, blur_px=1.3, background=6400.0, contrast=-5000.0)


def frame(
    shape: tuple[int, int],
    x_px: float,
    y_px: float,
    crosshair: Crosshair = BRIGHT,
    *,
    rng: np.random.Generator,
    sensor: Sensor = SENSOR,
) -> Pixels:
    """One noisy picture of a crosshair."""
    return expose(crosshair_image(shape, x_px, y_px, crosshair), sensor, rng)
