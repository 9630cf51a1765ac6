"""Wedges as standards: against a ray trace, published measurements, and each other."""

import math

import numpy as np
import pytest

from readout.angle import Camera, TiltSet, calibrate_known_tilts, nominal_calibration
from readout.angle.optics import tilt_of_slopes
from readout.angle.two_returns import front_first
from readout.angle.wedge import (
    Wedge,
    WedgeIs,
    angle_of_two_returns,
    deviation_arcsec,
    two_returns_arcsec,
    wedge_of_glass,
    wedge_tilts,
)
from readout.errors import BadInput
from readout.simulation.wedge import GlassWedge

RAD = 180 * 3600 / math.pi


def test_deviation_of_the_wedge_of_the_design():
    """0.2 deg: 372.1" single-pass (ray trace of the design)."""
    assert deviation_arcsec(720.0, 1.5168) == pytest.approx(372.1, abs=0.05)


@pytest.mark.parametrize("turn_deg", np.arange(0.0, 360.0, 30.0))
@pytest.mark.parametrize("mirror", [(0.0, 0.0), (60.0, -40.0)])
def test_the_circle_is_that_of_a_ray_trace(turn_deg, mirror):
    """Exact refraction at both faces, both ways, the front face leaning by 10' and the mirror by
    about 1': the reading runs on the circle to 0.02" of 372". What is left is the second order of
    the angles of incidence."""
    x, y = tilt_of_slopes(*GlassWedge(720.0, 1.5168, (300.0, 600.0)).through(turn_deg, mirror))
    wedge = Wedge(deviation_arcsec(720.0, 1.5168), 0.0)
    made = wedge_tilts(wedge, np.array([turn_deg, np.nan]), np.zeros(2))
    assert made.tilt_arcsec[1] == pytest.approx([0.0, 0.0])
    assert np.array([x, y]) - mirror == pytest.approx(made.tilt_arcsec[0], abs=0.02)


@pytest.mark.parametrize("turn_deg", np.arange(0.0, 360.0, 45.0))
def test_the_two_returns_are_those_of_a_ray_trace(turn_deg):
    front, rear = (
        tilt_of_slopes(*w) for w in GlassWedge(120.0, 1.457, (90.0, 60.0)).returns(turn_deg)
    )
    wedge = Wedge(two_returns_arcsec(120.0, 1.457), 0.0)
    expected = wedge_tilts(wedge, np.array([turn_deg]), np.zeros(1)).tilt_arcsec[0]
    assert np.subtract(rear, front) == pytest.approx(expected, abs=1e-3)


def test_a_published_spot_separation():
    """LIGO Hanford log 13375 (2014): spots 17 mm apart at 360 mm, n = 1.45: 0.93 deg, by the thin
    formula delta / 2n; the exact one may differ in the third digit."""
    reading = 17 / 360 / 2 * RAD
    assert reading / 1.45 / 3600 == pytest.approx(0.93, abs=0.005)
    assert angle_of_two_returns(reading, 1.45) / 3600 == pytest.approx(0.93, abs=0.005)


@pytest.mark.parametrize(
    ("beta_arcmin", "wedge_deg"),
    [(-6.0, -0.034), (-1.6, -0.009), (2.4, 0.014), (3.0, 0.017), (2.2, 0.013), (0.9, 0.0051)],
)
def test_published_vertical_wedges(beta_arcmin, wedge_deg):
    """LIGO output mode cleaner log 59 (2013), reticle shift beta between the returns, fused silica
    (n = 1.461, inferred from the entry): arcsin(sin beta / n) / 2."""
    found = angle_of_two_returns(beta_arcmin * 60 / 2, 1.461) / 3600
    assert found == pytest.approx(wedge_deg, abs=0.6 * 10 ** -(4 if abs(wedge_deg) < 0.006 else 3))


def test_there_and_back():
    assert angle_of_two_returns(two_returns_arcsec(300.0, 1.5), 1.5) == pytest.approx(300.0)
    assert two_returns_arcsec(10.0, 1.5) == pytest.approx(15.0, abs=1e-6)  # n a, small angles


def test_uncertainty_of_a_wedge_by_monte_carlo():
    """Propagation of distributions (JCGM 101): 20000 trials know an sd to 0.5 %."""
    rng = np.random.default_rng(70)
    for wedge_is, value in (
        (WedgeIs.IN_TRANSMISSION, deviation_arcsec),
        (WedgeIs.TWO_RETURNS, two_returns_arcsec),
    ):
        made = wedge_of_glass(
            wedge_is, angle_arcsec=720.0, angle_sd_arcsec=0.4, index=1.5168, index_sd=3e-4
        )
        angles, indices = rng.normal(720.0, 0.4, 20000), rng.normal(1.5168, 3e-4, 20000)
        tried = np.array([value(a, n) for a, n in zip(angles, indices, strict=True)])
        assert made.reading_sd_arcsec == pytest.approx(tried.std(), rel=0.03)
        assert made.reading_arcsec == pytest.approx(tried.mean(), abs=0.02)


@pytest.mark.parametrize("bad", [(0.0, 1.5), (-5.0, 1.5), (720.0, 0.9), (1e6, 1.5)])
def test_wedges_that_cannot_be(bad):
    with pytest.raises(BadInput, match="cannot be: give"):
        deviation_arcsec(*bad)


class TestFrontFirst:
    TURNS = np.arange(0.0, 360.0, 45.0)

    def places(self, rng, exchanged):
        """Places of both faces, px, some of them taken for each other; the camera turned and
        mirrored."""
        turn = np.radians(self.TURNS)
        matrix = np.array([[80.0, 25.0], [25.0, -80.0]])
        front = rng.uniform(200, 400, (8, 2))
        rear = front + np.stack([np.cos(turn), np.sin(turn)], 1) @ matrix.T
        rear += rng.normal(0, 0.01, rear.shape)
        swap = exchanged[:, None]
        return np.where(swap, rear, front), np.where(swap, front, rear)

    @pytest.mark.parametrize("seed", range(71, 76))
    def test_tells_them_apart_up_to_all_at_once(self, seed):
        rng = np.random.default_rng(seed)
        exchanged = np.zeros(8, dtype=bool)
        exchanged[rng.choice(8, 3, replace=False)] = True
        main, other = self.places(rng, exchanged)
        assert front_first(main, other, self.TURNS).tolist() == (~exchanged).tolist()

    def test_turns_that_cannot_tell_are_refused(self):
        """Two directions at right angles fit a mirrored camera just as well."""
        rng = np.random.default_rng(76)
        main, other = self.places(rng, np.zeros(8, dtype=bool))
        with pytest.raises(BadInput, match="directions in between"):
            front_first(main[[0, 2]], other[[0, 2]], self.TURNS[[0, 2]])


def test_a_wedge_at_one_place_and_half_a_turn_from_it_is_one_axis():
    """In the beam, turned by half, and out: three points in X; rounding of sin 180° is no tilt."""
    truth = nominal_calibration(
        focal_length_mm=300.0, pitch_um=3.45, image_width_px=640, image_height_px=480
    )
    made = wedge_tilts(Wedge(150.0, 0.1), np.array([np.nan, 0.0, 180.0]), np.zeros(3))
    true = made.tilt_arcsec + np.array([3.0, 4.0])
    found = calibrate_known_tilts(
        TiltSet(
            names=("a", "b", "c"),
            position_px=np.stack(truth.position(true[:, 0], true[:, 1]), axis=1),
            position_cov_px2=np.tile([1e-6, 0.0, 1e-6], (3, 1)),
            tilt_arcsec=made.tilt_arcsec,
            sd_arcsec=np.zeros(3),
            shared=made.shared,
        ),
        Camera(640, 480),
        way="wedge in transmission",
    )
    assert found.method == "wedge in transmission in x only, square pixels"
    assert found.focal_length_px == pytest.approx(truth.focal_length_px, rel=1e-6)
    assert found.focal_length_px_sd / found.focal_length_px == pytest.approx(0.1 / 150, rel=1e-2)
