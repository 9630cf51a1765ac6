"""An arm piece by piece."""

import math

import numpy as np
import pytest

from readout.sighting.look import Look
from readout.sighting.sections import Light
from tests.sighting.arms import solved, upright_arm


def sections(pixels, line):
    strip, fold, solution = solved(pixels, line)
    look = Look.at_first(strip, fold, solution)
    found = look.sections(look.residual())
    assert found is not None
    return found


def test_a_clean_arm_scatters_as_its_pixels_do():
    """Chi-squares of 64 sections about their models: 1, with sd sqrt(2 / 64) each."""
    shift, contrast, ground = [], [], []
    for seed in range(30):
        rng = np.random.default_rng((80, seed))
        found = sections(*upright_arm(100 + rng.random(), rng))
        assert not found.uneven
        assert not found.jagged
        shift.append(np.mean((found.shift / found.shift_sd) ** 2))
        contrast.append(np.mean((found.contrast / found.contrast_sd) ** 2))
        ground.append(np.mean((found.background / found.background_sd) ** 2))
    expected_sd = math.sqrt(2 / len(found.along) / 30)
    for chi_squares in (shift, contrast, ground):
        assert np.mean(chi_squares) == pytest.approx(1.0, abs=4 * expected_sd + 0.05)


def test_marks_across_an_arm_make_its_ground_jagged():
    pixels, line = upright_arm(100.3, np.random.default_rng(81))
    marked = pixels.astype(int)
    marked[5::20] += 40
    marked[6::20] += 40
    assert sections(np.clip(marked, 0, 255).astype(np.uint8), line).jagged


def test_a_slope_of_light_is_uneven_but_not_jagged():
    pixels, line = upright_arm(100.3, np.random.default_rng(82))
    shaded = pixels * np.linspace(0.7, 1.0, len(pixels))[:, None]
    found = sections(np.rint(shaded).astype(np.uint8), line)
    assert found.uneven
    assert not found.jagged


def test_the_rise_of_light_along_an_arm():
    """A line through even sections, a cubic through uneven ones; beyond the end, as at the end."""
    rows = np.linspace(0.0, 400.0, 41)
    light = 1 + 1e-4 * (rows - 200) + 2e-9 * (rows - 200) ** 3
    sd = np.full(41, 1e-3)
    rise, rise_sd = Light(rows, light, sd, uneven=True).rise_at(350.0)
    assert rise == pytest.approx(1e-4 + 6e-9 * 150**2, rel=1e-9)
    straight = Light(rows, 1 + 1e-4 * (rows - 200), sd, uneven=False).rise_at(350.0)
    assert straight[0] == pytest.approx(1e-4, rel=1e-9)
    assert straight[1] == pytest.approx(1e-3 / math.sqrt(((rows - 200) ** 2).sum()), rel=1e-9)
    assert rise_sd > straight[1]
    beyond = Light(rows, light, sd, uneven=True).rise_at(900.0)
    assert beyond[0] == pytest.approx(1e-4 + 6e-9 * 200**2, rel=1e-9)
