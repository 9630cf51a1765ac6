"""A known tilt, through exact reflection and the drawn picture, and back."""

from __future__ import annotations

import math
from dataclasses import replace

import numpy as np
import pytest

from readout.angle import Mounting
from readout.simulation import Autocollimator

ARCSEC = math.pi / 648000  # exact: SI Brochure, 9th edition, table 8


def drawn_crossing(autocollimator: Autocollimator, x_px: float, y_px: float) -> tuple[float, float]:
    """Crossing of the arms in the noise-free picture: centres of mass away from it, two lines.

    Within each row the upright arm is far from the level one; its centre of mass over row
    numbers is a straight line, as is that of the level arm over column numbers.
    """
    image = autocollimator.electrons(x_px, y_px) - autocollimator.reticle.background
    height, width = image.shape

    def line(picture: np.ndarray, along_px: float, across_px: float) -> np.ndarray:
        n, size = picture.shape
        lines = np.arange(n)
        lines = lines[np.abs(lines - along_px) > 40]
        window = np.abs(np.arange(size) - across_px) < 30
        part = picture[np.ix_(lines, window)]
        centres = (part * np.arange(size)[window]).sum(axis=1) / part.sum(axis=1)
        return np.polyfit(lines - along_px, centres, 1)

    a, x0 = line(image, y_px, x_px)
    b, y0 = line(image.T, x_px, y_px)
    # x - x_px = (x0 - x_px) + a (y - y_px) and y - y_px = (y0 - y_px) + b (x - x_px)
    dx, dy = np.linalg.solve([[1, -a], [-b, 1]], [x0 - x_px, y0 - y_px])
    assert (height, width) == autocollimator.shape
    return x_px + dx, y_px + dy


@pytest.mark.parametrize("mounting", list(Mounting))
@pytest.mark.parametrize("rotation_deg", [0.0, 1.3])
def test_tilt_to_picture_and_back(mounting: Mounting, rotation_deg: float) -> None:
    instrument = replace(Autocollimator(), mounting=mounting, rotation_deg=rotation_deg)
    calibration = instrument.calibration()
    for tilt in ((0.0, 0.0), (137.2, -88.4), (-203.7, 121.9)):
        where = (float(p) for p in calibration.position(*tilt))
        seen = drawn_crossing(instrument, *where)
        assert calibration.tilt(*seen) == pytest.approx(tilt, abs=1e-4)


def test_place_of_a_tilt_about_one_axis_alone() -> None:
    """x - p0 = f tan(2X) / pitch for a bare upright sensor, to the right for X > 0 (design)."""
    instrument = replace(Autocollimator(), rotation_deg=0.0)
    x_px, y_px = instrument.calibration().position(200.0, 0.0)
    assert x_px - 319.5 == pytest.approx(300.0 / 3.45e-3 * math.tan(400.0 * ARCSEC), rel=1e-9)
    assert y_px == pytest.approx(239.5, abs=1e-9)
    x_px, y_px = instrument.calibration().position(0.0, 200.0)
    assert y_px < 239.5  # up: the mirror's top edge is nearer
    assert x_px == pytest.approx(319.5, abs=1e-9)


def test_field_of_the_default_instrument() -> None:
    """Scale pitch / (2 f) = 1.186 arcsec a pixel (design): half the picture is 380 by 285."""
    calibration = replace(Autocollimator(), rotation_deg=0.0).calibration()
    x, y = calibration.tilt(639.5, -0.5)
    assert x == pytest.approx(380, abs=1)
    assert y == pytest.approx(285, abs=1)


def test_its_calibration_says_that_it_is_simulated_and_known() -> None:
    calibration = Autocollimator().calibration()
    assert calibration.method == "simulated"
    assert calibration.id.startswith("simulated-")
    assert calibration.signs == "proven"
    assert calibration.warnings == ()
    assert not np.any(calibration.param_cov)
    assert calibration.focal_length_mm == pytest.approx(300.0, rel=1e-12)
    assert calibration.rotation_deg == pytest.approx(0.4, abs=1e-9)


@pytest.mark.parametrize("mounting", list(Mounting))
def test_arms_lie_along_the_axes_of_tilt(mounting: Mounting) -> None:
    """Sweeping X alone moves the crossing along the level arm, whatever the mounting."""
    instrument = replace(Autocollimator(), mounting=mounting, rotation_deg=2.0)
    x, y = instrument.calibration().position(np.array([-100.0, 100.0]), np.zeros(2))
    slope_deg = math.degrees(math.atan(np.diff(y)[0] / np.diff(x)[0]))
    assert slope_deg == pytest.approx(instrument.picture_of_reticle.rotation_deg, abs=1e-3)
