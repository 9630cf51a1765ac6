"""A line beside an arm, and profiles whose two sides differ."""

import numpy as np
import pytest

from readout.sighting.beside import fits_badly, line_beside
from readout.sighting.lopsided import lopsidedness
from readout.simulation.response import display_encoded
from readout.simulation.sensor import Sensor
from tests.sighting.arms import solved, upright_arm


@pytest.mark.parametrize("distance", [-13.0, -8.0, 9.5, 14.0])
@pytest.mark.parametrize("height", [0.05, 0.2])
def test_a_line_beside_is_found_where_it_is(height, distance):
    """Before it is fitted: to a pixel, and a part of its height, for the arm has taken some."""
    rng = np.random.default_rng(70)
    strip, fold, solution = solved(*upright_arm(100.3, rng, ghost=(height, distance)))
    assert fits_badly(solution)
    found = line_beside(fold, strip.line.cosine, solution)
    assert found is not None
    assert found.distance == pytest.approx(distance, abs=1.5)
    assert 0.3 * height < found.height < 1.5 * height


def test_there_is_none_beside_a_clean_arm():
    rng = np.random.default_rng(71)
    for _ in range(30):
        strip, fold, solution = solved(*upright_arm(100 + rng.random(), rng))
        assert not fits_badly(solution)
        assert lopsidedness(fold, strip.line.cosine, solution)[0] == 1.0


def test_a_foot_on_both_sides_is_no_line_beside():
    """A response curve lifts both feet of the line: an odd profile, but not a lopsided one."""
    fine = Sensor(12, gain_levels_per_electron=0.48, read_noise_electrons=6.0, black_levels=0.0)
    rng = np.random.default_rng(72)
    pixels, line = upright_arm(100.3, rng, sensor=fine)
    strip, fold, solution = solved(display_encoded(pixels, fine.full_scale, gamma=0.45), line)
    assert fits_badly(solution)
    assert line_beside(fold, strip.line.cosine, solution) is None
    assert lopsidedness(fold, strip.line.cosine, solution)[0] == 1.0


def test_a_lopsided_profile_is_said():
    """A line of a tenth so near that it is not told apart."""
    rng = np.random.default_rng(73)
    strip, fold, solution = solved(*upright_arm(100.3, rng, ghost=(0.1, 5.0)))
    assert lopsidedness(fold, strip.line.cosine, solution)[0] > 5
