"""Frames of a still picture pass, whatever their noise; those of one that moves do not."""

import numpy as np
import pytest

from readout.model import Pixels
from readout.sighting.standing import squares, stood_still
from readout.simulation.crosshair import Crosshair, crosshair_image
from readout.simulation.sensor import Sensor, expose

SHAPE = (120, 161)
SENSOR = Sensor(bits=8, gain_levels_per_electron=0.03, read_noise_electrons=6.0, black_levels=3.0)
LINES = Crosshair(line_px=4.0, blur_px=1.6, background=400.0, contrast=6000.0)


def taken(n, rng, *, shift_px=lambda k: 0.0, light=lambda k: 1.0, sensor=SENSOR):
    """Squares of n frames of a crosshair that moves and brightens with the frame's number."""

    def frame(k) -> Pixels:
        electrons = crosshair_image(SHAPE, 80.3 + shift_px(k), 60.7, LINES)
        return expose(light(k) * electrons, sensor, rng)

    return [squares(frame(k)) for k in range(n)]


def test_squares_are_means_of_eight_pixels():
    """Exact where the picture divides by eight: numpy's own mean of the blocks."""
    pixels = np.random.default_rng(1).integers(0, 256, (48, 64), dtype=np.uint8)
    blocks = pixels.reshape(6, 8, 8, 8).mean(axis=(1, 3))
    assert squares(pixels) == pytest.approx(blocks, abs=1e-3)
    assert squares(np.zeros((3, 5), np.uint16)).shape == (1, 1)


@pytest.mark.parametrize("n", [4, 8, 32])
@pytest.mark.parametrize("sensor", [SENSOR, Sensor(12, 0.48, 12.0, 64.0)], ids=["8", "12"])
def test_a_still_picture_passes(n, sensor):
    rng = np.random.default_rng(2)
    for _ in range(10):
        assert stood_still(taken(n, rng, sensor=sensor), sensor.full_scale)


def test_a_dark_one_passes():
    rng = np.random.default_rng(3)
    frames = [squares(expose(np.zeros(SHAPE), SENSOR, rng)) for _ in range(8)]
    assert stood_still(frames, 255)


def test_a_lamp_that_creeps_is_no_motion():
    rng = np.random.default_rng(4)
    assert stood_still(taken(32, rng, light=lambda k: 1 + 0.02 * k / 31), 255)


@pytest.mark.parametrize(
    ("what", "how"),
    [
        ("slow", {"shift_px": lambda k: k / 31}),
        ("step late", {"shift_px": lambda k: 0.5 * (k > 24)}),
        ("step early", {"shift_px": lambda k: 2.0 * (k < 6)}),
        ("to and fro", {"shift_px": lambda k: 2 * np.sin(k / 8)}),
        ("lamp off", {"light": lambda k: 1.0 if k < 20 else 0.1}),
    ],
)
def test_motion_is_seen(what, how):
    del what
    rng = np.random.default_rng(5)
    for _ in range(5):
        assert not stood_still(taken(32, rng, **how), 255)


def test_a_cover_put_before_the_mirror_meanwhile_is_seen():
    rng = np.random.default_rng(6)
    frames = taken(20, rng)
    frames += [squares(expose(np.full(SHAPE, 400.0), SENSOR, rng)) for _ in range(12)]
    assert not stood_still(frames, 255)
