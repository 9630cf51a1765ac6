"""From electrons to digital levels: photon noise, read noise, gain, black level, quantisation.

The linear camera model of EMVA standard 1288 (European Machine Vision Association, release 4.0,
2021): the electrons of a pixel are Poisson distributed, the dark noise is normal, the sum times
the gain plus the black level is rounded to whole levels. Its photon transfer law follows: the
variance of a level grows with its mean, and the slope is the gain (J. R. Janesick, Photon
Transfer, SPIE 2007).
"""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

from readout.model import F64, Pixels

F32 = NDArray[np.float32]


@dataclass(frozen=True, slots=True)
class Sensor:
    """A sensor of uniform pixels.

    ``bits``: 8 to 16; more than 8 are kept in uint16. ``gain_levels_per_electron``: the system
    gain K of EMVA 1288. ``read_noise_electrons``: standard deviation in the dark.
    ``black_levels``: mean level in the dark. Raises ValueError for values that cannot be.
    """

    bits: int = 8
    gain_levels_per_electron: float = 0.025
    read_noise_electrons: float = 6.0
    black_levels: float = 4.0

    def __post_init__(self) -> None:
        if not 8 <= self.bits <= 16:
            raise ValueError(f"a sensor gives 8 to 16 bits, not {self.bits}")
        if not (self.gain_levels_per_electron > 0 and self.read_noise_electrons >= 0):
            raise ValueError(
                "need gain > 0 and read noise >= 0, got "
                f"{self.gain_levels_per_electron=} {self.read_noise_electrons=}"
            )

    @property
    def full_scale(self) -> int:
        """The largest level."""
        return int(2**self.bits - 1)

    def mean_levels(self, electrons: F64 | float) -> F64:
        """Expected level before rounding, any shape."""
        return np.asarray(self.black_levels + self.gain_levels_per_electron * electrons)

    def noise_var_levels2(self, electrons: F64 | float) -> F64:
        """Variance of photon and read noise in levels^2, before rounding, any shape."""
        dark_electrons2 = self.read_noise_electrons**2
        return np.asarray(self.gain_levels_per_electron**2 * (electrons + dark_electrons2))

    def quantise(self, levels: NDArray[Any]) -> Pixels:
        """Round to whole levels (half to even) and clip to 0 … full scale, any shape."""
        whole = np.clip(np.rint(levels), 0, self.full_scale)
        return whole.astype(np.uint8) if self.bits == 8 else whole.astype(np.uint16)


def expose(electrons: F64, sensor: Sensor, rng: np.random.Generator) -> Pixels:
    """One picture of the expected ``electrons`` (any shape, >= 0): the exact path.

    Poisson photon noise and normal read noise from ``rng``, then gain, black level, rounding.
    """
    collected = rng.poisson(electrons) + rng.normal(
        0.0, sensor.read_noise_electrons, electrons.shape
    )
    return sensor.quantise(sensor.mean_levels(collected))


@dataclass(frozen=True, slots=True)
class NoiseBank:
    """Pictures of noise made once and taken at random offsets: cheap enough for live frames.

    ``stack`` is (n, height + slack, width + slack). A taken picture is one of the n at one of
    (slack + 1)^2 places, so two takes seldom agree, but a mean over very many pictures keeps the
    bank's own mean: use it where nothing is measured to the last digit.
    """

    stack: NDArray[Any]
    shape: tuple[int, int]

    @classmethod
    def normal(
        cls, shape: tuple[int, int], rng: np.random.Generator, *, n: int = 4, slack_px: int = 64
    ) -> NoiseBank:
        """A bank of standard normal noise for pictures of ``shape`` = (height, width)."""
        size = (n, shape[0] + slack_px, shape[1] + slack_px)
        return cls(rng.standard_normal(size, dtype=np.float32), shape)

    def digitised(self, electrons: float, sensor: Sensor) -> NoiseBank:
        """A bank of finished pictures of a uniform ground, for a bank of standard normal noise."""
        level = float(sensor.mean_levels(electrons))
        sd = math.sqrt(float(sensor.noise_var_levels2(electrons)))
        return NoiseBank(sensor.quantise(level + sd * self.stack), self.shape)

    def take(self, rng: np.random.Generator) -> NDArray[Any]:
        """A view of ``shape`` into the bank, at a place drawn from ``rng``; do not write to it."""
        n, full_height, full_width = self.stack.shape
        height, width = self.shape
        which = int(rng.integers(n))
        row = int(rng.integers(full_height - height + 1))
        column = int(rng.integers(full_width - width + 1))
        return self.stack[which, row : row + height, column : column + width]
