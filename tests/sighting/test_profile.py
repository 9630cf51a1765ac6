"""The line profile against numerical integration and its derivatives against differences."""

import numpy as np
import pytest
from scipy.integrate import quad
from scipy.stats import norm

from readout.sighting.profile import half_maximum, line_profile, peak_height

CASES = [(2.5, 1.3, 1.0), (0.2, 1.0, 0.985), (6.0, 0.5, 1.0), (1.0, 3.0, 0.99)]


@pytest.mark.parametrize(("half_width", "blur", "pixel"), CASES)
def test_equals_the_integral_over_the_pixel(half_width, blur, pixel):
    """Independent reference: scipy.integrate.quad over bar convolved with scipy.stats.norm."""

    def blurred_bar(u):
        return norm.cdf((u + half_width) / blur) - norm.cdf((u - half_width) / blur)

    u = np.array([-4.3, -1.0, 0.0, 0.37, 2.6, 7.9])
    expected = [quad(blurred_bar, v - pixel / 2, v + pixel / 2, epsabs=1e-13)[0] / pixel for v in u]
    assert line_profile(u, half_width, blur, pixel).value == pytest.approx(expected, abs=1e-10)


@pytest.mark.parametrize(("half_width", "blur", "pixel"), CASES)
def test_derivatives_are_those_of_the_value(half_width, blur, pixel):
    u, step = np.linspace(-8, 8, 33), 1e-5
    profile = line_profile(u, half_width, blur, pixel)

    def difference(du, dh, ds):
        ahead = line_profile(u + du, half_width + dh, blur + ds, pixel).value
        behind = line_profile(u - du, half_width - dh, blur - ds, pixel).value
        return (ahead - behind) / (2 * step)

    assert profile.by_u == pytest.approx(difference(step, 0, 0), abs=1e-8)
    assert profile.by_half_width == pytest.approx(difference(0, step, 0), abs=1e-8)
    assert profile.by_blur == pytest.approx(difference(0, 0, step), abs=1e-8)


def test_the_area_is_the_width_of_the_bar():
    """Blurring and pixels keep the flux: an exact property of a convolution."""
    u = np.arange(-40.0, 41.0)
    assert line_profile(u, 2.3, 1.7).value.sum() == pytest.approx(4.6, abs=1e-12)


def test_width_of_a_blurred_line_is_that_of_the_gaussian():
    """2 sqrt(2 ln 2) sigma for a line and a pixel much thinner than the blur; its peak is the
    line's width in the Gaussian's density."""
    width, peak = half_maximum(0.5, 25.0), peak_height(0.5, 25.0)
    sigma = np.sqrt(25.0**2 + 2 / 12)
    assert width == pytest.approx(2 * np.sqrt(2 * np.log(2)) * sigma, rel=1e-4)
    assert peak == pytest.approx(1 / (np.sqrt(2 * np.pi) * sigma), rel=1e-4)


@pytest.mark.parametrize(("half_width", "blur"), [(0.4, 0.35), (2.0, 1.6), (10.0, 0.5), (3.0, 6.0)])
def test_width_and_peak_are_those_of_the_profile(half_width, blur):
    width, peak = half_maximum(half_width, blur), peak_height(half_width, blur)
    middle, side = line_profile(np.array([0.0, width / 2]), half_width, blur).value
    assert peak == pytest.approx(middle, rel=1e-9)
    assert side == pytest.approx(middle / 2, rel=1e-6)
