"""One upright arm, cut, folded and solved: what the tests of the fit's parts begin with."""

from __future__ import annotations

import math
from dataclasses import replace

import numpy as np

from readout.model import Pixels
from readout.sighting.fold import Fold, Line, Strip, cut_strip, fold_strip
from readout.sighting.shape import Shape
from readout.sighting.solve import Solution, solve_fold
from readout.simulation.crosshair import Crosshair, crosshair_image
from readout.simulation.sensor import Sensor, expose
from tests.sighting.frames import BRIGHT, SENSOR

SHAPE = (480, 200)
ROUGH = Shape(0.0, 0.0, 1.0, 2.5, 1.5)


def upright_arm(
    x_px: float,
    rng: np.random.Generator,
    *,
    rotation_deg: float = 0.4,
    crosshair: Crosshair = BRIGHT,
    ghost: tuple[float, float] | None = None,
    sensor: Sensor = SENSOR,
) -> tuple[Pixels, Line]:
    """A picture whose level arm is out of sight, and the arm's true line.

    ``x_px``: at the middle row. ``ghost``: height and distance of a line beside it.
    """
    middle, slope = (SHAPE[0] - 1) / 2, -math.tan(math.radians(rotation_deg))
    y_px = -400.0
    turned = replace(crosshair, rotation_deg=rotation_deg)
    x_there = x_px + slope * (y_px - middle)
    light = crosshair_image(SHAPE, x_there, y_px, turned)
    if ghost is not None:
        again = replace(turned, background=0.0, contrast=ghost[0] * crosshair.contrast)
        light += crosshair_image(SHAPE, x_there + ghost[1], y_px, again)
    return expose(light, sensor, rng), Line(x_px, slope, middle)


def solved(pixels: Pixels, line: Line, half_columns: int = 16) -> tuple[Strip, Fold, Solution]:
    """The strip along a line, its fold, and the solution from a rough shape."""
    strip = cut_strip(pixels, line, half_columns)
    assert strip is not None
    fold = fold_strip(strip, strip.levels)
    solution = solve_fold(fold, strip.line.cosine, ROUGH, strip.depth)
    assert solution is not None
    return strip, fold, solution
