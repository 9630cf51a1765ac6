"""How well the crossing of a simulated crosshair can be placed at best: its Cramér-Rao bound."""

from __future__ import annotations

from dataclasses import replace
from typing import Final

import numpy as np

from readout.model import F64, QUANTISATION_VAR
from readout.sighting.bound import cramer_rao_cov
from readout.simulation.crosshair import Crosshair, union_image
from readout.simulation.sensor import Sensor

PARAMETERS: Final = (
    "x_px",
    "y_px",
    "background",
    "upright contrast",
    "level contrast",
    "crossing contrast",
    "upright line_px",
    "level line_px",
    "upright blur_px",
    "level blur_px",
    "upright angle_rad",
    "level angle_rad",
)
"""Free in every bound."""

ENDS: Final = ("upright slide_px", "level slide_px")
"""Free besides if the arms have ends or a gap: what these say of the crossing is not used."""

PLANE: Final = ("background slope along x", "background slope along y")
"""Free besides when asked for."""


def crossing_bound_cov(
    shape: tuple[int, int],
    x_px: float,
    y_px: float,
    crosshair: Crosshair,
    sensor: Sensor,
    *,
    plane: bool = False,
) -> F64:
    """Least covariance of the crossing's (x, y), shape (2, 2), px^2, in a frame of ``shape``.

    All of ``PARAMETERS`` are free: what a fit faces that takes the two arms for themselves, each
    with its own direction, width, blur and contrast, and the crossing's brightness with them. A
    fit that knows more (one turn for both arms, one line profile) has a bound no greater, so
    this is the more pessimistic of the two; in a frame that holds the whole crosshair the two
    differ by less than one per cent. Ends and gap of an arm may slide along it, for nobody knows
    that they lie evenly about the crossing; where they are is taken as known otherwise.
    ``plane`` frees a sloping background too. Pixel variance is that of photons, read noise and
    rounding, 1/12 level^2. Levels in electrons; saturation is not considered. A coordinate whose
    arm is not in the frame has an infinite variance.
    """
    rows = np.arange(shape[0], dtype=np.float64)
    columns = np.arange(shape[1], dtype=np.float64)
    upright, level = crosshair.upright, crosshair.level
    ended = not (upright.endless and level.endless)

    def expected(p: F64) -> F64:
        x, y, background, of_up, of_level, of_both = p[:6]
        up_line, level_line, up_blur, level_blur, up_angle, level_angle = p[6:12]
        up_slide, level_slide = p[12:14] if ended else (0.0, 0.0)
        image = union_image(
            columns - x,
            rows - y,
            replace(
                upright,
                half_width_px=up_line / 2,
                blur_px=up_blur,
                normal_rad=up_angle,
                slide_px=up_slide,
            ),
            replace(
                level,
                half_width_px=level_line / 2,
                blur_px=level_blur,
                normal_rad=level_angle,
                slide_px=level_slide,
            ),
            background=background,
            contrasts=(of_up, of_level, of_both),
        )
        if plane:
            image += p[-2] * (columns - x_px) + p[-1] * (rows - y_px)[:, None]
        return image

    largest = max(abs(contrast) for contrast in crosshair.contrasts)
    shortest = min(upright.half_width_px, level.half_width_px, upright.blur_px, level.blur_px)
    values = [
        *(x_px, y_px, crosshair.background, *crosshair.contrasts),
        *(2 * upright.half_width_px, 2 * level.half_width_px, upright.blur_px, level.blur_px),
        *(upright.normal_rad, level.normal_rad),
    ]
    steps = [
        *([1e-3] * 2 + [max(largest, 1.0) * 1e-3] * 4),
        *([1e-3 * shortest] * 4 + [1e-3 / max(shape)] * 2),
    ]
    if ended:
        values += [0.0, 0.0]
        steps += [1e-3, 1e-3]
    if plane:
        values += [0.0, 0.0]
        steps += [1e-3 * max(largest, 1.0) / max(shape)] * 2
    parameters = np.array(values)
    rounding_var = QUANTISATION_VAR / sensor.gain_levels_per_electron**2
    variance = expected(parameters) + sensor.read_noise_electrons**2 + rounding_var
    return cramer_rao_cov(expected, parameters, np.array(steps), variance)[:2, :2]
