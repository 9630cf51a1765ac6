"""The image of the reticle on the sensor, before noise.

Two bars of one width cross at right angles; their union (light through two slits, or two opaque
threads) is blurred by a Gaussian and integrated over each pixel. Blurred by an isotropic
Gaussian, the union stays exact: bar_u + bar_v - bar_u bar_v, for the Gaussian separates along the
turned axes u and v. The integral over the pixel is a Gauss-Legendre product rule, independent of
anything the fit does.
"""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np
from scipy.special import ndtr

from readout.model import F64


@dataclass(frozen=True, slots=True)
class Crosshair:
    """The return image: widths and lengths in pixels, levels in electrons (or any unit).

    ``contrast`` is added to ``background`` where an arm is fully bright, negative for a dark arm.
    ``rotation_deg`` positive clockwise on screen. ``half_length_px``: an arm reaches this far
    either side of the crossing (infinite by default).
    """

    line_px: float = 5.0
    blur_px: float = 1.2
    rotation_deg: float = 0.0
    background: float = 800.0
    contrast: float = 7000.0
    half_length_px: float = math.inf


def _bar(u: F64, half_width: float, blur: float) -> F64:
    """Share of a blurred bar of half width ``half_width`` at distance ``u`` from its middle."""
    return ndtr((u + half_width) / blur) - ndtr((u - half_width) / blur)


def crosshair_image(
    shape: tuple[int, int],
    x_px: float,
    y_px: float,
    crosshair: Crosshair,
    *,
    first_row: int = 0,
    first_column: int = 0,
    order: int = 4,
) -> F64:
    """Expected level of each pixel, shape ``shape`` = (height, width).

    ``x_px, y_px``: the crossing, pixel centres at integers. ``first_row, first_column``: the place
    of the rendered rectangle in the whole picture. ``order``: Gauss-Legendre nodes per pixel side;
    4 is exact to 1e-6 of the contrast for a blur of 0.8 px and more.
    """
    nodes, weights = np.polynomial.legendre.leggauss(order)
    rows = first_row + np.arange(shape[0], dtype=np.float64) - y_px
    columns = first_column + np.arange(shape[1], dtype=np.float64) - x_px
    turn = math.radians(crosshair.rotation_deg)
    c, s = math.cos(turn), math.sin(turn)
    half, reach, blur = crosshair.line_px / 2, crosshair.half_length_px, crosshair.blur_px
    share = np.zeros(shape)
    for dy, wy in zip(nodes / 2, weights / 2, strict=True):
        for dx, wx in zip(nodes / 2, weights / 2, strict=True):
            x, y = (columns + dx)[None, :], (rows + dy)[:, None]
            u, v = c * x + s * y, -s * x + c * y
            upright, level = _bar(u, half, blur), _bar(v, half, blur)
            if math.isfinite(reach):
                upright, level = upright * _bar(v, reach, blur), level * _bar(u, reach, blur)
            share += wx * wy * (upright + level - upright * level)
    return crosshair.background + crosshair.contrast * share
