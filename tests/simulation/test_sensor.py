"""Noise of the exact path and of the bank against theory, in units of the standard error."""

from __future__ import annotations

import math

import numpy as np
import pytest

from readout.simulation import NoiseBank, Sensor, expose

SEED = 20261201
SHAPE = (400, 500)
N = SHAPE[0] * SHAPE[1]


def var_se(variance: float, excess_kurtosis: float = 0.0) -> float:
    """Standard error of a sample variance of N values (M. G. Kendall, A. Stuart, vol. 1)."""
    return variance * math.sqrt((2 + excess_kurtosis) / N)


@pytest.mark.parametrize("electrons", [50.0, 800.0, 7800.0])
@pytest.mark.parametrize("bits", [8, 12, 16])
def test_mean_and_variance_follow_the_camera_model(electrons: float, bits: int) -> None:
    """EMVA 1288: mean = black + K e, variance = K^2 (e + read^2) + 1/12."""
    gain = (2**bits - 1) / 12000
    sensor = Sensor(bits, gain, read_noise_electrons=6.0, black_levels=8.0 * 2 ** (bits - 8))
    levels = expose(np.full(SHAPE, electrons), sensor, np.random.default_rng(SEED)).astype(float)
    variance = gain**2 * (electrons + 36.0) + 1 / 12
    mean = sensor.black_levels + gain * electrons
    # Rounding to whole levels biases the mean by at most exp(-2 pi^2 sd^2) / pi (B. Widrow 1956)
    ripple = math.exp(-2 * math.pi**2 * (variance - 1 / 12)) / math.pi
    assert abs(levels.mean() - mean) < 4 * math.sqrt(variance / N) + ripple
    ripple_var = 4 * (variance + 1) * ripple * math.pi
    assert abs(levels.var() - variance) < 4 * var_se(variance, 1 / electrons) + ripple_var


def test_photon_transfer_slope_is_the_gain() -> None:
    """Variance against mean, from differences of two pictures, as EMVA 1288 section 6.6 does."""
    sensor = Sensor(12, 0.31, read_noise_electrons=5.0, black_levels=64.0)
    rng = np.random.default_rng(SEED)
    means, variances, errors = [], [], []
    for electrons in np.linspace(200.0, 12000.0, 12):
        a, b = (expose(np.full(SHAPE, electrons), sensor, rng).astype(float) for _ in range(2))
        means.append((a.mean() + b.mean()) / 2)
        variances.append((a - b).var() / 2)
        errors.append(var_se(variances[-1]))
    (slope, offset), cov = np.polyfit(means, variances, 1, w=1 / np.array(errors), cov="unscaled")
    assert abs(slope - 0.31) < 4 * math.sqrt(cov[0, 0])
    assert math.sqrt(cov[0, 0]) < 0.002  # the check can see half a per cent
    dark_variance = slope * sensor.black_levels + offset
    assert dark_variance == pytest.approx(0.31**2 * 25 + 1 / 12, abs=4 * math.sqrt(cov[1, 1]))


def test_levels_are_clipped_to_the_scale() -> None:
    sensor = Sensor(10, 1.0, read_noise_electrons=0.0, black_levels=-50.0)
    levels = expose(np.array([0.0, 1e7]), sensor, np.random.default_rng(SEED))
    assert levels.dtype == np.uint16
    assert levels.tolist() == [0, 1023]


def test_the_same_seed_gives_the_same_picture_and_another_seed_another() -> None:
    electrons = np.full((20, 30), 500.0)
    first, again, other = (
        expose(electrons, Sensor(), np.random.default_rng(seed)) for seed in (1, 1, 2)
    )
    np.testing.assert_array_equal(first, again)
    assert np.count_nonzero(first != other) > 100


def test_finished_ground_has_mean_and_variance_of_theory() -> None:
    sensor, rng = Sensor(), np.random.default_rng(SEED)
    bank = NoiseBank.normal(SHAPE, rng, n=1).digitised(800.0, sensor)
    picture = bank.take(rng)
    assert picture.dtype == np.uint8
    assert picture.shape == SHAPE
    variance = 0.025**2 * (800.0 + 36.0) + 1 / 12
    assert abs(picture.mean() - 24.0) < 4 * math.sqrt(variance / N)
    assert abs(picture.var() - variance) < 4 * var_se(variance) + 1e-3  # + ripple of rounding


def test_takes_differ() -> None:
    rng = np.random.default_rng(SEED)
    bank = NoiseBank.normal((40, 50), rng).digitised(800.0, Sensor())
    takes = {bank.take(rng).tobytes() for _ in range(50)}
    assert len(takes) == 50


@pytest.mark.parametrize(
    "wrong",
    [{"bits": 7}, {"bits": 17}, {"gain_levels_per_electron": 0.0}, {"read_noise_electrons": -1.0}],
)
def test_impossible_sensors_are_refused(wrong: dict[str, float]) -> None:
    with pytest.raises(ValueError, match=r"bits|gain"):
        Sensor(**wrong)
