"""Standard uncertainties of limits, and what is drawn, against scipy's distributions."""

import math

import numpy as np
import pytest
from scipy import stats

from readout.angle.distributions import Distribution, draw_unit, limits_of_sd, sd_of_limits
from readout.errors import BadInput

SEED = 61201
TRIALS = 200_000
LIMITED = {
    Distribution.RECTANGULAR: stats.uniform(-1, 2),
    Distribution.TRIANGULAR: stats.triang(0.5, -1, 2),
    Distribution.ARCSINE: stats.arcsine(-1, 2),
}


@pytest.mark.parametrize("shape", list(LIMITED))
def test_sd_of_limits(shape):
    assert sd_of_limits(2.5, shape) == pytest.approx(2.5 * LIMITED[shape].std(), rel=1e-12)
    assert limits_of_sd(sd_of_limits(2.5, shape), shape) == pytest.approx(2.5, rel=1e-12)


@pytest.mark.parametrize("shape", list(Distribution))
def test_draws_follow_the_distribution(shape):
    """Kolmogorov-Smirnov, at one in ten thousand."""
    print(f"seed {SEED}")
    drawn = draw_unit(shape, math.inf, TRIALS, np.random.default_rng(SEED))
    if shape is Distribution.NORMAL:
        expected = stats.norm()
    else:
        sd = LIMITED[shape].std()
        expected = {
            Distribution.RECTANGULAR: stats.uniform(-1 / sd, 2 / sd),
            Distribution.TRIANGULAR: stats.triang(0.5, -1 / sd, 2 / sd),
            Distribution.ARCSINE: stats.arcsine(-1 / sd, 2 / sd),
        }[shape]
    assert expected.std() == pytest.approx(1, rel=1e-12)
    assert stats.kstest(drawn, expected.cdf).pvalue > 1e-4


def test_few_degrees_of_freedom_spread_a_normal_as_students_t():
    print(f"seed {SEED}")
    drawn = draw_unit(Distribution.NORMAL, 5, TRIALS, np.random.default_rng(SEED))
    assert stats.kstest(drawn, stats.t(5).cdf).pvalue > 1e-4


def test_limits_in_doubt():
    """Limits of a (1 ± d), d = 1/sqrt(2 nu): variance a^2 (1 + d^2/3) / 3, JCGM 101 6.4.3.3."""
    print(f"seed {SEED}")
    freedom = 8
    drawn = draw_unit(Distribution.RECTANGULAR, freedom, TRIALS, np.random.default_rng(SEED))
    expected = 1 + 1 / (2 * freedom) / 3
    se = expected * math.sqrt(2 / TRIALS)
    assert drawn.var() == pytest.approx(expected, abs=4 * se)
    assert np.abs(drawn).max() <= math.sqrt(3) * (1 + 1 / math.sqrt(2 * freedom))
    assert np.abs(drawn).max() > math.sqrt(3)


@pytest.mark.parametrize("half_width", [-1.0, math.nan, math.inf])
def test_limits_that_cannot_be(half_width):
    with pytest.raises(BadInput, match="cannot be"):
        sd_of_limits(half_width, Distribution.RECTANGULAR)


def test_a_normal_has_no_limits():
    with pytest.raises(BadInput, match="standard uncertainty"):
        sd_of_limits(1.0, Distribution.NORMAL)
    assert limits_of_sd(1.0, Distribution.NORMAL) is None
