"""The spot's picture against integrals that share none of its code; its bound in closed form."""

from __future__ import annotations

import math

import numpy as np
import pytest
from scipy.integrate import dblquad
from scipy.ndimage import gaussian_filter

from readout.simulation import Sensor
from readout.simulation.spot import Spot, spot_bound_cov, spot_image


@pytest.mark.parametrize("blur_px", [0.3, 0.6, 1.6])
def test_its_flux_is_that_of_the_disc(blur_px: float) -> None:
    spot = Spot(diameter_px=7.0, blur_px=blur_px, background=0.0, contrast=3.0)
    image = spot_image((61, 61), 30.3, 29.6, spot)
    assert image.sum() == pytest.approx(3.0 * math.pi * 3.5**2, rel=1e-6)


def test_its_centre_of_mass_is_its_place() -> None:
    """An exact property: the blur is symmetric and the window holds all light."""
    image = spot_image((61, 61), 30.37, 28.81, Spot(diameter_px=5.0, blur_px=1.4, background=0.0))
    rows, columns = np.mgrid[:61, :61]
    assert (image * columns).sum() / image.sum() == pytest.approx(30.37, abs=1e-7)
    assert (image * rows).sum() / image.sum() == pytest.approx(28.81, abs=1e-7)


def test_agrees_with_a_blurred_supersampled_disc() -> None:
    """Drawn on a grid 16 times finer, blurred by scipy.ndimage, averaged over each pixel; the

    stair steps of the drawn edge average out to some 1e-4 of its flux.
    """
    fine, size, x, y = 16, 40, 19.3, 20.6
    at = (np.arange(size * fine) + 0.5) / fine - 0.5
    drawn = (np.hypot(at[None, :] - x, at[:, None] - y) < 5.0).astype(float)
    blurred = gaussian_filter(drawn, 1.5 * fine, truncate=6)
    expected = blurred.reshape(size, fine, size, fine).mean(axis=(1, 3))
    image = spot_image((size, size), x, y, Spot(10.0, 1.5, background=0.0, contrast=1.0))
    assert np.abs(image - expected).max() < 2e-3


def test_a_small_disc_is_a_gaussian() -> None:
    """scipy.integrate.dblquad over pixels in the middle, on the flank and in the tail."""
    spot = Spot(diameter_px=0.02, blur_px=1.3, background=0.0, contrast=1e6)
    image = spot_image((25, 25), 12.3, 11.8, spot)
    peak = 1e6 * spot.diameter_px**2 / (8 * spot.blur_px**2)
    for row, column in ((12, 12), (10, 14), (15, 9)):
        expected, _ = dblquad(
            lambda b, a: math.exp(-((a - 12.3) ** 2 + (b - 11.8) ** 2) / 2 / 1.3**2),
            *(column - 0.5, column + 0.5, row - 0.5, row + 0.5),
            epsabs=1e-12,
        )
        assert image[row, column] == pytest.approx(peak * expected, rel=1e-4)


def test_the_bound_of_a_gaussian_spot_on_a_bright_ground() -> None:
    """Background-limited, two dimensions: var = 8 pi s^4 B / N^2, N electrons on B per pixel.

    The second term of R. E. Thompson, D. R. Larson, W. W. Webb, Biophys. J. 82 (2002) 2775 (value
    from memory), which is the exact information of a Gaussian there: integral of (dg/dx)^2 =
    1 / (8 pi s^4). s^2 takes 1/12 for the pixel. The slope of the ground, free too, costs little.
    """
    spot = Spot(diameter_px=0.2, blur_px=3.0, background=1e6, contrast=1e6)
    electrons = 1e6 * math.pi * 0.1**2
    sensor = Sensor(16, gain_levels_per_electron=1e3, read_noise_electrons=0.0)
    cov = spot_bound_cov((81, 81), 40.2, 39.7, spot, sensor)
    closed = 8 * math.pi * (3.0**2 + 1 / 12) ** 2 * 1e6 / electrons**2
    assert cov[0, 0] == pytest.approx(closed, rel=0.02)
    assert cov[1, 1] == pytest.approx(closed, rel=0.02)
    assert abs(cov[0, 1]) < 1e-3 * cov[0, 0]


@pytest.mark.parametrize("wrong", [{"diameter_px": 0.0}, {"blur_px": -1.0}])
def test_sizes_must_be_positive(wrong: dict[str, float]) -> None:
    with pytest.raises(ValueError, match="must be positive"):
        Spot(**wrong)


def test_an_elongated_spot_leans_the_way_it_is_turned() -> None:
    """Second moments of a uniform ellipse and a Gaussian add: r^2/4 + s^2 along each axis, and
    1/12 for the pixel; turned clockwise on screen, the long axis leans towards -x for +y.
    """
    spot = Spot(6.0, 1.4, background=0.0, elongation=1.5, rotation_deg=30.0)
    image = spot_image((81, 81), 40.3, 39.8, spot)
    rows, columns = np.mgrid[:81, :81]
    x, y = columns - 40.3, rows - 39.8
    moments = np.array([[x * x, x * y], [x * y, y * y]])
    found = (image * moments).sum(axis=(2, 3)) / image.sum() - np.eye(2) / 12
    turn = math.radians(30.0)
    along = np.array([-math.sin(turn), math.cos(turn)])
    across = np.array([math.cos(turn), math.sin(turn)])
    expected = (3.0**2 / 4 + 1.4**2) * (1.5**2 * np.outer(along, along) + np.outer(across, across))
    assert found == pytest.approx(expected, abs=1e-5)
