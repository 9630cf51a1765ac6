"""Is it linear: an S-curve of known size is found, and noise is left alone."""

import json
import math
from dataclasses import replace

import numpy as np
import pytest
from scipy.special import ndtr

from readout.angle import nominal_calibration
from readout.angle.linearity import FALSE_ALARM, examine_calibration, examine_linearity
from readout.errors import BadInput

ARCSEC_PER_PX = 1.186


def centroid_error_px(place_px, blur_px, window_px):
    """Error of the centre of mass of a pixel-integrated Gaussian line in a window of pixels about
    the brightest: computed here from the normal distribution function, pixel by pixel."""
    centre = np.round(place_px)
    k = np.arange(-(window_px // 2), window_px // 2 + 1)[None, :]
    edges = (centre - place_px)[:, None] + k
    share = ndtr((edges + 0.5) / blur_px) - ndtr((edges - 0.5) / blur_px)
    return centre + (share * k).sum(axis=1) / share.sum(axis=1) - place_px


def residuals(rng, n, error_px, noise_px):
    """Angles, residuals and places of one axis, after a straight line has been fitted."""
    x = rng.uniform(20, 620, n)
    y = rng.uniform(20, 460, n)
    angle = ARCSEC_PER_PX * (x - 320)
    raw = ARCSEC_PER_PX * (error_px(x) + rng.normal(0, noise_px, n))
    return angle, raw - np.polyval(np.polyfit(angle, raw, 1), angle), np.stack([x, y], axis=1)


def test_the_error_of_a_centre_of_mass_is_found_with_its_published_size():
    """sigma = 0.5 px, wide window: amplitude (1/pi) exp(-2 pi^2 sigma^2) = 0.0022892 px (closed
    form by Poisson summation), sinking with the place's distance right of a pixel's centre."""
    rng = np.random.default_rng(1)
    given = residuals(rng, 400, lambda x: centroid_error_px(x, 0.5, 15), 0.003)
    found = examine_linearity("x", *given)
    (sine,) = found.found
    assert (sine.along, sine.period) == ("x_px", 1.0)
    published = 0.0022892476 * ARCSEC_PER_PX
    assert abs(sine.amplitude_arcsec - published) < 3 * sine.amplitude_u_arcsec
    assert sine.amplitude_u_arcsec < published / 5
    assert abs(abs(sine.phase_deg) - 180) < 40
    assert not found.curved


def test_a_truncated_window_makes_the_error_seen_on_star_sensors():
    """sigma = 1 px in 5 pixels: 0.055 px at most; published: about 0.06 px before compensation
    (Yang, Liang, Zhang, Song, Sensors 11 (2011) 7341). Its harmonics are found with it."""
    phase = (np.arange(1000) + 0.5) / 1000 - 0.5
    curve = centroid_error_px(phase, 1.0, 5)
    assert np.abs(curve).max() == pytest.approx(0.0548, abs=0.0005)
    first, second = (2 * abs(np.mean(curve * np.exp(2j * np.pi * h * phase))) for h in (1, 2))
    rng = np.random.default_rng(2)
    found = examine_linearity(
        "x", *residuals(rng, 300, lambda x: centroid_error_px(x, 1.0, 5), 0.003)
    )
    sizes = {sine.period: sine for sine in found.found}
    assert set(sizes) == {1.0, 0.5}
    for period, harmonic in ((1.0, first), (0.5, second)):
        sine = sizes[period]
        assert abs(sine.amplitude_arcsec - harmonic * ARCSEC_PER_PX) < 3 * sine.amplitude_u_arcsec
    assert "one cycle in 1 px along x" in " ".join(found.words())


def test_false_alarms_are_as_rare_as_promised():
    """White noise, fifteen points, as a calibration has them: 2000 examinations."""
    runs, alarms = 2000, 0
    for k in range(runs):
        rng = np.random.default_rng([3, k])
        found = examine_linearity("x", *residuals(rng, 15, lambda x: 0 * x, 0.01))
        alarms += bool(found.found) or found.curved
    assert alarms / runs < FALSE_ALARM + 3 * math.sqrt(FALSE_ALARM / runs)
    print(f"false alarms: {alarms} of {runs}")
    assert alarms > 0  # Bonferroni is cautious, not blind: seven tests hardly hang together


def test_a_curve_is_found_and_its_size_told():
    """A cubic of +-0.5" beside noise of 0.02"; its straight part belongs to the calibration."""
    rng = np.random.default_rng(4)
    angle, noise, place = residuals(rng, 60, lambda x: 0 * x, 0.02)
    z = angle / np.abs(angle).max()
    bent = 0.5 * z**3
    bent -= np.polyval(np.polyfit(angle, bent, 1), angle)
    found = examine_linearity("x", angle, noise + bent, place)
    assert found.curved
    assert found.curve.departure_arcsec == pytest.approx(np.ptp(bent) / 2, abs=0.03)
    assert found.found == ()
    assert "follow a curve" in found.words()[1]


def test_a_suspected_period_of_the_stage_is_found():
    """Half a second of arc per turn of a screw that makes 180"."""
    rng = np.random.default_rng(5)
    angle, noise, place = residuals(rng, 40, lambda x: 0 * x, 0.05)
    bent = noise + 0.5 * np.sin(2 * np.pi * angle / 180 + 1.0)
    found = examine_linearity("x", angle, bent, place, angle_periods_arcsec=(180.0,))
    (sine,) = found.found
    assert sine.along == "angle_arcsec"
    assert sine.amplitude_arcsec == pytest.approx(0.5, abs=4 * sine.amplitude_u_arcsec)
    assert sine.phase_deg == pytest.approx(math.degrees(1.0), abs=15)
    assert "one cycle in 180″ of the angle" in " ".join(found.words())


def test_a_calibrations_own_residuals():
    rng = np.random.default_rng(6)
    calibration = nominal_calibration(
        focal_length_mm=300.0, pitch_um=3.45, image_width_px=640, image_height_px=480
    )
    place = rng.uniform(30, 450, (80, 2))
    rows = tuple(
        {
            "file": f"{number}.png",
            "x_px": float(x),
            "y_px": float(y),
            "x_residual_arcsec": 0.1 * math.sin(2 * math.pi * x) + rng.normal(0, 0.02),
            "y_residual_arcsec": None,
        }
        for number, (x, y) in enumerate(place)
    )
    (x_axis,) = examine_calibration(replace(calibration, residuals=rows))
    assert [sine.period for sine in x_axis.found] == [1.0]
    with pytest.raises(BadInput, match="0 different angles in x"):
        examine_calibration(calibration)


def test_steps_of_whole_pixels_are_said_to_tell_nothing():
    rng = np.random.default_rng(7)
    x = 20.0 + 10 * np.arange(30)
    found = examine_linearity(
        "x", ARCSEC_PER_PX * x, rng.normal(0, 0.01, 30), np.stack([x, 0 * x], axis=1)
    )
    assert "nothing can be said of 1 px along x" in found.words()[-1]
    document = json.loads(json.dumps(found.document(), allow_nan=False))
    assert [p["amplitude_arcsec"] for p in document["periodic"]] == [None] * 6


def test_what_is_said_where_nothing_is_found():
    rng = np.random.default_rng(8)
    found = examine_linearity("y", *residuals(rng, 50, lambda x: 0 * x, 0.01))
    document = json.loads(json.dumps(found.document(), allow_nan=False))
    assert not any(p["found"] for p in document["periodic"])
    assert document["words"][1].startswith("y: none shown at 1 px along x, 0.5 px along x, 2 px")


@pytest.mark.parametrize("period", [0.0, -1.0, math.nan, math.inf])
def test_a_period_that_cannot_be(period):
    rng = np.random.default_rng(9)
    given = residuals(rng, 20, lambda x: 0 * x, 0.01)
    with pytest.raises(BadInput, match="cannot be: give a positive number"):
        examine_linearity("x", *given, angle_periods_arcsec=(period,))


def test_too_few_points():
    rng = np.random.default_rng(10)
    with pytest.raises(BadInput, match=r"9 different angles in x .* take 10 or more"):
        examine_linearity("x", *residuals(rng, 9, lambda x: 0 * x, 0.01))
