"""Conversion and printing."""

import math

import numpy as np
import pytest

from readout.model import Quality
from readout.units import Unit, decimals_for, from_arcsec, signed


def test_shapes_and_nan_pass_through():
    angles = np.array([[1.0, np.nan], [3.0, -4.0]])
    for unit in Unit:
        converted = from_arcsec(angles, unit)
        assert converted.shape == (2, 2)
        assert np.isnan(converted[0, 1])


@pytest.mark.parametrize(
    ("sd", "decimals"),
    [(0.0123, 3), (0.12, 2), (0.96, 2), (1.2, 1), (30.0, 0), (0.0, 6), (math.nan, 6), (1e-9, 6)],
)
def test_two_digits_of_the_uncertainty(sd, decimals):
    """JCGM 100:2008, 7.2.6: at most two significant digits of an uncertainty are of use."""
    assert decimals_for(sd) == decimals


def test_signs_are_shown_and_zero_has_none_of_minus():
    assert signed(-3.206, 3) == "\N{MINUS SIGN}3.206"
    assert signed(12345.6, 1) == "+12\N{NARROW NO-BREAK SPACE}345.6"
    assert signed(-0.0004, 3) == "+0.000"
    assert signed(math.nan, 2) == "\N{EN DASH}"


def test_quality_words_go_there_and_back():
    both = Quality.DIM | Quality.AT_EDGE
    assert both.words() == ["dim", "at_edge"]
    assert Quality.from_words(both.words()) == both
    assert Quality.OK.words() == []
    with pytest.raises(KeyError):
        Quality.from_words(["sharp"])
