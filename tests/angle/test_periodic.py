"""A sine among residuals: against scipy's periodogram, its chance, its amplitude and claim."""

import math

import numpy as np
import pytest
from scipy import stats
from scipy.signal import lombscargle

from readout.angle.periodic import fit_periodic, polynomial


def fitted(place, residual, period=1.0, degree=1):
    beside = polynomial(place, degree)
    return fit_periodic(place, residual, period, beside=beside, along="x_px")


def test_it_is_the_periodogram():
    """The share of squares explained beside a mean, from scipy's Lomb-Scargle."""
    rng = np.random.default_rng(1)
    place, residual = rng.uniform(0, 40, 60), rng.standard_normal(60)
    for period in (0.5, 1.0, 2.0, 7.3):
        power = lombscargle(
            place, residual, [2 * np.pi / period, 1.0], normalize=True, floating_mean=True
        )[0]
        ratio = power / 2 / ((1 - power) / (60 - 3))
        found = fitted(place, residual, period, degree=0)
        assert found.chance == pytest.approx(stats.f.sf(ratio, 2, 57), rel=1e-9)


def test_without_noise_it_is_exact():
    place = np.random.default_rng(2).uniform(0, 300, 40)
    sine = 0.3 * np.sin(2 * np.pi * place + np.radians(25))
    found = fitted(place, 4.0 - 0.02 * place + sine)
    assert found.amplitude_arcsec == pytest.approx(0.3, abs=1e-12)
    assert found.phase_deg == pytest.approx(25, abs=1e-9)
    assert found.chance < 1e-30


def test_bias_spread_and_honesty_of_the_amplitude():
    """A sine as large as the noise, 60 places, 1000 runs; the upper limit holds as well."""
    runs, truth = 1000, 1.0
    error, claimed, below = [], [], 0
    for k in range(runs):
        rng = np.random.default_rng([3, k])
        place = rng.uniform(0, 300, 60)
        found = fitted(place, truth * np.sin(2 * np.pi * place) + rng.standard_normal(60))
        error.append(found.amplitude_arcsec - truth)
        claimed.append(found.amplitude_u_arcsec)
        below += truth <= found.at_most_arcsec
    error, u = np.array(error), math.sqrt(2 / 60)
    # An amplitude is drawn up by its noise across the phase: u^2 / 2A (S. O. Rice, Bell Syst.
    # Tech. J. 24 (1945) 46).
    assert error.mean() == pytest.approx(u**2 / 2, abs=4 * u / math.sqrt(runs))
    assert error.std() == pytest.approx(u, rel=4 / math.sqrt(2 * runs) + 0.05)
    assert np.mean(claimed) == pytest.approx(error.std(), rel=0.12)
    assert below / runs > 0.95


@pytest.mark.parametrize("amplitude", [0.0, 0.2])
def test_the_upper_limit_holds_for_small_sines(amplitude):
    runs, below = 500, 0
    for k in range(runs):
        rng = np.random.default_rng([4, k])
        place = rng.uniform(0, 300, 30)
        found = fitted(place, amplitude * np.sin(2 * np.pi * place) + rng.standard_normal(30))
        below += amplitude <= found.at_most_arcsec
    assert below / runs > 0.95


@pytest.mark.parametrize("degree", [1, 3])
def test_its_chance_is_what_happens(degree):
    """Noise alone: chances are spread evenly between 0 and 1 (Kolmogorov-Smirnov at 0.1 %)."""
    chances = []
    for k in range(1500):
        rng = np.random.default_rng([5, k])
        chances.append(fitted(rng.uniform(0, 50, 15), rng.standard_normal(15), 1.0, degree).chance)
    assert stats.kstest(chances, "uniform").pvalue > 0.001


@pytest.mark.parametrize(
    "place",
    [np.arange(20) * 3.0, np.arange(20) * 2.5, np.arange(15) * 1.01, np.full(20, 7.3)],
    ids=["whole pixels", "two phases", "a slow beat", "one place"],
)
def test_places_too_much_alike_tell_nothing(place):
    noise = np.random.default_rng(6).standard_normal(len(place))
    found = fitted(place, noise, degree=min(1, len(set(place)) - 1))
    assert not found.told
    assert math.isnan(found.chance)
    assert found.document()["amplitude_arcsec"] is None
