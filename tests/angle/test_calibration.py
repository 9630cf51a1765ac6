"""Pixels to arc-seconds: signs, scale, uncertainty, against geometry and against Monte Carlo."""

import math
from dataclasses import replace

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from readout.angle import Calibration, Mounting, nominal_calibration, reading_of
from readout.errors import BadInput
from readout.model import Observation, Quality, Sighting, no_sighting

NOMINAL = {
    "focal_length_mm": 300.0,
    "pitch_um": 3.45,
    "image_width_px": 1280,
    "image_height_px": 960,
}


def calibration(**changes) -> Calibration:
    return nominal_calibration(**(NOMINAL | changes))


class TestSigns:
    """design: a bare upright sensor shows the return moving right for X > 0, up for Y > 0."""

    @pytest.mark.parametrize(
        ("mounting", "right", "down"),
        [
            (Mounting.STRAIGHT, 1, -1),
            (Mounting.SWAPPED_SIDES, -1, -1),
            (Mounting.UPSIDE_DOWN, 1, 1),
            (Mounting.HALF_TURN, -1, 1),
        ],
    )
    def test_where_the_return_goes(self, mounting, right, down):
        at = calibration(mounting=mounting)
        x0, y0 = at.p0_px
        x, y = at.position(100.0, 0.0)
        assert np.sign(x - x0) == right
        assert y == pytest.approx(y0, abs=1e-9)
        x, y = at.position(0.0, 100.0)
        assert np.sign(y - y0) == down
        assert x == pytest.approx(x0, abs=1e-9)
        assert at.mirrored == (right == down)

    @pytest.mark.parametrize("rotation_deg", [0.0, 1.7, -30.0, 120.0])
    def test_rotation_is_from_picture_right_clockwise_to_growing_x(self, rotation_deg):
        at = calibration(rotation_deg=rotation_deg)
        x, y = np.subtract(at.position(1.0, 0.0), at.p0_px)
        assert math.degrees(math.atan2(y, x)) == pytest.approx(rotation_deg)
        assert at.rotation_deg == pytest.approx(rotation_deg)
        assert not at.mirrored


def test_scale_near_the_axis():
    """theta = d / (2 f): 3.45 um and 300 mm are 1.186" a pixel (NPL and text-book formula)."""
    at = calibration()
    assert at.scale_arcsec_per_px == pytest.approx((1.18602, 1.18602), abs=1e-5)
    assert at.focal_length_mm == pytest.approx(300.0)
    x, _ = at.tilt(at.p0_px[0] + 1, at.p0_px[1])
    assert x == pytest.approx(1.18602, abs=1e-5)


def test_a_foil_under_one_foot_proves_sign_factor_and_scale():
    """0.05 mm under the far foot of a carriage 100 mm long: arctan(0.0005) = 103.1" (geometry).

    The mirror's top edge comes nearer: Y > 0, and the return rises in the picture.
    """
    at = calibration()
    shift_px = 300.0 * math.tan(2 * math.atan(0.05 / 100)) / 3.45e-3
    x, y = at.tilt(at.p0_px[0], at.p0_px[1] - shift_px)
    assert y == pytest.approx(math.degrees(math.atan(0.05 / 100)) * 3600, abs=1e-6)
    assert y == pytest.approx(103.1, abs=0.05)
    assert x == pytest.approx(0.0, abs=1e-9)


@given(st.floats(-3600, 3600), st.floats(-3600, 3600), st.floats(-0.5, 0.5))
def test_position_and_tilt_are_inverse(x, y, k1):
    at = replace(calibration(rotation_deg=1.7, mounting=Mounting.UPSIDE_DOWN), k1=k1)
    assert np.array(at.tilt(*at.position(x, y))) == pytest.approx((x, y), abs=1e-7)


def test_derivative_is_that_of_the_tilt():
    at = replace(calibration(rotation_deg=20.0), k1=0.8)
    place, step = np.array([900.0, 200.0]), 1e-3
    columns = [
        np.subtract(at.tilt(*(place + d)), at.tilt(*(place - d))) / (2 * step)
        for d in np.eye(2) * step
    ]
    assert at.tilt_per_px(*place) == pytest.approx(np.stack(columns, axis=1), rel=1e-6, abs=1e-8)


def test_both_shares_of_the_uncertainty_agree_with_monte_carlo():
    """Propagation of distributions (JCGM 101); n trials know a covariance to about 4/sqrt(n)."""
    at = replace(calibration(rotation_deg=20.0, focal_length_rel_sd=0.01), k1=0.3)
    place, noise = np.array([1000.0, 150.0]), np.array([[0.04, 0.01], [0.01, 0.02]])
    rng = np.random.default_rng(4)
    tried = rng.multivariate_normal(place, noise, 20000)
    spread = np.cov(at.tilt(tried[:, 0], tried[:, 1]))
    claimed = at.noise_cov(*place, (0.04, 0.01, 0.02))
    assert claimed == pytest.approx(spread, abs=4 / np.sqrt(20000) * spread.max())
    parameters = np.array([*np.ravel(at.matrix), *at.p0_px, at.k1])
    results = []
    for trial in rng.multivariate_normal(parameters, at.param_cov, 4000):
        matrix = ((trial[0], trial[1]), (trial[2], trial[3]))
        other = replace(at, matrix=matrix, p0_px=(trial[4], trial[5]), k1=trial[6])
        results.append(other.tilt(*place))
    spread = np.cov(np.array(results).T)
    claimed = at.calibration_cov(*place)
    assert claimed == pytest.approx(spread, abs=6 / np.sqrt(4000) * spread.max())


def test_every_parameter_counts_in_the_calibration_share():
    """Monte Carlo with p0 and k1 uncertain, too, and correlated with the matrix."""
    at = replace(calibration(rotation_deg=20.0), k1=0.3)
    spread = np.array([2e-8, 1e-8, 1e-8, 3e-8, 2.0, 3.0, 0.2])
    correlation = np.eye(7) + 0.3 * (np.eye(7, k=1) + np.eye(7, k=-1))
    cov = correlation * np.outer(spread, spread)
    at = replace(at, param_cov=tuple(tuple(row) for row in cov.tolist()))
    place = (1200.0, 60.0)
    parameters = np.array([*np.ravel(at.matrix), *at.p0_px, at.k1])
    rng = np.random.default_rng(5)
    results = []
    for trial in rng.multivariate_normal(parameters, cov, 4000):
        matrix = ((trial[0], trial[1]), (trial[2], trial[3]))
        other = replace(at, matrix=matrix, p0_px=(trial[4], trial[5]), k1=trial[6])
        results.append(other.tilt(*place))
    tried = np.cov(np.array(results).T)
    claimed = at.calibration_cov(*place)
    assert claimed == pytest.approx(tried, abs=6 / np.sqrt(4000) * tried.max())
    for column in range(7):
        without = cov.copy()
        without[column, :] = without[:, column] = 0.0
        less = replace(at, param_cov=tuple(tuple(row) for row in without.tolist()))
        assert np.abs(less.calibration_cov(*place) - claimed).max() > 0


def test_the_share_of_a_difference_agrees_with_monte_carlo():
    """Propagation of distributions (JCGM 101), the same parameters at both places."""
    at = replace(calibration(rotation_deg=20.0), k1=0.3)
    spread = np.array([2e-8, 1e-8, 1e-8, 3e-8, 2.0, 3.0, 0.2])
    correlation = np.eye(7) + 0.3 * (np.eye(7, k=1) + np.eye(7, k=-1))
    cov = correlation * np.outer(spread, spread)
    at = replace(at, param_cov=tuple(tuple(row) for row in cov.tolist()))
    place, zero = (1200.0, 60.0), (900.0, 200.0)
    parameters = np.array([*np.ravel(at.matrix), *at.p0_px, at.k1])
    rng = np.random.default_rng(6)
    results = []
    # Drawn in units of their spread: the smallest variance is 1e-17 of the largest.
    for drawn in rng.multivariate_normal(np.zeros(7), correlation, 4000):
        trial = parameters + spread * drawn
        matrix = ((trial[0], trial[1]), (trial[2], trial[3]))
        other = replace(at, matrix=matrix, p0_px=(trial[4], trial[5]), k1=trial[6])
        results.append(np.subtract(other.tilt(*place), other.tilt(*zero)))
    tried = np.cov(np.array(results).T)
    claimed = at.difference_cov(*place, *zero)
    assert claimed == pytest.approx(tried, abs=6 / np.sqrt(4000) * tried.max())


def test_a_scale_known_to_one_percent_leaves_one_percent_of_the_difference():
    """A zero at 300" and a mirror 0.3" beside it: 0.003", not the 3" of the absolute tilt."""
    at = calibration(focal_length_rel_sd=0.01)
    zero, place = at.position(300.0, 0.0), at.position(300.3, 0.0)
    claimed = at.difference_cov(float(place[0]), float(place[1]), float(zero[0]), float(zero[1]))
    assert math.sqrt(claimed[0, 0]) == pytest.approx(0.003, rel=0.01)
    assert math.sqrt(at.calibration_cov(*map(float, place))[0, 0]) == pytest.approx(3.0, rel=0.01)


def test_shares_take_places_of_any_shape():
    at = replace(calibration(rotation_deg=20.0, focal_length_rel_sd=0.01), k1=0.3)
    x_px, y_px = np.array([[900.0, np.nan], [100.0, 3.0]]), np.array([[200.0, 1.0], [7.0, 4.0]])
    shares = at.calibration_cov(x_px, y_px)
    differences = at.difference_cov(x_px, y_px, 30.0, 40.0)
    assert shares.shape == differences.shape == (2, 2, 2, 2)
    assert np.isnan(shares[0, 1]).all()
    assert shares[1, 0] == pytest.approx(at.calibration_cov(100.0, 7.0))
    assert differences[1, 1] == pytest.approx(at.difference_cov(3.0, 4.0, 30.0, 40.0))
    assert at.difference_cov(30.0, 40.0, 30.0, 40.0) == pytest.approx(np.zeros((2, 2)), abs=1e-15)


def test_a_camera_not_quite_upright_is_in_the_uncertainty():
    """1 degree of unknown turn: at X = 300" and Y = 0 it is 5.2" of Y (300" sin 1 deg)."""
    at = calibration(rotation_sd_deg=1.0, focal_length_rel_sd=0.0)
    x_px, y_px = at.position(300.0, 0.0)
    share = np.sqrt(np.diag(at.calibration_cov(float(x_px), float(y_px))))
    assert share == pytest.approx([0.0, 300 * math.radians(1.0)], abs=0.01)


def test_claimed_focal_length_sd_is_the_one_put_in():
    at = calibration(focal_length_rel_sd=0.013)
    assert at.focal_length_px_sd / at.focal_length_px == pytest.approx(0.013)


@pytest.mark.parametrize("bad", [{"focal_length_mm": 0}, {"pitch_um": -1}, {"pitch_um": math.nan}])
def test_impossible_parts_are_refused_in_words(bad):
    with pytest.raises(BadInput, match="positive"):
        calibration(**bad)


class TestReading:
    def observation(self, sighting):
        return Observation(7, 1_000, 2_000, 1280, 960, sighting, "a.png")

    def test_joins_noise_and_calibration(self):
        at = calibration(focal_length_rel_sd=0.01, rotation_sd_deg=0.0)
        x_px, y_px = at.position(300.0, -200.0)
        sighting = Sighting(float(x_px), float(y_px), (1e-4, 0.0, 1e-4), Quality.OK)
        reading = reading_of(self.observation(sighting), at, 1.5)
        assert (reading.x_arcsec, reading.y_arcsec) == pytest.approx((300.0, -200.0))
        assert reading.x_sd_arcsec == pytest.approx(0.01 * 1.186, rel=1e-3)
        assert reading.x_u_arcsec == pytest.approx(math.hypot(3.0, 0.01186), rel=1e-3)
        assert reading.y_u_arcsec == pytest.approx(math.hypot(2.0, 0.01186), rel=1e-3)
        assert (reading.seq, reading.t_s, reading.name) == (7, 1.5, "a.png")
        assert reading.good

    def test_without_position_or_calibration_there_is_no_angle(self):
        empty = reading_of(self.observation(no_sighting(Quality.NO_IMAGE)), calibration(), 0.0)
        assert math.isnan(empty.x_arcsec)
        assert empty.quality is Quality.NO_IMAGE
        found = Sighting(10.0, 20.0, (1e-4, 0.0, 1e-4), Quality.OK)
        bare = reading_of(self.observation(found), None, 0.0)
        assert math.isnan(bare.y_arcsec)
        assert bare.x_px == 10.0
        assert not bare.good


def test_an_uncertain_rotation_alone_makes_no_uncertain_focal_length():
    """The determinant does not change with a rotation; in its last digits g C g may be negative."""
    rng = np.random.default_rng(0)
    for _ in range(100):
        turned = calibration(rotation_deg=rng.uniform(-180, 180))
        by_angle = np.zeros(7)
        by_angle[:4] = 0.01 * (np.array([[0, -1], [1, 0]]) @ np.array(turned.matrix)).ravel()
        cov = tuple(map(tuple, np.outer(by_angle, by_angle).tolist()))
        sd_px = replace(turned, param_cov=cov).focal_length_px_sd
        assert 0 <= sd_px < 1e-7 * turned.focal_length_px
