"""The pixel-phase error of a plain centre of mass, as published, and the fit that does not have it.

The centre of mass of a sampled Gaussian errs with its place between two pixels. For pixels that
integrate, all of them taken: -exp(-2 pi^2 s^2) sin(2 pi x) / pi, by Poisson's sum (the amplitudes
below are computed from it, not published). A window that cuts the tails adds more. Published: a
window of 5 pixels errs by 0.06 px (J. Yang, B. Liang, T. Zhang, J. Song, Sensors 11 (2011) 7341).
"""

import math

import numpy as np
import pytest
from scipy.stats import norm

from readout.model import Quality
from readout.sighting import locate

PHASES = np.arange(32) / 32 - 0.5


def sampled(x, centre, sigma):
    """A Gaussian of area 1, integrated over the pixels at ``x``."""
    return norm.cdf((x + 0.5 - centre) / sigma) - norm.cdf((x - 0.5 - centre) / sigma)


def centre_of_mass_error(offset, sigma, window_px):
    """Over a window about the pixel that the centre lies in, ``offset`` from its middle."""
    x = np.arange(-(window_px // 2), window_px // 2 + 1)
    level = sampled(x, offset, sigma)
    return float(level @ x / level.sum() - offset)


def worst_error(sigma, window_px):
    return max(
        abs(centre_of_mass_error(offset, sigma, window_px))
        for offset in np.linspace(-0.5, 0.5, 401)
    )


@pytest.mark.parametrize("offset", [-0.4, -0.1, 0.25, 0.37])
@pytest.mark.parametrize("sigma", [0.5, 0.6, 0.8])
def test_closed_form(offset, sigma):
    first, second = (
        (-1) ** k / (k * math.pi) * math.exp(-2 * (k * math.pi * sigma) ** 2) for k in (1, 2)
    )
    expected = first * math.sin(2 * math.pi * offset)
    error = centre_of_mass_error(offset, sigma, 41)
    assert error == pytest.approx(expected, abs=abs(second) * 1.1 + 1e-14)


@pytest.mark.parametrize(
    ("sigma", "amplitude"),
    [
        (0.25, 0.09270),
        (0.30, 0.05387),
        (0.35, 0.02836),
        (0.40, 0.013528),
        (0.50, 0.0022892476),
        (0.60, 0.00026104),
        (0.70, 2.00568e-5),
    ],
)
def test_amplitudes(sigma, amplitude):
    """At a quarter of a pixel the second harmonic is 0: what is left there is the first one."""
    quarter = abs(centre_of_mass_error(0.25, sigma, 41))
    third = math.exp(-18 * (math.pi * sigma) ** 2) / (3 * math.pi)
    assert quarter == pytest.approx(amplitude, rel=3e-4, abs=third * 1.1)


@pytest.mark.parametrize(
    ("window_px", "sigma", "error"),
    [
        (3, 0.5, 0.0349),
        (3, 0.7, 0.1212),
        (5, 0.5, 0.00230),
        (5, 0.7, 0.00533),
        (5, 1.0, 0.0548),
        (5, 1.5, 0.1932),
        (7, 1.0, 0.00462),
        (7, 1.5, 0.0680),
    ],
)
def test_windows(window_px, sigma, error):
    assert worst_error(sigma, window_px) == pytest.approx(error, rel=0.005)


def test_published_magnitude():
    """Yang et al. 2011: 0.06 px before compensation in a window of 5 pixels, at a spot of s = 1."""
    assert worst_error(1.0, 5) == pytest.approx(0.06, abs=0.006)


@pytest.mark.parametrize("sigma", [0.7, 1.0, 1.5])
def test_the_fit_does_not_have_it(sigma):
    """The same sampled profile as both arms of a crosshair, 16 bits and little noise: within
    0.0005 px at each of 32 phases. The centre of mass of the same pixels errs by 0.005 to 0.19 px.
    """
    rng = np.random.default_rng(1)
    height, width = 160, 200
    errors, plain = [], []
    for phase in PHASES:
        x, y = 100.0 + phase, 80.0 - phase
        upright = sampled(np.arange(width), x, sigma)
        level = sampled(np.arange(height), y, sigma)
        peak = sampled(np.zeros(1), 0.0, sigma)[0]
        both = upright[None, :] + level[:, None] - upright[None, :] * level[:, None] / peak
        light = 2000 + 50_000 * both / peak
        pixels = np.rint(light + rng.normal(0, 20, light.shape)).astype(np.uint16)
        found = locate(pixels, full_scale=65535)
        assert found.quality is Quality.OK
        errors += [found.x_px - x, found.y_px - y]
        columns = np.arange(98, 103)
        row = pixels[:40].mean(axis=0)[columns] - 2000
        plain.append(row @ columns / row.sum() - x)
    assert np.abs(errors).max() < 0.0005
    assert np.abs(plain).max() == pytest.approx(worst_error(sigma, 5), rel=0.03, abs=2e-4)
    assert np.abs(plain).max() > 10 * np.abs(errors).max()
