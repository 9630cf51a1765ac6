"""Kinds of frames with known truth, by name: each frame follows from (kind, seed, k) alone.

The reference kind: 640x480, line 4 px, blur 1.6 px, 6000 electrons over 400, 8 bit. The return
wanders some pixels from frame to frame as under a hand on the mirror, less than half a pixel a
frame, so that every sub-pixel phase occurs and a sighting can serve the next frame.
"""

from __future__ import annotations

import math
import zlib
from collections.abc import Callable
from dataclasses import dataclass, replace
from functools import lru_cache

import numpy as np

from readout.model import F64, Pixels
from readout.sighting.prepare import Preparation
from readout.sighting.targets import AS_THEY_COME
from readout.simulation import Crosshair, Sensor, crosshair_image, crossing_bound_cov
from readout.simulation.ground import UniformGround, expose_on
from readout.simulation.spot import Spot, spot_bound_cov, spot_image

SHAPE = (480, 640)
WANDER_PX = 8.0
WANDER_FRAMES = (97.3, 131.7)
"""frames for one wander to and fro in x and in y"""

REFERENCE = Crosshair(line_px=4.0, blur_px=1.6, background=400.0, contrast=6000.0)
THIN = replace(REFERENCE, line_px=2.0, blur_px=0.8)
WIDE = replace(REFERENCE, line_px=12.0, blur_px=3.0)
BITS8 = Sensor(8, gain_levels_per_electron=0.03, read_noise_electrons=6.0, black_levels=4.0)
BITS12 = Sensor(12, gain_levels_per_electron=0.48, read_noise_electrons=6.0, black_levels=64.0)
COARSE = replace(BITS8, read_noise_electrons=3.0, black_levels=4.3)
"""with 40 electrons of ground: a noise of 0.21 levels in the dark"""


@dataclass(frozen=True)
class Picture:
    """A frame, where the crossing truly lies, and what is known of the camera."""

    pixels: Pixels
    full_scale: int
    x_px: float
    y_px: float
    preparation: Preparation = AS_THEY_COME


@dataclass(frozen=True)
class Kind:
    """How frames of a kind come about.

    ``ratio``: largest rms over the bound that is aimed at; ``rms_px``: largest rms where no bound
    is asked for. ``light``: what is done to the expected electrons, given the truth and a
    generator that is the same for all frames of a seed; ``finish``: what is done to the levels.
    """

    name: str
    reticle: Crosshair | Spot = REFERENCE
    sensor: Sensor = BITS8
    ratio: float | None = None
    rms_px: float | None = None
    light: Callable[[F64, float, float, int], F64] | None = None
    finish: Callable[[Pixels], Pixels] | None = None

    def truth(self, seed: int, k: int) -> tuple[float, float]:
        """The crossing of frame k."""
        start = np.random.default_rng((seed, self._number)).random(2)
        turns = start + k / np.array(WANDER_FRAMES)
        wander = WANDER_PX * np.sin(2 * math.pi * turns)
        return float(SHAPE[1] / 2 + wander[0]), float(SHAPE[0] / 2 + wander[1])

    def picture(self, seed: int, k: int) -> Picture:
        """Frame k of a seed."""
        x, y = self.truth(seed, k)
        rng = np.random.default_rng((seed, self._number, k))
        electrons = image_of(self.reticle, x, y)
        if self.light is not None:
            electrons = self.light(electrons, x, y, seed)
        pixels = expose_on(electrons, _ground(self.reticle.background, self.sensor), rng)
        if self.finish is not None:
            pixels = self.finish(pixels)
        full_scale = self.sensor.full_scale if pixels.dtype == np.uint16 else 255
        return Picture(pixels, full_scale, x, y)

    def bound_px(self) -> F64:
        """Cramér-Rao bound of x and y, the mean variance over some sub-pixel phases, as sd."""
        return _bound_px(self.reticle, self.sensor)

    @property
    def has_bound(self) -> bool:
        """True for a frame as the bound's model has it: a return on an even ground."""
        return self.light is None and self.finish is None

    @property
    def target(self) -> str:
        """The word for what is imaged."""
        return "spot" if isinstance(self.reticle, Spot) else "crosshair"

    @property
    def _number(self) -> int:
        return zlib.crc32(self.name.encode())


def image_of(reticle: Crosshair | Spot, x_px: float, y_px: float) -> F64:
    """Expected electrons of a frame."""
    draw = spot_image if isinstance(reticle, Spot) else crosshair_image
    return draw(SHAPE, x_px, y_px, reticle)


@lru_cache(maxsize=8)
def _ground(electrons: float, sensor: Sensor) -> UniformGround:
    return UniformGround(electrons, sensor)


@lru_cache(maxsize=64)
def _bound_px(reticle: Crosshair | Spot, sensor: Sensor) -> F64:
    bound_cov = spot_bound_cov if isinstance(reticle, Spot) else crossing_bound_cov
    places = [(SHAPE[1] / 2 + j * 0.618034 % 1, SHAPE[0] / 2 + j / 5) for j in range(5)]
    covs = [bound_cov(SHAPE, x, y, reticle, sensor) for x, y in places]
    return np.asarray(np.sqrt(np.diag(np.mean(covs, axis=0))))


_LIMIT: dict[str, tuple[Crosshair | Spot, float]] = {
    "clean": (REFERENCE, 1.05),
    "turned 2°": (replace(REFERENCE, rotation_deg=2.0), 1.05),
    "turned -10°": (replace(REFERENCE, rotation_deg=-10.0), 1.05),
    "turned 30°": (replace(REFERENCE, rotation_deg=30.0), 1.05),
    "turned 45°": (replace(REFERENCE, rotation_deg=45.0), 1.05),
    "skewed 5°": (replace(REFERENCE, rotation_deg=4.0, skew_deg=5.0), 1.05),
    "dim": (replace(REFERENCE, background=900.0, contrast=900.0), 1.15),
    "thin": (THIN, 1.15),
    "wide": (WIDE, 1.15),
    "short, gap": (replace(REFERENCE, half_length_px=120.0, gap_px=20.0), 1.15),
    "dark on bright": (replace(REFERENCE, background=6400.0, contrast=-6000.0), 1.15),
    "spot": (Spot(), 1.05),
    "spot, small": (Spot(diameter_px=1.0, blur_px=1.2, contrast=40000.0), 1.05),
}

LIMIT: dict[str, Kind] = {
    kind.name: kind
    for sensor in (BITS8, BITS12)
    for name, (reticle, ratio) in _LIMIT.items()
    for kind in [Kind(f"{name}, {sensor.bits} bit", reticle, sensor, ratio)]
}
COARSE_KIND = Kind("8 bit, dark noise 0.2 step", replace(REFERENCE, background=40.0), COARSE)
