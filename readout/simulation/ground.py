"""Noise of a uniform ground, drawn fast and distributed exactly as ``expose`` would.

All pixels of a uniform ground have one distribution over the levels: that of Poisson electrons
plus normal read noise, rounded and clipped. It is summed up once. Then a pixel takes sixteen
random bits, which a table turns into a level; where a step of the distribution falls within the
reach of one entry, 48 bits more decide (inverse transform sampling, L. Devroye, Non-Uniform Random
Variate Generation, 1986, II.2, with a guide table).
"""

from __future__ import annotations

import math
from typing import Final

import numpy as np
from scipy.special import ndtr
from scipy.stats import poisson

from readout.model import F64, Pixels
from readout.simulation.sensor import Sensor, expose

GUIDE_BITS: Final = 16
FINE_BITS: Final = 48


class UniformGround:
    """A ground of expected ``electrons`` per pixel on a ``sensor``."""

    def __init__(self, electrons: float, sensor: Sensor) -> None:
        self.electrons = electrons
        self.sensor = sensor
        self._cumulative = level_distribution(electrons, sensor)
        first = np.arange(2**GUIDE_BITS) / 2**GUIDE_BITS
        low = np.searchsorted(self._cumulative, first, side="right")
        high = np.searchsorted(self._cumulative, first + 2.0**-GUIDE_BITS, side="left")
        self._guide = low.astype(np.uint16)
        self._undecided = high > low

    def draw(self, shape: tuple[int, int], rng: np.random.Generator) -> Pixels:
        """A picture of the ground alone, uint8 or uint16 as the sensor has it."""
        coarse = rng.integers(0, 2**GUIDE_BITS, shape, dtype=np.uint16)
        levels = self._guide[coarse]
        undecided = self._undecided[coarse]
        fine = rng.integers(0, 2**FINE_BITS, int(np.count_nonzero(undecided)))
        share = (coarse[undecided] + fine / 2**FINE_BITS) / 2**GUIDE_BITS
        levels[undecided] = np.searchsorted(self._cumulative, share, side="right")
        return levels.astype(np.uint8) if self.sensor.bits == 8 else levels


def level_distribution(electrons: float, sensor: Sensor) -> F64:
    """Probability of at most each level below full scale, shape (full scale,)."""
    spread = 12 * math.sqrt(electrons) + 40
    counts = np.arange(max(0, math.floor(electrons - spread)), math.ceil(electrons + spread))
    weights = poisson.pmf(counts, electrons)
    levels = np.arange(sensor.full_scale)
    means = sensor.mean_levels(counts.astype(np.float64))
    read_sd = sensor.read_noise_electrons * sensor.gain_levels_per_electron
    if read_sd == 0:
        shown = sensor.quantise(means)
        return np.asarray((shown[None, :] <= levels[:, None]) @ weights)
    cumulative = np.zeros(levels.size)
    reach = 9 * read_sd + 1
    first, last = np.searchsorted(levels, [means[0] - reach, means[-1] + reach])
    cumulative[last:] = 1.0
    part = slice(first, last)
    cumulative[part] = ndtr((levels[part, None] + 0.5 - means[None, :]) / read_sd) @ weights
    return cumulative


def expose_on(electrons: F64, ground: UniformGround, rng: np.random.Generator) -> Pixels:
    """As ``expose`` on the ground's sensor; fast where most of ``electrons`` are the ground."""
    pixels = ground.draw((electrons.shape[0], electrons.shape[1]), rng)
    lit = np.nonzero(electrons != ground.electrons)
    pixels[lit] = expose(electrons[lit], ground.sensor, rng)
    return pixels
