"""The folded fit against a general least-squares solver on the very same pixels."""

import math
from dataclasses import replace

import numpy as np
import pytest
from scipy.optimize import least_squares

from readout.sighting.arm import fit_arm
from readout.sighting.fold import Line, cut_strip, fold_strip
from readout.sighting.profile import line_profile
from readout.sighting.solve import Shape
from tests.sighting.frames import BRIGHT, frame


def test_the_fold_keeps_every_sum():
    rng = np.random.default_rng(3)
    pixels = rng.integers(0, 200, (60, 80)).astype(np.uint8)
    strip = cut_strip(pixels, Line(40.2, 0.07, 30.0), 9)
    fold = fold_strip(strip)
    assert fold.n.sum() == len(strip.rows)
    assert fold.level.sum() == strip.levels.sum()
    assert fold.level2.sum() == (strip.levels**2).sum()
    along = (strip.levels * strip.along[:, None]).sum()
    assert fold.level_along.sum() == pytest.approx(along, rel=1e-12)
    assert fold.along2.sum() == pytest.approx((strip.along**2).sum(), rel=1e-12)


@pytest.mark.parametrize("rotation_deg", [0.0, 0.05, 3.7, -9.5])
def test_agrees_with_a_general_solver(rotation_deg):
    """scipy.optimize.least_squares, pixel by pixel, same model and weights: same line.

    Folding approximates within a phase group; the two must differ by far less than the noise.
    """
    rng = np.random.default_rng(11)
    crosshair = replace(BRIGHT, rotation_deg=rotation_deg)
    pixels = frame((300, 400), 201.3, -80.0, crosshair, rng=rng)  # the level arm is outside
    slope = -math.tan(math.radians(rotation_deg))
    start = Line(201.3 + slope * (150 + 80), slope, 150.0)
    fit = fit_arm(pixels, start, Shape(0.0, 0.0, 1.0, 2.5, 1.5))
    strip, shape = fit.strip, fit.shape
    light = line_profile(
        (strip.offsets - strip.phase[:, None]) * strip.line.cosine, shape.half_width, shape.blur
    ).value
    gain = 0.03
    sd = np.sqrt(gain**2 * (400 + 36 + 6000 * light) + 1 / 12)

    def residuals(p):
        background, gradient, contrast, half_width, blur, shift, turn = p
        across = strip.offsets - strip.phase[:, None] - shift - turn * strip.along[:, None]
        u = across * strip.line.cosine
        model = (
            background
            + gradient * u
            + contrast * line_profile(u, half_width, blur, strip.line.cosine).value
        )
        return ((model - strip.levels) / sd).ravel()

    begin = (
        *(shape.background, shape.gradient, shape.contrast),
        *(shape.half_width, shape.blur, 0.0, 0.0),
    )
    general = least_squares(residuals, begin, x_scale=np.abs(begin) + 0.01, method="trf")
    cov = np.linalg.inv(general.jac.T @ general.jac)[5:, 5:]
    x_sd, slope_sd = np.sqrt(np.diag(cov))
    found_x = strip.line.middle_x + general.x[5]
    found_slope = strip.line.slope + general.x[6]
    assert fit.line.middle_x == pytest.approx(found_x, abs=0.1 * x_sd)
    assert fit.line.slope == pytest.approx(found_slope, abs=0.1 * slope_sd)
    from_pixels = np.sqrt(np.diag(fit.cov) / fit.excess)
    assert from_pixels == pytest.approx([x_sd, slope_sd], rel=0.05)
    assert 1.0 <= fit.excess < 1.7  # chi-square of 62 degrees of freedom, 99.9 %
