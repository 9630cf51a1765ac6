"""The image of a pinhole on the sensor, before noise: a blurred disc or ellipse.

The ellipse is cut into strips along one of its axes; across each the blurred strip is a difference
of two normal distributions, and the strips are added with a Gauss-Legendre rule in the angle that
makes the chord smooth. The integral over the pixel is a product rule. Nothing here is shared with
the fit, which takes the light from the non-central chi-square distribution.
"""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import Final

import numpy as np
from scipy.special import ndtr

from readout.model import F64
from readout.simulation.bar import TAIL_SIGMAS, pixel_means

STRIPS: Final = 40


@dataclass(frozen=True, slots=True)
class Spot:
    """The return image: lengths in pixels, levels in electrons (or any unit).

    ``disc_px``: diameter of the sharp disc across its axis, 0 for a Gaussian spot; ``blur_px``:
    standard deviation of the blur in the same direction. ``along_disc_px`` and ``along_blur_px``:
    the same along the axis, equal to those across unless given. ``rotation_deg``: turn of the axis
    from the picture's vertical, positive clockwise on screen. ``contrast``: light at the middle,
    above ``background``.
    """

    disc_px: float = 4.0
    blur_px: float = 1.3
    along_disc_px: float | None = None
    along_blur_px: float | None = None
    rotation_deg: float = 0.0
    background: float = 400.0
    contrast: float = 6000.0

    def __post_init__(self) -> None:
        if not (self.disc_px >= 0 and self.along_disc >= 0 and min(self.blurs) > 0):
            raise ValueError(f"a spot's disc may not be negative and its blur not zero, got {self}")
        if (self.disc_px == 0) != (self.along_disc == 0):
            raise ValueError(f"a disc has both diameters or none, got {self}")

    @property
    def along_disc(self) -> float:
        """Diameter along the axis, px."""
        return self.disc_px if self.along_disc_px is None else self.along_disc_px

    @property
    def blurs(self) -> tuple[float, float]:
        """Blur across and along the axis, px."""
        return self.blur_px, self.blur_px if self.along_blur_px is None else self.along_blur_px


def spot_image(shape: tuple[int, int], x_px: float, y_px: float, spot: Spot) -> F64:
    """Expected level of each pixel, ``shape`` = (height, width), the spot's middle at (x, y).

    Good to 1e-6 of the contrast for a blur of 0.5 px and more.
    """
    reach = max(spot.disc_px, spot.along_disc) / 2 + TAIL_SIGMAS * max(spot.blurs) + 1
    rows = np.arange(*_within(y_px, reach, shape[0]))
    columns = np.arange(*_within(x_px, reach, shape[1]))
    image = np.full(shape, spot.background, dtype=np.float64)
    if rows.size == 0 or columns.size == 0:
        return image
    x, y = np.meshgrid(columns - x_px, rows - y_px)
    turn = math.radians(spot.rotation_deg)

    def light_at(x: F64, y: F64) -> F64:
        across = math.cos(turn) * x + math.sin(turn) * y
        return _light(across, math.cos(turn) * y - math.sin(turn) * x, spot)

    light = pixel_means(light_at, x, y, min(spot.blurs))
    middle = float(_light(np.zeros(1), np.zeros(1), spot)[0])
    image[rows[0] : rows[-1] + 1, columns[0] : columns[-1] + 1] += spot.contrast / middle * light
    return image


def _within(middle: float, reach: float, size: int) -> tuple[int, int]:
    return max(0, math.floor(middle - reach)), min(size, math.ceil(middle + reach) + 1)


def _light(across: F64, along: F64, spot: Spot) -> F64:
    """Light of a disc of brightness 1, or of a Gaussian of height 1, at a place off its middle."""
    across_blur, along_blur = spot.blurs
    if spot.disc_px == 0:
        return np.asarray(np.exp(-((across / across_blur) ** 2 + (along / along_blur) ** 2) / 2))
    nodes, weights = np.polynomial.legendre.leggauss(STRIPS)
    light = np.zeros(across.shape)
    for angle, weight in zip(nodes * (math.pi / 2), weights * (math.pi / 2), strict=True):
        half_chord = spot.disc_px / 2 * math.cos(angle)
        place = spot.along_disc / 2 * math.sin(angle)
        width = spot.along_disc / 2 * math.cos(angle) * weight
        density = np.exp(-(((along - place) / along_blur) ** 2) / 2) / (
            math.sqrt(2 * math.pi) * along_blur
        )
        strip = ndtr((across + half_chord) / across_blur) - ndtr(
            (across - half_chord) / across_blur
        )
        light += width * density * strip
    return light
