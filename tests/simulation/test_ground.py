"""The fast draw of a uniform ground against its distribution and against the slow exposure."""

from __future__ import annotations

import math

import numpy as np
import pytest
from scipy.stats import chi2, chisquare, poisson

from readout.simulation import Crosshair, Sensor, crosshair_image, expose
from readout.simulation.ground import UniformGround, expose_on, level_distribution

SHAPE = (700, 800)
CASES = [
    (400.0, Sensor(8, 0.03, read_noise_electrons=6.0, black_levels=4.0)),
    (40.0, Sensor(8, 0.03, read_noise_electrons=3.0, black_levels=4.3)),
    (900.0, Sensor(12, 0.48, read_noise_electrons=6.0, black_levels=64.0)),
    (8500.0, Sensor(8, 0.03, read_noise_electrons=6.0, black_levels=4.0)),  # clips at the top
    (3.0, Sensor(8, 2.0, read_noise_electrons=0.0, black_levels=0.0)),
]
NAMES = ["8 bit", "coarse", "12 bit", "clipped", "no read noise"]


def probabilities(electrons: float, sensor: Sensor) -> np.ndarray:
    return np.diff(level_distribution(electrons, sensor), prepend=0.0, append=1.0)


@pytest.mark.parametrize(("electrons", "sensor"), CASES, ids=NAMES)
def test_drawn_levels_follow_the_distribution(electrons: float, sensor: Sensor) -> None:
    """Pearson's chi squared over all levels expected five times and more; limit at 1e-4."""
    levels = UniformGround(electrons, sensor).draw(SHAPE, np.random.default_rng(51))
    assert levels.dtype == (np.uint8 if sensor.bits == 8 else np.uint16)
    expected = levels.size * probabilities(electrons, sensor)
    seen = np.bincount(levels.ravel(), minlength=expected.size).astype(float)
    often = expected >= 5
    rest = [seen[~often].sum()], [max(expected[~often].sum(), 1e-9)]
    assert rest[0][0] <= rest[1][0] + 5 * math.sqrt(rest[1][0]) + 3
    scale = seen[often].sum() / expected[often].sum()
    assert chisquare(seen[often], scale * expected[often]).pvalue > 1e-4


@pytest.mark.parametrize(("electrons", "sensor"), CASES, ids=NAMES)
def test_the_distribution_is_that_of_the_exposure(electrons: float, sensor: Sensor) -> None:
    """Two-sample chi squared against ``expose``; limit at 1e-4."""
    rng = np.random.default_rng(52)
    slow = np.bincount(expose(np.full(SHAPE, electrons), sensor, rng).ravel(), minlength=5000)
    fast = np.bincount(UniformGround(electrons, sensor).draw(SHAPE, rng).ravel(), minlength=5000)
    both = (slow + fast).astype(float)
    often = both >= 10
    statistic = float(((slow - fast.astype(float)) ** 2 / np.maximum(both, 1))[often].sum())
    assert chi2.sf(statistic, int(often.sum()) - 1) > 1e-4


def test_without_read_noise_it_is_poisson() -> None:
    sensor = Sensor(8, 1.0, read_noise_electrons=0.0, black_levels=0.0)
    np.testing.assert_allclose(
        probabilities(7.5, sensor)[:60], poisson.pmf(np.arange(60), 7.5), atol=1e-12
    )


def test_mean_and_variance_are_those_of_the_camera_model() -> None:
    """EMVA 1288; at a noise of 10 levels rounding adds 1/12 to 1e-100 (B. Widrow 1956)."""
    electrons, sensor = CASES[2]
    p = probabilities(electrons, sensor)
    mean = float(p @ np.arange(p.size))
    assert mean == pytest.approx(float(sensor.mean_levels(electrons)), rel=1e-9)
    variance = float(p @ (np.arange(p.size) - mean) ** 2)
    expected = float(sensor.noise_var_levels2(electrons)) + 1 / 12
    assert variance == pytest.approx(expected, rel=1e-6)


def test_lit_pixels_are_exposed_as_always() -> None:
    """Mean and variance of the pixels on an arm, from 300 pictures."""
    electrons, sensor = CASES[2]
    crosshair = Crosshair(background=electrons, contrast=2000.0)
    expected = crosshair_image((30, 30), 14.6, 15.2, crosshair)
    ground, rng = UniformGround(electrons, sensor), np.random.default_rng(53)
    pictures = np.array([expose_on(expected, ground, rng) for _ in range(300)], dtype=float)
    variance = sensor.noise_var_levels2(expected) + 1 / 12
    z = (pictures.mean(axis=0) - sensor.mean_levels(expected)) / np.sqrt(variance / 300)
    assert np.abs(z).max() < 4.5  # 900 pixels
    assert z.std() == pytest.approx(1.0, abs=0.1)
    ratio = pictures.var(axis=0, ddof=1) / variance
    assert ratio.mean() == pytest.approx(1.0, abs=4 * math.sqrt(2 / 300 / 900))
