"""The Cramér-Rao bound against closed forms and against maximum likelihood fits that reach it."""

from __future__ import annotations

import math

import numpy as np
import pytest
from scipy.optimize import least_squares
from scipy.special import ndtr, xlogy

from readout.sighting.bound import cramer_rao_cov


def gaussian_line(p: np.ndarray) -> np.ndarray:
    """Electrons of 101 pixels: background, flux, centre, sigma; integrated over each pixel."""
    background, flux, centre, sigma = p
    edges = (np.arange(102) - 0.5 - centre) / sigma
    return background + flux * np.diff(ndtr(edges))


def line_cov(p: list[float]) -> np.ndarray:
    parameters = np.array(p)
    steps = np.array([1e-3, 1e-3 * p[1], 1e-4, 1e-4])
    return cramer_rao_cov(gaussian_line, parameters, steps, gaussian_line(parameters) + 1e-30)


def line_sd(p: list[float]) -> float:
    return math.sqrt(line_cov(p)[2, 2])


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


@pytest.mark.parametrize(
    ("background", "flux", "sigma", "seed"),
    [(20.0, 10_000.0, 1.5, 41), (400.0, 3_000.0, 2.5, 42), (5.0, 20_000.0, 0.8, 43)],
)
def test_a_maximum_likelihood_fit_reaches_the_bound(
    background: float, flux: float, sigma: float, seed: int
) -> None:
    """Poisson pixels, all four parameters free, fitted by scipy.optimize.least_squares.

    The sum of squares of the deviance residuals is twice the negative log-likelihood, but for a
    constant (P. McCullagh, J. A. Nelder, Generalized Linear Models, 1989, 2.4.3). 600 fits know
    the ratio of rms to bound to 2.9 %.
    """
    rng = np.random.default_rng(seed)
    errors, n = [], 600
    start_off = np.array([1.0, 50.0, 0.1, 0.05])
    for _ in range(n):
        truth = np.array([background, flux, 50 + rng.uniform(-0.5, 0.5), sigma])
        counts = rng.poisson(gaussian_line(truth))

        def deviance(p: np.ndarray, counts: np.ndarray = counts) -> np.ndarray:
            model = np.maximum(gaussian_line(p), 1e-9)
            twice = 2 * (model - counts + xlogy(counts, counts / model))
            return np.sign(counts - model) * np.sqrt(np.maximum(twice, 0))

        fit = least_squares(deviance, truth + start_off, x_scale=[5, 100, 0.1, 0.1])
        errors.append(fit.x[2] - truth[2])
    bounds = [line_sd([background, flux, 50 + phase, sigma]) for phase in (0.0, 0.25, 0.5)]
    ratio = math.sqrt(np.mean(np.square(errors)) / np.mean(np.square(bounds)))
    assert 1 - 3 * 0.029 < ratio < 1 + 3 * 0.029
    assert abs(np.mean(errors)) < 4 * bounds[0] / math.sqrt(n)


def test_the_bound_of_a_straight_line_is_its_textbook_covariance() -> None:
    """Equal weights: var(slope) = s^2 / sum x^2, var(mean) = s^2 / n about the middle."""
    x, variance = np.linspace(-3.0, 5.0, 40), 0.49
    x -= x.mean()
    cov = cramer_rao_cov(
        lambda p: p[0] + p[1] * x, np.array([2.0, -1.0]), np.full(2, 1e-3), np.full(40, variance)
    )
    expected = np.diag([variance / 40, variance / (x**2).sum()])
    np.testing.assert_allclose(cov, expected, rtol=1e-8, atol=1e-12)


def test_a_further_free_parameter_never_helps() -> None:
    free = line_cov([3000.0, 5000.0, 50.2, 1.7])

    def known_width(p: np.ndarray) -> np.ndarray:
        return gaussian_line(np.array([*p, 1.7]))

    parameters = np.array([3000.0, 5000.0, 50.2])
    known = cramer_rao_cov(
        known_width, parameters, np.array([1e-3, 5.0, 1e-4]), known_width(parameters)
    )
    assert np.linalg.eigvalsh(free[:3, :3] - known).min() > -1e-9 * free.max()
    assert free[1, 1] > 1.01 * known[1, 1]  # flux and width do act together


def test_parameters_that_only_act_together_are_unknown_without_harm() -> None:
    """a and b act as a + b: neither is known, c is as if the two were one."""
    x = np.linspace(-1.0, 1.0, 50)

    def expected(p: np.ndarray) -> np.ndarray:
        return p[0] + p[1] + p[2] * x

    cov = cramer_rao_cov(expected, np.zeros(3), np.full(3, 1e-3), np.ones(50))
    assert np.isinf(cov[0, 0])
    assert np.isinf(cov[1, 1])
    assert cov[2, 2] == pytest.approx(1 / (x**2).sum(), rel=1e-9)
