"""The least uncertainty with which any unbiased fit can place the crossing in one frame.

The Cramér-Rao bound: the inverse of the Fisher information of all pixels, sum of the products of
derivatives of the expected level divided by its variance (C. R. Rao 1945, H. Cramér 1946; for a
position on a pixel array: K. A. Winick, J. Opt. Soc. Am. A 3 (1986) 1809).
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import replace
from typing import Final

import numpy as np

from readout.model import F64, QUANTISATION_VAR
from readout.simulation.crosshair import Crosshair, arm_shares
from readout.simulation.sensor import Sensor

LEAST_INFORMATION: Final = 1e-10
"""Below this part of its largest possible value, information is rounding of the differences."""

UNKNOWN_SHARE: Final = 1e-6
"""A parameter with more than this share in what the pixels do not fix counts as not fixed."""

PARAMETERS = (
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


def cramer_rao_cov(
    expected: Callable[[F64], F64], parameters: F64, steps: F64, variance: F64
) -> F64:
    """Covariance bound of ``parameters``, shape (n, n), for independent normal or Poisson pixels.

    ``expected`` gives the levels, any shape, for n parameters; ``variance`` is theirs, of the
    same shape, all > 0. Derivatives are central differences over ``steps``. The information in
    the variance itself is left out: it is smaller by twice the number of electrons of a pixel.
    A parameter the pixels do not fix, alone or against others, gets an infinite variance and no
    covariance; the rest is not harmed by it.
    """
    derivatives = np.stack(
        [
            (expected(parameters + step) - expected(parameters - step)).ravel() / (2 * size)
            for size, step in zip(steps, np.diag(steps), strict=True)
        ]
    )
    information = (derivatives / variance.ravel()) @ derivatives.T
    scale = np.sqrt(np.diag(information))
    scale[scale == 0] = 1.0
    eigenvalues, vectors = np.linalg.eigh(information / np.outer(scale, scale))
    known = eigenvalues > LEAST_INFORMATION
    cov = (vectors[:, known] / eigenvalues[known]) @ vectors[:, known].T / np.outer(scale, scale)
    unknown = (vectors[:, ~known] ** 2).sum(axis=1) > UNKNOWN_SHARE
    cov[unknown, :] = cov[:, unknown] = 0.0
    cov[unknown, unknown] = np.inf
    return np.asarray(cov)


def crossing_bound_cov(
    shape: tuple[int, int], x_px: float, y_px: float, crosshair: Crosshair, sensor: Sensor
) -> F64:
    """Least covariance of the crossing's (x, y), shape (2, 2), px^2, in a frame of ``shape``.

    All of ``PARAMETERS`` are free: what a fit faces that takes the two arms for themselves, each
    with its own direction, width, blur and contrast, and the crossing's brightness with them. A
    fit that knows more (one turn for both arms, one line profile) has a bound no greater, so
    this is the more pessimistic of the two; in a frame that holds the whole crosshair the two
    differ by less than one per cent. Pixel variance is that of photons, read noise and rounding,
    1/12 level^2. Levels in electrons; saturation is not considered. A coordinate whose arm is not
    in the frame has an infinite variance.
    """

    def expected(p: F64) -> F64:
        x, y, background, up_contrast, level_contrast, both_contrast = p[:6]
        up_line, level_line, up_blur, level_blur, up_angle, level_angle = p[6:]
        upright = replace(
            crosshair, line_px=up_line, blur_px=up_blur, rotation_deg=np.degrees(up_angle)
        )
        up, level, both = arm_shares(
            shape,
            x,
            y,
            upright,
            level_rotation_deg=np.degrees(level_angle),
            level_line_px=level_line,
            level_blur_px=level_blur,
        )
        return background + up_contrast * up + level_contrast * level - both_contrast * both

    turn, contrast = np.radians(crosshair.rotation_deg), crosshair.contrast
    line, blur = crosshair.line_px, crosshair.blur_px
    parameters = np.array(
        [
            *(x_px, y_px, crosshair.background),
            *(contrast, contrast, contrast),
            *(line, line, blur, blur, turn, turn),
        ]
    )
    level_step = max(abs(contrast), 1.0) * 1e-3
    shape_step = 1e-3 * min(line, blur)
    angle_step = 1e-3 / max(shape)
    steps = np.array([1e-3] * 2 + [level_step] * 4 + [shape_step] * 4 + [angle_step] * 2)
    rounding_var = QUANTISATION_VAR / sensor.gain_levels_per_electron**2
    variance = expected(parameters) + sensor.read_noise_electrons**2 + rounding_var
    return cramer_rao_cov(expected, parameters, steps, variance)[:2, :2]
