"""The image of a pinhole on the sensor, before noise, and how well it can be placed at best.

A disc of even light blurred by a Gaussian: at a distance r from its middle the share of full
brightness is the chance that a point displaced by the blur lands on the disc, which is the
cumulative distribution of the non-central chi-squared law with two degrees of freedom (J. I.
Marcum, IRE Trans. IT-6 (1960) 59). The mean over a pixel is a Gauss-Legendre product rule.
"""

from __future__ import annotations

import math
from dataclasses import dataclass, replace
from typing import Final

import numpy as np
from scipy.special import chndtr

from readout.model import F64, QUANTISATION_VAR
from readout.sighting.bound import cramer_rao_cov
from readout.simulation.bar import HALF_DIAGONAL_PX, TAIL_SIGMAS, pixel_means
from readout.simulation.sensor import Sensor

SPOT_PARAMETERS: Final = (
    "x_px",
    "y_px",
    "background",
    "contrast",
    "diameter_px",
    "blur_px",
    "background slope along x",
    "background slope along y",
    "elongation",
    "rotation_deg",
)
"""Free in the bound."""


@dataclass(frozen=True, slots=True)
class Spot:
    """The return image of a pinhole: sizes in pixels, levels in electrons (or any unit).

    ``contrast`` is added to ``background`` where the disc is fully bright; a small disc with much
    blur is a Gaussian of contrast diameter^2 / (8 blur^2) times that. ``elongation``: the spot,
    its blur too, is stretched by this factor along an axis that is turned from the picture's
    vertical by ``rotation_deg``, positive clockwise on screen.
    """

    diameter_px: float = 8.0
    blur_px: float = 1.6
    background: float = 400.0
    contrast: float = 6000.0
    elongation: float = 1.0
    rotation_deg: float = 0.0

    def __post_init__(self) -> None:
        if not min(self.diameter_px, self.blur_px, self.elongation) > 0:
            raise ValueError(f"diameter, blur and elongation must be positive, got {self}")


def spot_image(shape: tuple[int, int], x_px: float, y_px: float, spot: Spot) -> F64:
    """Expected level of each pixel, shape ``shape`` = (height, width), the middle at (x, y).

    Exact to 1e-6 of the contrast for a blur of 0.3 px and more.
    """
    image = np.full(shape, spot.background, dtype=np.float64)
    reach = spot.diameter_px / 2 + TAIL_SIGMAS * spot.blur_px
    reach = reach * max(spot.elongation, 1.0) + HALF_DIAGONAL_PX
    rows = np.arange(shape[0], dtype=np.float64)[:, None] - y_px
    columns = np.arange(shape[1], dtype=np.float64)[None, :] - x_px
    near = np.nonzero(rows**2 + columns**2 < reach**2)
    disc = (spot.diameter_px / 2 / spot.blur_px) ** 2
    turn = math.radians(spot.rotation_deg)

    def share_at(x: F64, y: F64) -> F64:
        across = math.cos(turn) * x + math.sin(turn) * y
        along = (math.cos(turn) * y - math.sin(turn) * x) / spot.elongation
        return np.asarray(chndtr(disc, 2.0, (across**2 + along**2) / spot.blur_px**2))

    shares = pixel_means(share_at, columns[0, near[1]], rows[near[0], 0], spot.blur_px)
    image[near] += spot.contrast * shares
    return image


def spot_bound_cov(
    shape: tuple[int, int], x_px: float, y_px: float, spot: Spot, sensor: Sensor
) -> F64:
    """Least covariance of the spot's (x, y), shape (2, 2), px^2, with ``SPOT_PARAMETERS`` free.

    Pixel variance is that of photons, read noise and rounding, 1/12 level^2.
    """
    rows = np.arange(shape[0])[:, None] - y_px
    columns = np.arange(shape[1])[None, :] - x_px

    def expected(p: F64) -> F64:
        drawn = replace(
            spot,
            background=p[2],
            contrast=p[3],
            diameter_px=p[4],
            blur_px=p[5],
            elongation=p[8],
            rotation_deg=p[9],
        )
        image = spot_image(shape, p[0], p[1], drawn)
        return np.asarray(image + p[6] * columns + p[7] * rows)

    parameters = np.array(
        [
            *(x_px, y_px, spot.background, spot.contrast, spot.diameter_px, spot.blur_px, 0.0, 0.0),
            *(spot.elongation, spot.rotation_deg),
        ]
    )
    level, size = max(abs(spot.contrast), 1.0) * 1e-3, 1e-3 * min(spot.diameter_px, spot.blur_px)
    slope = level / max(shape)
    steps = np.array([1e-3, 1e-3, level, level, size, size, slope, slope, 1e-3, 0.1])
    rounding_var = QUANTISATION_VAR / sensor.gain_levels_per_electron**2
    variance = expected(parameters) + sensor.read_noise_electrons**2 + rounding_var
    return cramer_rao_cov(expected, parameters, steps, variance)[:2, :2]
