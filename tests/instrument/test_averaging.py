"""The average and its standard error, against series whose true mean is known."""

from __future__ import annotations

import math

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from scipy.signal import lfilter

from readout.instrument.averaging import (
    Rows,
    Statistic,
    TrailingWindow,
    average_of,
    standard_error,
)
from readout.model import F64, Quality
from tests.instrument.fakes import reading, unmeasured

SEED = 20261201


def ar1(rng: np.random.Generator, rho: float, shape: tuple[int, int]) -> F64:
    """Stationary first-order autoregressive series of variance 1 and mean 0, one a row."""
    noise = rng.normal(size=shape) * math.sqrt(1 - rho**2)
    noise[:, 0] /= math.sqrt(1 - rho**2)
    return np.asarray(lfilter([1.0], [1.0, -rho], noise, axis=1))


def true_sd_of_mean(rho: float, n: int) -> float:
    """sqrt((1 + 2 sum (1 - k/n) rho^k) / n): the exact variance of the mean of n AR(1) values."""
    k = np.arange(1, n)
    return math.sqrt((1 + 2 * float(np.sum((1 - k / n) * rho**k))) / n)


@pytest.mark.parametrize("rho", [0.5, 0.9])
def test_correlated_readings_are_covered_where_the_naive_error_fails(rho: float) -> None:
    print(f"seed {SEED}")
    n, repeats = 1000, 1000
    series = ar1(np.random.default_rng(SEED), rho, (repeats, n))
    means, claimed = series.mean(axis=1), np.array([standard_error(row) for row in series])
    naive = series.std(axis=1, ddof=1) / math.sqrt(n)
    # normal law: 68.3 % within one standard error; 5 % tolerance, 3.4 times the binomial sd
    assert np.mean(np.abs(means) < claimed) == pytest.approx(0.683, abs=0.05)
    assert np.mean(np.abs(means) < naive) < 0.5
    rms = math.sqrt(float(np.mean(claimed**2)))
    assert rms == pytest.approx(true_sd_of_mean(rho, n), rel=0.1)
    assert rms == pytest.approx(means.std(), rel=0.1)


def test_a_short_window_understates_only_a_little() -> None:
    """300 readings of rho 0.9 are worth 16 independent ones; the mean they are taken about is
    itself uncertain. Without the correction for that, 59 % were covered."""
    print(f"seed {SEED}")
    n, repeats = 300, 2000
    series = ar1(np.random.default_rng(SEED), 0.9, (repeats, n))
    claimed = np.array([standard_error(row) for row in series])
    # Student's law with 15 degrees of freedom leaves 66.7 % within one; binomial sd 1 %
    assert np.mean(np.abs(series.mean(axis=1)) < claimed) == pytest.approx(0.667, abs=0.04)


@pytest.mark.parametrize(("rho", "n"), [(0.0, 5), (0.5, 8), (0.9, 15), (0.9, 30), (0.9, 60)])
def test_a_window_of_few_readings_is_covered_with_its_history(rho: float, n: int) -> None:
    """A second at 30 readings a second, rho 0.9: of the window alone 45 % were covered."""
    print(f"seed {SEED}")
    repeats = 1000
    series = ar1(np.random.default_rng(SEED), rho, (repeats, max(300, 10 * n)))
    means = series[:, -n:].mean(axis=1)
    claimed = np.array([standard_error(row[-n:], row) for row in series])
    # normal law: 68.3 %; binomial sd 1.5 %; a history of 30 independent values knows less
    assert 0.59 < np.mean(np.abs(means) < claimed) < 0.79
    assert math.sqrt(float(np.mean(claimed**2))) == pytest.approx(true_sd_of_mean(rho, n), rel=0.35)


@pytest.mark.parametrize("rho", [0.0, 0.9, 0.99])
def test_a_long_window_is_covered_as_well(rho: float) -> None:
    """So long that neighbours are joined first. At rho 0.99 it is worth 25 independent values; the
    larger of two answers is then too large by a fifth, never too small."""
    print(f"seed {SEED}")
    n, repeats = 5000, 400
    series = ar1(np.random.default_rng(SEED), rho, (repeats, n + 5000))
    claimed = np.array([standard_error(row[-n:], row) for row in series])
    assert math.sqrt(float(np.mean(claimed**2))) == pytest.approx(true_sd_of_mean(rho, n), rel=0.25)
    inside = np.mean(np.abs(series[:, -n:].mean(axis=1)) < claimed)
    assert inside == pytest.approx(0.683, abs=0.09)  # 3.9 times the binomial sd


def test_what_was_moved_on_purpose_is_no_noise() -> None:
    """As by someone who shims: 20 sd, and the window is full again since."""
    print(f"seed {SEED}")
    n, after = 30, 40
    series = ar1(np.random.default_rng(SEED), 0.9, (300, 300))
    still = np.array([standard_error(row[-n:], row) for row in series])
    series[:, :-after] += 20.0
    moved = np.array([standard_error(row[-n:], row) for row in series])
    assert np.median(moved) < np.median(still)
    assert np.max(moved) < 3.0  # true: 0.56


def test_slow_drift_is_no_noise() -> None:
    """Truth: the mean of 30 values of sd 1 about a line is uncertain by 1/sqrt(30). The floor of
    s/sqrt(n) holds the drift inside the window, 3 sd here: a third more; and where so steep a drift
    passes for a step, the window alone counts."""
    print(f"seed {SEED}")
    n, repeats = 30, 200
    series = np.random.default_rng(SEED).normal(size=(repeats, 300))
    drifting = series + np.linspace(0.0, 30.0, 300)
    claimed = np.array([standard_error(row[-n:], row) for row in drifting])
    rms = math.sqrt(float(np.mean(claimed**2)))
    assert 1.0 < rms * math.sqrt(n) < 1.8
    alone = np.array([standard_error(row[-n:]) for row in drifting])
    assert np.median(alone) > 1.2 * np.median(
        claimed
    )  # a window alone takes its drift for correlation


def test_independent_readings_get_s_over_root_n() -> None:
    print(f"seed {SEED}")
    n, repeats = 1000, 500
    series = np.random.default_rng(SEED).normal(size=(repeats, n))
    claimed = np.array([standard_error(row) for row in series])
    plain = series.std(axis=1, ddof=1) / math.sqrt(n)
    assert np.all(claimed >= plain * (1 - 1e-12))  # never below, but for the last bit
    assert np.mean(claimed / plain) == pytest.approx(1.0, abs=0.05)
    assert np.mean(np.abs(series.mean(axis=1)) < claimed) == pytest.approx(0.683, abs=0.06)


@given(st.lists(st.floats(-1e4, 1e4), min_size=2, max_size=80))
def test_the_standard_error_is_a_number_and_never_below_s_over_root_n(values: list[float]) -> None:
    series = np.array(values)
    claimed = standard_error(series)
    assert math.isfinite(claimed)
    assert claimed >= series.std(ddof=1) / math.sqrt(series.size) * (1 - 1e-9)


def test_scaling_the_readings_scales_their_error() -> None:
    series = ar1(np.random.default_rng(SEED), 0.8, (1, 400))[0]
    assert standard_error(1e-3 * series + 5.0) == pytest.approx(1e-3 * standard_error(series))


def test_one_reading_has_no_standard_error() -> None:
    assert math.isnan(standard_error(np.array([1.0])))


def test_mean_and_median_leave_out_what_is_flagged() -> None:
    rows = [reading(k, float(x), -float(x)) for k, x in enumerate([1, 2, 6])]
    rows.append(reading(3, 900.0, 900.0, quality=Quality.SATURATED))
    mean = average_of(Rows.of(rows), window_s=1.0)
    assert (mean.x_arcsec, mean.y_arcsec, mean.n) == (3.0, -3.0, 3)
    median = average_of(Rows.of(rows), window_s=1.0, statistic=Statistic.MEDIAN)
    assert (median.x_arcsec, median.y_arcsec) == (2.0, -2.0)
    # variance of the median of normal values: pi/2 times that of the mean (Kendall and Stuart)
    assert median.x_se_arcsec == pytest.approx(mean.x_se_arcsec * math.sqrt(math.pi / 2))


@pytest.mark.parametrize(("good", "bad", "valid"), [(2, 2, True), (2, 3, False), (0, 1, False)])
def test_an_average_needs_half_of_its_readings_good(good: int, bad: int, valid: bool) -> None:
    rows = [reading(k, 1.0, 1.0) for k in range(good)] + [unmeasured(good + k) for k in range(bad)]
    average = average_of(Rows.of(rows), window_s=1.0)
    assert average.valid is valid
    assert average.n == good
    assert math.isfinite(average.x_arcsec) is valid


def test_the_window_trails_the_newest_reading() -> None:
    window = TrailingWindow(1.0)
    for k in range(25):  # ten a second
        window.add(reading(k))
    assert window.rows().t_s == pytest.approx(np.arange(15, 25) / 10)
    assert window.history().n == 25
    window.add(reading(25, t_s=99.0))
    assert window.rows().t_s.tolist() == [99.0]


def test_the_window_holds_its_history_and_forgets_what_is_older() -> None:
    window = TrailingWindow(1.0)
    for k in range(5000):  # ten a second
        window.add(reading(k, float(k)))
    assert window.history().x_arcsec.tolist() == list(range(4900, 5000))  # ten seconds
    assert len(window._rows) <= 512
    longer = TrailingWindow(5.0)
    longer.take_over(window)
    assert longer.rows().x_arcsec.tolist() == list(range(4950, 5000))
    few = TrailingWindow(60.0, most=30)
    few.take_over(window)
    assert few.rows().n == 30
