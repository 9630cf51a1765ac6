"""What real frames have beside the return: shading, dust, bad pixels, second returns, a scale.

Each is a small pure function. Some give a *map* by which the expected electrons of a picture are
multiplied (dust, shading, pixel response), others *electrons* to be added (hot pixels, a second
return, a slope), so that they combine freely before the exposure. What is random comes from the
generator given: the same generator, the same dust.
"""

from __future__ import annotations

import math
from dataclasses import replace

import numpy as np
from scipy.special import ndtr

from readout.model import F64
from readout.simulation.bar import bar
from readout.simulation.crosshair import Crosshair, crosshair_image

Shape = tuple[int, int]


def dust(
    shape: Shape,
    rng: np.random.Generator,
    *,
    n: int = 15,
    radius_px: tuple[float, float] = (2.0, 10.0),
    depth: tuple[float, float] = (0.1, 0.5),
) -> F64:
    """Map of ``n`` soft dark discs fixed in the picture, each with its radius and its depth."""
    height, width = shape
    rows, columns = np.arange(height)[:, None], np.arange(width)[None, :]
    transmission = np.ones(shape)
    for _ in range(n):
        x, y = rng.uniform(0, width), rng.uniform(0, height)
        radius, dark = rng.uniform(*radius_px), rng.uniform(*depth)
        from_edge = (radius - np.hypot(columns - x, rows - y)) / (0.25 * radius)
        transmission *= 1 - dark * ndtr(from_edge)
    return transmission


def pixel_response(shape: Shape, rng: np.random.Generator, *, sd: float = 0.01) -> F64:
    """Map of pixels that are not equally sensitive: the PRNU of EMVA 1288, normal, mean 1."""
    return np.asarray(rng.normal(1.0, sd, shape))


def vignetting(shape: Shape, *, corner: float = 0.5) -> F64:
    """Map that falls from 1 in the middle to ``corner`` by the law of the fourth power of cos."""
    rows, columns = _from_middle(shape)
    tan2 = (rows**2 + columns**2) * (1 / math.sqrt(corner) - 1) / 2
    return np.asarray(1 / (1 + tan2) ** 2)


def uneven_light(shape: Shape, *, depth: float = 0.3, direction_deg: float = 0.0) -> F64:
    """Map that rises evenly from 1 - depth to 1 + depth across the picture.

    ``direction_deg``: where it is brightest, from +x towards +y.
    """
    rows, columns = _from_middle(shape)
    c, s = math.cos(math.radians(direction_deg)), math.sin(math.radians(direction_deg))
    return np.asarray(1 + depth * (c * columns + s * rows) / (abs(c) + abs(s)))


def hot_pixels(
    shape: Shape,
    rng: np.random.Generator,
    *,
    share: float = 1e-4,
    electrons: tuple[float, float] = (500.0, 8000.0),
) -> F64:
    """Electrons of single pixels that are bright in the dark, a ``share`` of all."""
    added = np.zeros(shape)
    n = rng.binomial(added.size, share)
    added.ravel()[rng.integers(0, added.size, n)] = rng.uniform(*electrons, n)
    return added


def slope(shape: Shape, *, along_x: float, along_y: float) -> F64:
    """Electrons of a plane, 0 in the middle, that rises by so many from middle to edge."""
    rows, columns = _from_middle(shape)
    return np.asarray(along_x * columns + along_y * rows)


def second_return(
    shape: Shape,
    x_px: float,
    y_px: float,
    crosshair: Crosshair,
    *,
    strength: float,
    offset_px: tuple[float, float],
) -> F64:
    """Electrons of the same reticle seen again, fainter, at an offset from the crossing.

    A ghost off a splitter or a window; a line with a side lobe (coma) if the offset is short.
    """
    again = replace(
        crosshair,
        background=0.0,
        contrast=strength * crosshair.contrast,
        level_contrast=None
        if crosshair.level_contrast is None
        else strength * crosshair.level_contrast,
    )
    return crosshair_image(shape, x_px + offset_px[0], y_px + offset_px[1], again)


def graduated_scale(
    shape: Shape,
    *,
    at_px: float,
    pitch_px: float = 20.0,
    line_px: float = 2.0,
    blur_px: float = 1.0,
    upright: bool = False,
    first_px: float = 7.3,
) -> F64:
    """Share of full cover by a fixed scale across the whole picture, shape ``shape``.

    A level line at row ``at_px`` with graduations every ``pitch_px``, every fifth twice as long;
    ``upright``: along a column. An engraved scale takes light away where it covers (multiply by
    1 - share), a lit one adds some.
    """
    if upright:
        lying = graduated_scale(
            (shape[1], shape[0]),
            at_px=at_px,
            pitch_px=pitch_px,
            line_px=line_px,
            blur_px=blur_px,
            first_px=first_px,
        )
        return lying.T
    blur = math.hypot(blur_px, math.sqrt(1 / 12))  # the pixel's own width, to second order
    rows = np.arange(shape[0], dtype=np.float64) - at_px
    columns = np.arange(shape[1], dtype=np.float64) - first_px
    number = np.rint(columns / pitch_px)
    graduation = bar(columns - number * pitch_px, line_px / 2, blur)
    half_length = pitch_px * np.where(number % 5 == 0, 0.6, 0.3)
    length = bar(rows[:, None], half_length[None, :], blur)
    line = bar(rows, line_px / 2, blur)[:, None]
    return np.asarray(1 - (1 - graduation * length) * (1 - line))


def _from_middle(shape: Shape) -> tuple[F64, F64]:
    """Rows as a column and columns as a row, from -1 to 1 between the middles of border pixels."""
    return np.linspace(-1, 1, shape[0])[:, None], np.linspace(-1, 1, shape[1])[None, :]
