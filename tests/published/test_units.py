"""Unit constants and the height steps of an arc-second."""

import math

import numpy as np
import pytest

from readout.units import ARCSEC_PER_RAD, Unit, from_arcsec


def test_arcsecond_and_radian():
    """SI Brochure, 9th edition (2019), table 8: 1" = (pi / 648 000) rad, exact."""
    assert pytest.approx(648_000 / math.pi, rel=1e-15) == ARCSEC_PER_RAD
    assert pytest.approx(206_264.80624709636, rel=1e-15) == ARCSEC_PER_RAD
    assert from_arcsec(1.0, Unit.URAD) == pytest.approx(4.84813681109536, rel=1e-14)


def test_slope():
    """Exact relations: 1 mm/m is arctan 0.001 = 206.2647"; 0.005 mm/m is 1.0313240"."""
    assert from_arcsec(206.264737, Unit.MM_PER_M) == pytest.approx(1.0, rel=1e-7)
    assert from_arcsec(1.0313240, Unit.MM_PER_M) == pytest.approx(0.005, rel=1e-7)
    assert from_arcsec(1.0, Unit.MM_PER_M) == pytest.approx(4.8481368e-3, rel=1e-7)


@pytest.mark.parametrize(
    ("base_mm", "step_um"),
    [(100, 0.484814), (127, 0.615713), (150, 0.727221), (200, 0.969627), (254, 1.231427)],
)
def test_height_step_of_one_arcsecond(base_mm, step_um):
    """Base length times one arc-second, the handbook relation of the stepping carriage; a widely
    taught rounding, 0.5 um on 100 mm, is 3.1 % high (university lecture on straightness)."""
    assert base_mm * from_arcsec(1.0, Unit.MM_PER_M) == pytest.approx(step_um, abs=5e-7)
    if base_mm == 100:
        assert 0.5 / step_um - 1 == pytest.approx(0.031, abs=0.0005)


@pytest.mark.parametrize(
    ("focal_mm", "pitch_um", "scale"),
    [(500, 3.45, 0.711614), (300, 5.2, 1.787629), (1000, 4.65, 0.479566), (250, 2.2, 0.907565)],
)
def test_scale_per_pixel(focal_mm, pitch_um, scale):
    """theta = d / (2 f), the formula of laboratory hand-outs on the autocollimator."""
    from readout.angle import nominal_calibration

    at = nominal_calibration(
        focal_length_mm=focal_mm, pitch_um=pitch_um, image_width_px=100, image_height_px=100
    )
    assert at.scale_arcsec_per_px == pytest.approx((scale, scale), abs=1e-6)


def test_resolution_of_the_trade_is_reached():
    """Common practice, no standard: 0.1" by eye on the drum, about 0.01" by a photo-sensor.

    One frame of a 5 px line with photon noise of some 10^4 electrons a pixel must resolve at
    least the latter; the scale is that of 300 mm and 3.45 um.
    """
    from readout.sighting import locate
    from tests.sighting.frames import frame

    rng = np.random.default_rng(30)
    found = locate(frame((480, 640), 300.2, 200.7, rng=rng), full_scale=255)
    arcsec_per_px = 1.186
    assert found.x_sd_px * arcsec_per_px < 0.01
    assert abs(found.x_px - 300.2) * arcsec_per_px < 0.01
