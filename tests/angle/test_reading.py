"""A sighting becomes a reading; of a lone arm only what it tells."""

import math
from dataclasses import replace

import numpy as np
import pytest

from readout.angle import Mounting, nominal_calibration, reading_of
from readout.model import Observation, Quality
from readout.sighting import locate
from tests.sighting.frames import BRIGHT, frame

HEIGHT, WIDTH = 240, 320


def calibration():
    return nominal_calibration(
        focal_length_mm=300.0,
        pitch_um=3.45,
        image_width_px=WIDTH,
        image_height_px=HEIGHT,
        mounting=Mounting.STRAIGHT,
        created_utc="2026-01-01T00:00:00Z",
    )


def observed(x, y, rotation_deg, seed):
    pixels = frame(
        (HEIGHT, WIDTH),
        x,
        y,
        replace(BRIGHT, rotation_deg=rotation_deg),
        rng=np.random.default_rng(seed),
    )
    return Observation(0, 0, 0, WIDTH, HEIGHT, locate(pixels, full_scale=255))


def test_one_arm_gives_its_own_axis():
    """The level arm is far above the picture: X is read, Y is not."""
    observation = observed(171.3, -90.0, 0.02, 1)
    sighting = observation.sighting
    assert sighting.quality is Quality.ONE_AXIS
    assert math.isnan(sighting.y_px)
    assert abs(sighting.x_px - 171.3) < 3 * sighting.x_sd_px < 0.6
    reading = reading_of(observation, calibration(), 0.0)
    truth = float(calibration().tilt(171.3, HEIGHT / 2)[0])
    assert abs(reading.x_arcsec - truth) < 3 * reading.x_sd_arcsec
    assert math.isnan(reading.y_arcsec)
    assert math.isnan(reading.y_u_arcsec)


def test_the_range_put_in_is_that_of_the_other_coordinate():
    """range * tan(phi) / sqrt(12), with three heights of the picture for the range."""
    sighting = observed(171.3, -90.0, 0.05, 2).sighting
    spread = 3 * HEIGHT * math.tan(math.radians(0.05)) / math.sqrt(12)
    assert sighting.x_sd_px == pytest.approx(spread, rel=0.05)


def test_the_level_arm_alone_gives_y():
    sighting = observed(-80.0, 100.4, 0.02, 3).sighting
    assert math.isnan(sighting.x_px)
    assert abs(sighting.y_px - 100.4) < 3 * sighting.y_sd_px


def test_a_turned_arm_alone_gives_nothing():
    """A degree over three heights of the picture is 12 px: no value, but the word."""
    observation = observed(171.3, -90.0, 1.0, 4)
    assert observation.sighting.quality is Quality.ONE_AXIS
    assert math.isnan(observation.sighting.x_px)
    reading = reading_of(observation, calibration(), 0.0)
    assert math.isnan(reading.x_arcsec)
    assert math.isnan(reading.y_arcsec)


def test_noise_and_calibration_add_up():
    """The nominal scale is uncertain by a per cent, common to all rows; noise is not."""
    reading = reading_of(observed(200.2, 150.1, 1.0, 5), calibration(), 0.0)
    assert reading.quality is Quality.OK
    assert reading.x_u_arcsec > 20 * reading.x_sd_arcsec > 0
