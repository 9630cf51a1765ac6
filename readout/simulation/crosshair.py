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
from typing import Final

import numpy as np
from scipy.special import ndtr

from readout.model import F64

TAIL_SIGMAS: Final = 7.0
"""A blurred edge is complete to 1e-12 this many sigmas away; nothing is computed beyond."""

LEAST_BLUR_PX: Final = 0.3
"""No lens and pixel is sharper than this; a sharper edge would need a finer rule."""

HALF_DIAGONAL_PX: Final = math.sqrt(0.5)


@dataclass(frozen=True, slots=True)
class Crosshair:
    """The return image: widths and lengths in pixels, levels in electrons (or any unit).

    ``contrast`` is added to ``background`` where an arm is fully bright, negative for a dark arm.
    ``blur_px``: standard deviation of the Gaussian. ``rotation_deg`` positive clockwise on screen.
    ``half_length_px``: an arm reaches this far either side of the crossing (infinite by default).
    """

    line_px: float = 5.0
    blur_px: float = 1.2
    rotation_deg: float = 0.0
    background: float = 800.0
    contrast: float = 7000.0
    half_length_px: float = math.inf

    def __post_init__(self) -> None:
        if not (self.line_px > 0 and self.blur_px > 0 and self.half_length_px > 0):
            raise ValueError(
                "line width, blur and arm length must be positive, got "
                f"{self.line_px=} {self.blur_px=} {self.half_length_px=}"
            )


def bar(u: F64, half_width_px: float, blur_px: float) -> F64:
    """Share of full brightness at distance ``u`` from the middle of a blurred bar, any shape."""
    return np.asarray(ndtr((u + half_width_px) / blur_px) - ndtr((u - half_width_px) / blur_px))


def pixel_nodes(order: int) -> list[tuple[float, float, float]]:
    """Product Gauss-Legendre rule of the unit square about 0: (dx, dy, weight), weights sum 1."""
    nodes, weights = np.polynomial.legendre.leggauss(order)
    return [
        (float(dx) / 2, float(dy) / 2, float(wx * wy) / 4)
        for dy, wy in zip(nodes, weights, strict=True)
        for dx, wx in zip(nodes, weights, strict=True)
    ]


def _order_for(blur_px: float) -> int:
    """Nodes that leave 5e-7: the derivatives of an edge grow as the blur shrinks."""
    return 4 if blur_px >= 0.6 else 6


def crosshair_image(
    shape: tuple[int, int],
    x_px: float,
    y_px: float,
    crosshair: Crosshair,
    *,
    first_row: int = 0,
    first_column: int = 0,
    order: int | None = None,
) -> F64:
    """Expected level of each pixel, shape ``shape`` = (height, width).

    ``x_px, y_px``: the crossing, pixel centres at integers. ``first_row, first_column``: the place
    of the rendered rectangle in the whole picture. ``order``: Gauss-Legendre nodes per pixel side;
    by itself as many as make every pixel exact to 1e-6 of the contrast, for a blur of 0.3 px and
    more. Only pixels an arm can reach are computed: a whole picture costs little more than its
    arms.
    """
    upright, level, both = arm_shares(
        shape, x_px, y_px, crosshair, first_row=first_row, first_column=first_column, order=order
    )
    return crosshair.background + crosshair.contrast * (upright + level - both)


def arm_shares(
    shape: tuple[int, int],
    x_px: float,
    y_px: float,
    crosshair: Crosshair,
    *,
    level_rotation_deg: float | None = None,
    level_line_px: float | None = None,
    level_blur_px: float | None = None,
    first_row: int = 0,
    first_column: int = 0,
    order: int | None = None,
) -> tuple[F64, F64, F64]:
    """Pixel means of the upright arm, the level arm and their product, each of ``shape``.

    The level arm shares the crosshair's turn, width and blur unless its own are given. With arms
    out of square the blurred product is an approximation, good to first order in the angle.
    """
    rows = (first_row + np.arange(shape[0], dtype=np.float64) - y_px)[:, None]
    columns = (first_column + np.arange(shape[1], dtype=np.float64) - x_px)[None, :]
    up_turn = math.radians(crosshair.rotation_deg)
    level_turn = up_turn if level_rotation_deg is None else math.radians(level_rotation_deg)
    up_blur, reach = crosshair.blur_px, crosshair.half_length_px
    level_blur = up_blur if level_blur_px is None else level_blur_px
    up_half = crosshair.line_px / 2
    level_half = up_half if level_line_px is None else level_line_px / 2
    nodes = pixel_nodes(order or _order_for(min(up_blur, level_blur)))

    def upright_at(x: F64, y: F64) -> F64:
        across = math.cos(up_turn) * x + math.sin(up_turn) * y
        share = bar(across, up_half, up_blur)
        if math.isfinite(reach):
            share = share * bar(math.cos(up_turn) * y - math.sin(up_turn) * x, reach, up_blur)
        return share

    def level_at(x: F64, y: F64) -> F64:
        across = math.cos(level_turn) * y - math.sin(level_turn) * x
        share = bar(across, level_half, level_blur)
        if math.isfinite(reach):
            along = math.cos(level_turn) * x + math.sin(level_turn) * y
            share = share * bar(along, reach, level_blur)
        return share

    up_across = math.cos(up_turn) * columns + math.sin(up_turn) * rows
    level_across = math.cos(level_turn) * rows - math.sin(level_turn) * columns
    near_up = np.abs(up_across) < up_half + TAIL_SIGMAS * up_blur + HALF_DIAGONAL_PX
    near_level = np.abs(level_across) < level_half + TAIL_SIGMAS * level_blur + HALF_DIAGONAL_PX
    images = []
    for near, share_at in (
        (near_up, upright_at),
        (near_level, level_at),
        (near_up & near_level, lambda x, y: upright_at(x, y) * level_at(x, y)),
    ):
        row, column = np.nonzero(near)
        x, y = columns[0, column], rows[row, 0]
        mean = np.zeros(x.size)
        for dx, dy, weight in nodes:
            mean += weight * share_at(x + dx, y + dy)
        image = np.zeros(shape)
        image[row, column] = mean
        images.append(image)
    return images[0], images[1], images[2]
