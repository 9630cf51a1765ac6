"""Allan deviations against published tables, exact properties, and chi-square."""

import math

import numpy as np
import pytest

from readout.stability.allan import allan_deviation
from readout.stability.even import EvenSeries

NINE = [892, 809, 823, 798, 671, 644, 883, 903, 677]
"""NBS Monograph 140, annex 8.E, as in W. J. Riley, NIST SP 1065 (2008), table 30."""


def deviations(values, factors=None, interval_s=1.0):
    return allan_deviation(EvenSeries(interval_s, np.asarray(values, dtype=float)), factors)


def test_nine_points_of_nbs_monograph_140():
    found = deviations(NINE, [1, 2])
    assert found.deviation == pytest.approx([91.22945, 85.95287], rel=1e-6)
    assert found.n.tolist() == [8, 6]


def test_a_thousand_points_of_sp_1065():
    """Table 32: the generator n = 16807 n mod 2147483647, started at 1234567890."""
    n, values = 1234567890, []
    for _ in range(1000):
        values.append(n / 2147483647)
        n = 16807 * n % 2147483647
    found = deviations(values, [1, 10, 100])
    assert found.deviation == pytest.approx([2.922319e-1, 9.159953e-2, 3.241343e-2], rel=1e-6)
    assert found.n.tolist() == [999, 981, 801]


def test_a_steady_drift_and_white_noise():
    """D tau / sqrt 2, exactly; sigma / sqrt m in the mean."""
    drift = deviations(0.01 * np.arange(600), interval_s=0.5)
    assert drift.deviation == pytest.approx(0.02 * drift.tau_s / math.sqrt(2), rel=1e-9)
    white = deviations(np.random.default_rng(1).standard_normal(20_000))
    of_sd = white.deviation / np.sqrt(1 / white.tau_s)
    assert np.all(np.abs(of_sd - 1) < 4 / np.sqrt(2 * white.freedom))


@pytest.mark.parametrize("walk", [False, True], ids=["white noise", "random walk"])
def test_the_degrees_of_freedom_are_not_promised_too_many(walk):
    """From 2000 series: 2 mean^2 / variance of the Allan variance is its freedom by definition."""
    rng = np.random.default_rng(2)
    variances = []
    for _ in range(2000):
        noise = rng.standard_normal(96)
        found = deviations(np.cumsum(noise) if walk else noise)
        variances.append(found.deviation**2)
    variances = np.array(variances)
    true = 2 * variances.mean(axis=0) ** 2 / variances.var(axis=0)
    # The variance of a variance of 2000 draws is known to some 10 %.
    assert np.all(found.freedom < 1.15 * true)
    assert np.all(found.freedom > 0.3 * true)


def test_its_interval_holds_the_truth():
    rng, inside, runs = np.random.default_rng(3), 0, 1000
    for _ in range(runs):
        found = deviations(rng.standard_normal(300), [10])
        low, high = found.interval(0.683)
        inside += low[0] <= math.sqrt(0.1) <= high[0]
    # At least 68 %: the freedom is the least of three kinds of noise.
    assert 0.683 - 4 * math.sqrt(0.2 / runs) < inside / runs < 0.85


def test_gaps_leave_the_deviation_unbiased():
    """A tenth of the readings missing one by one, and a hole in the middle."""
    rng = np.random.default_rng(4)
    values = rng.standard_normal(20_000)
    values[rng.random(20_000) < 0.05] = np.nan
    values[9000:9500] = np.nan
    found = deviations(values, [1, 64])
    expected = [1, math.sqrt(1 / 64 / 0.95)]
    assert np.all(np.abs(found.deviation / expected - 1) < 4 / np.sqrt(2 * found.freedom))


def test_a_constant_far_from_zero_loses_no_digits():
    values = 1e7 + np.random.default_rng(5).standard_normal(4096)
    near = deviations(values - 1e7)
    assert deviations(values).deviation == pytest.approx(near.deviation, rel=1e-6)


def test_without_two_neighbours_there_is_nothing():
    assert deviations([1.0, np.nan, 1.0, np.nan, 1.0]).tau_s.size == 0
