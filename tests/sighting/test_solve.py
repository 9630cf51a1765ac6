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
    """Against the sums taken slice by slice, with slices of uneven contrast."""
    rng = np.random.default_rng(3)
    pixels = rng.integers(0, 200, (60, 80)).astype(np.uint8)
    strip = cut_strip(pixels, Line(40.2, 0.3, 30.0), 9)
    contrast = rng.uniform(0.5, 1.5, len(strip.rows))
    fold = fold_strip(strip, strip.levels, contrast)
    along = contrast * strip.along
    assert fold.n.sum() == len(strip.rows) == 60
    assert fold.level.sum() == pytest.approx(strip.levels.sum())
    assert fold.level2.sum() == pytest.approx((strip.levels**2).sum())
    for sums, values in (
        (fold.of.c, contrast),
        (fold.of.ca, along),
        (fold.of.c2, contrast**2),
        (fold.of.c2a, contrast * along),
        (fold.of.c2a2, along**2),
        (fold.of.cp, contrast * fold.deviation),
        (fold.of.c2p, contrast**2 * fold.deviation),
        (fold.of.c2p2, (contrast * fold.deviation) ** 2),
        (fold.of.c2pa, contrast * fold.deviation * along),
        (fold.level_c, contrast[:, None] * strip.levels),
        (fold.level_ca, along[:, None] * strip.levels),
    ):
        assert sums.sum() == pytest.approx(values.sum(), rel=1e-12, abs=1e-9)


def test_slices_of_a_hardly_turned_arm_are_means_of_rows():
    """An eighth of the work, and not a grey level lost."""
    pixels = np.random.default_rng(4).integers(0, 200, (320, 60)).astype(np.uint8)
    strip = cut_strip(pixels, Line(30.1, 0.001, 160.0), 7)
    assert strip.depth == 8
    assert strip.levels == pytest.approx(pixels[:, 23:38].reshape(40, 8, 15).mean(axis=1))
    assert strip.clipped is None
    assert strip.peak == pixels[:, 23:38].max()


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
    rough = Shape(0.0, 0.0, 1.0, 2.5, 1.5)  # the line is right, so one strip is all it takes
    fit = fit_arm(pixels, start, rough)
    shape = fit.shape
    half_columns = math.ceil((1.25 * rough.reach_px + 2) / start.cosine)
    strip = cut_strip(pixels, start, half_columns)
    light = line_profile(
        (strip.offsets - strip.phase[:, None]) * strip.line.cosine, shape.half_width, shape.blur
    ).value
    gain = 0.03
    sd = np.sqrt((gain**2 * (400 + 36 + 6000 * light) + 1 / 12) / strip.depth)

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
    assert fit.line.x_at(strip.line.middle_y) == pytest.approx(found_x, abs=0.1 * x_sd)
    assert fit.line.slope == pytest.approx(found_slope, abs=0.1 * slope_sd)
    from_pixels = np.sqrt(np.diag(fit.cov) / fit.excess)
    # the fit knows the noise from the scatter of its slices alone: of 37 to about 4 per cent
    assert from_pixels == pytest.approx([x_sd, slope_sd], rel=0.05 if strip.depth == 1 else 0.16)
    assert 1.0 <= fit.excess < 1.9  # chi-square of 35 degrees of freedom or more, 99.9 %
