"""The Cramér-Rao bound against closed forms and against models that know more."""

from __future__ import annotations

import math
from dataclasses import replace

import numpy as np
import pytest
from scipy.special import ndtr

from readout.sighting.bound import cramer_rao_cov
from readout.simulation import Crosshair, Sensor, crosshair_image, crossing_bound_cov

NO_ROUNDING = Sensor(16, gain_levels_per_electron=1e3, read_noise_electrons=0.0)


def gaussian_line(p: np.ndarray) -> np.ndarray:
    """Electrons of 101 pixels: background, flux, centre, sigma; integrated over each pixel."""
    background, flux, centre, sigma = p
    edges = (np.arange(102) - 0.5 - centre) / sigma
    return background + flux * np.diff(ndtr(edges))


def line_sd(p: list[float]) -> float:
    parameters = np.array(p)
    steps = np.array([1e-3, 1e-3 * p[1], 1e-4, 1e-4])
    cov = cramer_rao_cov(gaussian_line, parameters, steps, gaussian_line(parameters) + 1e-30)
    return math.sqrt(cov[2, 2])


def test_photon_limit_of_a_gaussian_line() -> None:
    """sd = 0.015275249 px for 10000 electrons, sigma 1.5 px, no background (derived value,

    recomputed from the pixel-integrated Gaussian); near sqrt((s^2 + 1/12) / F), R. E. Thompson,
    D. R. Larson, W. W. Webb, Biophys. J. 82 (2002) 2775. A trace of background keeps the
    derivative with respect to it finite.
    """
    assert line_sd([1e-9, 10_000.0, 50.0, 1.5]) == pytest.approx(0.015275249, rel=1e-5)
    assert math.sqrt((1.5**2 + 1 / 12) / 1e4) == pytest.approx(0.015275249, rel=1e-6)


def test_background_limit_of_a_gaussian_line() -> None:
    """var = 4 sqrt(pi) s^3 B / F^2 (R. A. Mendez, J. F. Silva, R. Lobos, PASP 125 (2013) 580;

    the constant is a value from memory, recomputed) with s^2 + 1/12 for the pixel; and 5.0317 px
    for F = 100, s = 1.5, B = 10^4 (derived value).
    """
    assert line_sd([1e4, 100.0, 50.0, 1.5]) == pytest.approx(5.0317, rel=1e-4)
    sigma = 4.0
    closed = math.sqrt(4 * math.sqrt(math.pi) * (sigma**2 + 1 / 12) ** 1.5 * 1e6 / 100.0**2)
    assert line_sd([1e6, 100.0, 50.0, sigma]) == pytest.approx(closed, rel=1e-3)


@pytest.mark.parametrize("half_size_px", [60, 120])
def test_thin_lines_reach_the_closed_form(half_size_px: int) -> None:
    """A thin bar is a Gaussian line; n rows of it have 1/n of the variance of one.

    The rows of the crossing say nothing about x, some five sigmas of them on either side.
    """
    n, blur, ground, flux = 2 * half_size_px + 1, 2.5, 1e5, 50.0
    crosshair = Crosshair(line_px=0.2, blur_px=blur, background=ground, contrast=flux / 0.2)
    cov = crossing_bound_cov((n, n), half_size_px, half_size_px, crosshair, NO_ROUNDING)
    sigma2 = blur**2 + (1 + 0.2**2) / 12
    one_row = 4 * math.sqrt(math.pi) * sigma2**1.5 * ground / flux**2
    assert cov[0, 0] == pytest.approx(one_row / n, rel=2.5 * blur / half_size_px)
    assert cov[0, 0] >= one_row / n
    assert cov[1, 1] == pytest.approx(cov[0, 0], rel=1e-6)
    assert abs(cov[0, 1]) < 1e-3 * cov[0, 0]


def test_background_limited_bound_goes_with_noise_over_contrast() -> None:
    bright = Crosshair(background=1e6, contrast=1e3)
    shape, where = (90, 120), (61.3, 44.8)
    one = crossing_bound_cov(shape, *where, bright, NO_ROUNDING)
    half = crossing_bound_cov(shape, *where, replace(bright, contrast=500.0), NO_ROUNDING)
    np.testing.assert_allclose(np.diag(half), 4 * np.diag(one), rtol=2e-3)


def test_rounding_and_read_noise_count() -> None:
    """Read noise r adds r^2 electrons^2 to each pixel, rounding 1 / (12 K^2)."""
    dim = Crosshair(background=1e4, contrast=1e2)
    shape, where = (60, 60), (30.2, 29.6)
    quiet = crossing_bound_cov(shape, *where, dim, NO_ROUNDING)
    noisy = crossing_bound_cov(shape, *where, dim, replace(NO_ROUNDING, read_noise_electrons=100.0))
    coarse_gain = 1 / math.sqrt(12 * 1e4)  # rounding of variance 1e4 electrons^2
    coarse = crossing_bound_cov(
        shape, *where, dim, replace(NO_ROUNDING, gain_levels_per_electron=coarse_gain)
    )
    np.testing.assert_allclose(np.diag(noisy), 2 * np.diag(quiet), rtol=0.01)
    np.testing.assert_allclose(coarse, noisy, rtol=1e-6)


@pytest.mark.parametrize("rotation_deg", [0.0, 6.0])
@pytest.mark.parametrize("where", [(80.3, 61.8), (30.1, 100.4)])
def test_a_fit_that_knows_more_gains_little_when_arms_are_whole(
    rotation_deg: float, where: tuple[float, float]
) -> None:
    """One turn and one profile for both arms, from crosshair_image alone, against two arms.

    The bound with fewer free parameters is never greater (Fisher information of a subset). With
    the crossing in the middle they agree within one per cent; off the middle, one turn for both
    arms helps the one that is extrapolated.
    """
    crosshair, sensor = Crosshair(rotation_deg=rotation_deg), Sensor()
    shape = (120, 160)

    def expected(p: np.ndarray) -> np.ndarray:
        changed = replace(
            crosshair,
            background=p[2],
            contrast=p[3],
            line_px=p[4],
            blur_px=p[5],
            rotation_deg=p[6],
        )
        return crosshair_image(shape, p[0], p[1], changed)

    parameters = np.array([*where, 800.0, 7000.0, 5.0, 1.2, rotation_deg])
    steps = np.array([1e-3, 1e-3, 1.0, 7.0, 1e-3, 1e-3, 1e-3])
    variance = expected(parameters) + 36.0 + 1 / (12 * 0.025**2)
    one_turn = cramer_rao_cov(expected, parameters, steps, variance)[:2, :2]
    two_arms = crossing_bound_cov(shape, *where, crosshair, sensor)
    assert np.linalg.eigvalsh(two_arms - one_turn).min() > -1e-6 * two_arms.max()
    if where == (80.3, 61.8):
        np.testing.assert_allclose(np.diag(two_arms), np.diag(one_turn), rtol=0.01)


def test_a_coordinate_without_its_arm_is_unknown() -> None:
    cov = crossing_bound_cov((80, 100), 50.3, -60.0, Crosshair(), Sensor())
    assert math.isinf(cov[1, 1])
    cov = crossing_bound_cov((80, 100), 50.3, 41.0, Crosshair(), Sensor())
    assert np.all(np.isfinite(cov))


def test_parameters_that_only_act_together_are_unknown_without_harm() -> None:
    """a and b act as a + b: neither is known, c is as if the two were one."""
    x = np.linspace(-1.0, 1.0, 50)

    def expected(p: np.ndarray) -> np.ndarray:
        return p[0] + p[1] + p[2] * x

    cov = cramer_rao_cov(expected, np.zeros(3), np.full(3, 1e-3), np.ones(50))
    assert np.isinf(cov[0, 0])
    assert np.isinf(cov[1, 1])
    assert cov[2, 2] == pytest.approx(1 / (x**2).sum(), rel=1e-9)
