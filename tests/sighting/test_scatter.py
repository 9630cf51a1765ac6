"""The noise a fit reads from its slices, against the sensor's own law (EMVA 1288)."""

import numpy as np
import pytest

from readout.model import QUANTISATION_VAR
from readout.simulation.bar import bar
from tests.sighting.arms import solved, upright_arm
from tests.sighting.frames import BRIGHT, SENSOR


@pytest.mark.parametrize("rotation_deg", [0.0, 0.05, 0.4, 2.0, 20.0])
def test_the_variance_of_ground_and_line_is_that_of_photons_and_rounding(rotation_deg):
    """Whatever the turn: slices lie off the mean of their phase by much more than their noise."""
    grounds, peaks = [], []
    for seed in range(40):
        pixels, line = upright_arm(
            100.3, np.random.default_rng((60, seed)), rotation_deg=rotation_deg
        )
        strip, _, solution = solved(pixels, line)
        grounds.append(strip.depth / solution.weight.max())
        peaks.append(strip.depth / solution.weight.min())
    light = float(bar(np.zeros(1), BRIGHT.line_px / 2, np.hypot(BRIGHT.blur_px, 12**-0.5))[0])
    peak = BRIGHT.background + BRIGHT.contrast * light
    for found, electrons in ((grounds, BRIGHT.background), (peaks, peak)):
        expected = float(SENSOR.noise_var_levels2(electrons)) + QUANTISATION_VAR
        scatter = np.std(found) / np.sqrt(len(found))
        assert np.mean(found) == pytest.approx(expected, abs=4 * scatter + 0.03 * expected)


def test_what_the_model_does_not_describe_is_no_noise():
    """A second line of 5 per cent moves all slices of a phase alike; its own light adds little."""
    rng = np.random.default_rng(61)
    _, _, alone = solved(*upright_arm(100.3, rng))
    _, _, beside = solved(*upright_arm(100.3, rng, ghost=(0.05, 9.0)))
    assert beside.misfit > 10 > 2 > alone.misfit
    assert beside.slice_sd == pytest.approx(alone.slice_sd, rel=0.15)
