"""Exact reflection against an independent ray trace, and the size of the usual approximations."""

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from scipy.spatial.transform import Rotation

from readout.angle.optics import slopes_of_tilt, tilt_jacobian, tilt_of_slopes

tilts = st.floats(-7200, 7200)


def traced_slopes(x_arcsec, y_arcsec):
    """An independent trace: a mirror turned by scipy's Rotation, a ray reflected by the matrix
    1 - 2 n n^T (Householder), met with the focal plane of an ideal thin lens.

    The mirror's normal begins along +z. Its top edge comes nearer (Y > 0) when the normal rises
    by a turn about -x; its right edge comes nearer (X > 0) when it then turns to +x about +y.
    """
    turn = Rotation.from_euler("xy", [-y_arcsec / 3600, x_arcsec / 3600], degrees=True)
    n = turn.apply([0.0, 0.0, 1.0])
    back = (np.eye(3) - 2 * np.outer(n, n)) @ np.array([0.0, 0.0, 1.0])
    focal_length = 300.0
    hit = back * (focal_length / -back[2])  # the parallel beam focuses where its chief ray goes
    return hit[:2] / focal_length


@pytest.mark.parametrize(
    ("x", "y"),
    [(3600, 3600), (3600, 0), (0, 3600), (-3600, 3600), (300, -200), (0.01, 0.02), (-1800, -3600)],
)
def test_reflection_equals_an_independent_ray_trace(x, y):
    assert np.array(slopes_of_tilt(x, y)) == pytest.approx(traced_slopes(x, y), abs=1e-15)


@given(tilts, tilts)
def test_there_and_back(x, y):
    back = tilt_of_slopes(*slopes_of_tilt(x, y))
    assert np.array(back) == pytest.approx((x, y), abs=1e-8)


def test_one_axis_alone_moves_the_image_by_twice_the_tilt():
    """u = -f tan 2X: the working principle of the instrument (common practice)."""
    x = np.linspace(-3600, 3600, 13)
    w_x, w_y = slopes_of_tilt(x, 0 * x)
    assert w_x == pytest.approx(-np.tan(2 * np.radians(x / 3600)), abs=1e-15)
    assert w_y == pytest.approx(0 * x, abs=1e-15)


def test_size_of_the_usual_approximations_at_one_degree_in_both_axes():
    """Values derived by ray trace for the design, not published: 2.56" and 3.11" for d/(2f),
    1.10" and 1.65" for half the arctangent of each axis, 1.46" for d/(2f) on one axis alone."""
    rad = 180 * 3600 / np.pi
    w = np.array(slopes_of_tilt(3600, 3600))
    assert np.abs(-w / 2 * rad - 3600) == pytest.approx([2.56, 3.11], abs=0.005)
    assert np.abs(-np.arctan(w) / 2 * rad - 3600) == pytest.approx([1.10, 1.65], abs=0.005)
    w_x, _ = slopes_of_tilt(3600, 0)
    assert abs(-w_x / 2 * rad - 3600) == pytest.approx(1.46, abs=0.005)


def test_turning_the_mirror_about_the_axis_turns_the_reading():
    """Derived: roll by 1 degree at X = 600" gives Y = 10.5"; 1 mrad gives 0.6"."""
    for roll, expected in ((np.radians(1.0), 10.5), (1e-3, 0.6)):
        tilt = np.radians(600 / 3600)
        n = Rotation.from_euler("z", roll).apply([np.sin(tilt), 0, np.cos(tilt)])
        back = np.array([0, 0, 1]) - 2 * n[2] * n
        _, y = tilt_of_slopes(back[0] / -back[2], back[1] / -back[2])
        assert y == pytest.approx(expected, abs=0.05)


@given(st.floats(-0.03, 0.03), st.floats(-0.03, 0.03))
def test_jacobian_is_the_derivative(w_x, w_y):
    step = 1e-6
    by_x = np.subtract(tilt_of_slopes(w_x + step, w_y), tilt_of_slopes(w_x - step, w_y))
    by_y = np.subtract(tilt_of_slopes(w_x, w_y + step), tilt_of_slopes(w_x, w_y - step))
    expected = np.stack([by_x, by_y], axis=1) / (2 * step)
    assert tilt_jacobian(w_x, w_y) == pytest.approx(expected, rel=1e-6, abs=1e-3)


def test_nan_stays_nan():
    assert np.all(np.isnan(tilt_of_slopes(np.nan, 0.0)))
