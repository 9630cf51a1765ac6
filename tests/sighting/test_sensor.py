"""Gain and read noise against the sensor that made the frames: bias, spread and honesty.

The law is that of EMVA 1288 (release 4.0 Linear, 2021), the frames come from the exact path of the
simulation, black level and ground lie anywhere between two steps. Seeds are 0, 1, 2 ... as many as
there are trials.
"""

import functools
import math
from dataclasses import replace

import cv2
import numpy as np
import pytest
from scipy.stats import norm

from readout.model import QUANTISATION_VAR
from readout.sighting.frame_pair import tally_pair
from readout.sighting.sensor import Doubt, RunningTransfer, gain_change, photon_transfer
from readout.sighting.transfer_line import rounding_ripple
from readout.simulation.crosshair import Crosshair, crosshair_image
from readout.simulation.sensor import Sensor, expose

SHAPE = (160, 200)
SENSOR = Sensor(bits=8, gain_levels_per_electron=0.03, read_noise_electrons=25.0)
FINE = Sensor(bits=12, gain_levels_per_electron=0.5, read_noise_electrons=6.0, black_levels=60.0)
RETICLE = Crosshair(line_px=5.0, blur_px=1.3, background=400.0, contrast=6000.0)
TRIALS = 60


def anywhere(sensor, rng):
    """The sensor with its black level at any place between two steps."""
    return replace(sensor, black_levels=sensor.black_levels + rng.random())


def pair(sensor, rng, crosshair=RETICLE, *, moved_px=0.0, light=1.0, hot_px=0, shape=SHAPE):
    """Two frames, in the second the crosshair moved or the light changed; hot pixels in both."""
    x, y = 90.0 + rng.random(), 80.0 + rng.random()
    extra = hot_pixels(rng, hot_px, shape)
    first = crosshair_image(shape, x, y, crosshair)
    second = crosshair_image(shape, x + moved_px, y + 0.7 * moved_px, crosshair)
    return expose(first + extra, sensor, rng), expose(light * second + extra, sensor, rng)


def hot_pixels(rng, n, shape=SHAPE):
    """Electrons of ``n`` hot pixels anywhere."""
    electrons = np.zeros(shape)
    electrons[rng.integers(0, shape[0], n), rng.integers(0, shape[1], n)] = rng.uniform(
        200, 9000, n
    )
    return electrons


def dark_pair(sensor, rng, hot_px=0, shape=SHAPE):
    electrons = hot_pixels(rng, hot_px, shape)
    return expose(electrons, sensor, rng), expose(electrons, sensor, rng)


@functools.cache
def measured(sensor, crosshair=RETICLE, **how):
    """Relative errors and claims of gain and read noise, (TRIALS, 2) each, and the transfers."""
    errors, claims, transfers = [], [], []
    for seed in range(TRIALS):
        rng = np.random.default_rng(seed)
        camera = anywhere(sensor, rng)
        frames = pair(camera, rng, crosshair, **how)
        dark = dark_pair(camera, rng, how.get("hot_px", 0))
        found = photon_transfer(*frames, full_scale=camera.full_scale, dark=dark)
        gain, read = camera.gain_levels_per_electron, camera.read_noise_electrons
        errors.append(
            (found.gain_levels_per_electron / gain - 1, found.read_noise_electrons / read - 1)
        )
        claims.append((found.gain_sd / gain, found.read_noise_electrons_sd / read))
        transfers.append(found)
    return np.array(errors), np.array(claims), transfers


@pytest.mark.parametrize(
    ("sensor", "crosshair"),
    [
        (SENSOR, RETICLE),
        (FINE, RETICLE),
        (SENSOR, replace(RETICLE, background=900.0, contrast=900.0)),
        (SENSOR, replace(RETICLE, background=6400.0, contrast=-5000.0)),
        (FINE, replace(RETICLE, line_px=2.0, blur_px=0.8, rotation_deg=35.0)),
    ],
    ids=["8 bit", "12 bit", "dim", "dark lines", "thin and turned"],
)
def test_bias_spread_and_honesty(sensor, crosshair):
    """60 trials know a mean to 0.13 and an sd to 0.09 of itself, a share of 68 % to 6 %."""
    errors, claims, transfers = measured(sensor, crosshair)
    spread = errors.std(axis=0)
    assert np.all(np.abs(errors.mean(axis=0)) < 4 * spread / math.sqrt(TRIALS))
    assert claims.mean(axis=0) == pytest.approx(spread, rel=0.35)
    assert 0.48 <= np.mean(np.abs(errors) <= claims) <= 0.88
    assert np.mean(np.abs(errors) <= 2 * claims) >= 0.88
    assert {found.doubt for found in transfers} == {Doubt.NONE}


def test_as_exact_as_the_pixels_allow():
    """The variance of n normal pixels is known to sqrt(2 / n) of itself. From the ground in the
    light and the dark alone the gain would be known to hypot of both over their distance; the few
    pixels of the crosshair, ten times farther away, add about as much again."""
    _, claims, _ = measured(SENSOR)
    gain, pixels = 0.03, SHAPE[0] * SHAPE[1]
    ground = gain**2 * (400 + 25**2) + QUANTISATION_VAR
    dark = gain**2 * 25**2 + QUANTISATION_VAR
    two_points = math.hypot(ground, dark) * math.sqrt(2 / pixels) / (gain * 400) / gain
    assert 0.4 * two_points < np.mean(claims[:, 0]) < two_points
    read_alone = dark * math.sqrt(2 / pixels) / (2 * gain**2 * 25**2)
    in_levels = [found.read_noise_levels_sd / (25 * gain) for found in measured(SENSOR)[2]]
    assert np.mean(in_levels) == pytest.approx(read_alone, rel=0.25)


@pytest.mark.parametrize("moved_px", [0.05, 0.3, 1.0, 20.0])
def test_a_moved_arm_is_left_out(moved_px):
    """Taken as it is, the pair moved by 1 px would give 30 times the gain."""
    errors, claims, transfers = measured(SENSOR, moved_px=moved_px)
    assert all(Doubt.CHANGED in found.doubt for found in transfers)
    assert all(found.changed_share > 0.02 for found in transfers)
    assert np.all(np.abs(errors.mean(axis=0)) < 0.35 * claims.mean(axis=0))
    assert np.mean(np.abs(errors) <= 2 * claims) >= 0.88


def test_a_still_scene_is_said_to_be_still():
    shares = [found.changed_share for found in measured(SENSOR)[2]]
    assert np.mean(shares) < 0.002


@pytest.mark.parametrize("light", [0.98, 1.05])
def test_flicker_is_seen_and_taken_out(light):
    """The second frame has ``light`` times the light of the first; with the black level known the
    change as a part of the mean of both is 2 (1 - light) / (1 + light)."""
    errors, _, transfers = measured(SENSOR, light=light)
    spread = errors.std(axis=0)
    assert np.all(np.abs(errors.mean(axis=0)) < 4 * spread / math.sqrt(TRIALS) + 0.002)
    changes = np.array([found.brightness_change for found in transfers])
    assert changes == pytest.approx(np.full(TRIALS, 2 * (1 - light) / (1 + light)), abs=0.003)
    assert all(Doubt.FLICKERED in found.doubt for found in transfers)


def test_light_in_bands_is_taken_out_where_it_is_smooth():
    """Mains on a rolling shutter, 1 % in bands of 100 rows, on a slope of light: 7 % of gain."""
    bands = 2 * np.pi * np.arange(400.0)[:, None] / 200
    slope = np.linspace(300.0, 7000.0, 300)[None, :]
    gains = []
    for seed in range(5):
        rng = np.random.default_rng(seed)
        a, b = (expose(slope * (1 + 0.01 * np.sin(bands + at)), SENSOR, rng) for at in (0.0, 1.5))
        gains.append(photon_transfer(a, b, full_scale=255).gain_levels_per_electron)
    assert np.mean(gains) == pytest.approx(0.03, rel=0.03)


def test_light_in_bands_is_not_passed_over():
    """5 % of such bands on a crosshair: its arms have no smooth neighbourhood."""
    rng = np.random.default_rng(1)
    bands = 2 * np.pi * np.arange(400.0)[:, None] / 200
    scene = crosshair_image((400, 200), 90.3, 200.2, RETICLE)
    a, b = (expose(scene * (1 + 0.05 * np.sin(bands + at)), SENSOR, rng) for at in (0.0, 1.5))
    assert photon_transfer(a, b, full_scale=255).doubt & (Doubt.CHANGED | Doubt.CURVED)


def test_hot_pixels_do_no_harm():
    errors, claims, transfers = measured(SENSOR, hot_px=60)
    assert np.all(np.abs(errors.mean(axis=0)) < 0.5 * claims.mean(axis=0))
    black = [
        found.black_levels for found in transfers
    ]  # 4 to 5, evenly, 0.2 more with the hot ones
    assert np.mean(black) == pytest.approx(4.5, abs=0.12)


@pytest.mark.parametrize(("level", "count"), [(26, 400), (200, 60)])
def test_blinking_pixels_do_no_harm(level, count):
    """Pixels of the ground, of 32000, at 16 in one frame and above it in the other."""
    for seed in range(5):
        rng = np.random.default_rng(seed)
        first, second = pair(SENSOR, rng)
        blinking = (hot_pixels(rng, count) > 0) & (first < 25)
        second = np.where(blinking, level, second).astype(np.uint8)
        found = photon_transfer(first, second, full_scale=255, dark=dark_pair(SENSOR, rng))
        assert found.gain_levels_per_electron == pytest.approx(0.03, abs=3 * found.gain_sd)


def test_saturated_pixels_are_left_out_and_said():
    """Arms 20 px wide, their middle above the scale, and no dark frames: what is left of the light
    must give the gain by itself."""
    wide = replace(RETICLE, line_px=20.0, blur_px=6.0, contrast=9500.0)
    gains, claims = [], []
    for seed in range(20):
        camera = anywhere(SENSOR, np.random.default_rng(seed))
        frames = pair(camera, np.random.default_rng(seed), wide)
        found = photon_transfer(*frames, full_scale=255)
        assert Doubt.SATURATED in found.doubt
        assert found.most_level < 250
        gains.append(found.gain_levels_per_electron)
        claims.append(found.gain_sd)
    assert abs(np.mean(gains) - 0.03) < 4 * np.mean(claims) / math.sqrt(20)
    assert np.mean(claims) < 0.03 * 0.03


def test_saturated_pixels_among_others_do_no_harm():
    """Stripes three pixels wide, every other one above the scale: no level is free of them."""
    rng = np.random.default_rng(2)
    columns = np.arange(400)
    light = np.where(columns // 3 % 2 == 0, 20000.0, 1000.0 + 10 * columns)
    frames = [expose(np.broadcast_to(light, (300, 400)), SENSOR, rng) for _ in range(2)]
    found = photon_transfer(*frames, full_scale=255)
    assert found.gain_levels_per_electron == pytest.approx(0.03, abs=4 * found.gain_sd)
    assert found.gain_sd < 0.05 * 0.03


def test_noise_that_goes_from_pixel_to_pixel_is_not_counted_as_independent():
    """Noise smoothed by a Gaussian of 0.8 px, as interpolated colours are, in a slope of light: a
    gain too small by the power that smoothing takes, and a spread that the claim still covers.
    Taken for independent, pixels would claim half of it."""
    gains, claims = [], []
    scene = np.broadcast_to(np.linspace(400.0, 6400.0, SHAPE[1]), SHAPE)
    for seed in range(TRIALS):
        rng = np.random.default_rng(seed)
        a, b = (
            FINE.quantise(
                FINE.mean_levels(
                    scene + cv2.GaussianBlur(rng.normal(0, np.sqrt(scene + 36.0)), (0, 0), 0.8)
                )
            )
            for _ in range(2)
        )
        found = photon_transfer(a, b, full_scale=4095)
        gains.append(found.gain_levels_per_electron)
        claims.append(found.gain_sd)
    left = 1 / (4 * math.pi * 0.8**2)  # exact: the integral of the squared Gaussian
    assert np.mean(gains) == pytest.approx(0.5 * left, rel=0.02)
    assert np.mean(claims) == pytest.approx(np.std(gains), rel=0.25)


class TestRounding:
    def test_ripple_against_the_normal_distribution(self):
        """Independent reference: sums over steps with scipy.stats.norm. Worst place, and the mean
        square over all places, of var(rounded) - (s^2 + 1/12)."""
        steps = np.arange(-15, 17)
        places = np.linspace(0, 1, 200, endpoint=False)
        for sd in (0.3, 0.4, 0.5, 0.6, 0.8):
            share = np.diff(norm.cdf((np.append(steps, 17) - 0.5 - places[:, None]) / sd), axis=1)
            mean = share @ steps
            variance = share @ steps**2 - mean**2
            off = variance - (sd**2 + QUANTISATION_VAR)
            ripple = float(rounding_ripple(np.array(sd**2)))
            assert np.abs(off).max() == pytest.approx(ripple, rel=0.01)
            assert np.sqrt((off**2).mean()) == pytest.approx(ripple / math.sqrt(2), rel=0.01)

    @pytest.mark.parametrize("read_noise", [2.0, 6.0, 13.0])
    def test_noise_under_half_a_step_in_the_dark(self, read_noise):
        """0.06, 0.18 and 0.39 levels: the gain comes from the light, the read noise is within what
        is claimed, which is large, and the word says so."""
        errors, claims, transfers = measured(replace(SENSOR, read_noise_electrons=read_noise))
        assert all(Doubt.ROUNDED in found.doubt for found in transfers)
        assert np.mean(np.abs(errors) <= claims) >= 0.6
        assert np.mean(np.abs(errors) <= 2 * claims) >= 0.9
        assert np.mean(claims[:, 0]) < 0.08
        largest = [found.read_noise_levels + found.read_noise_levels_sd for found in transfers]
        assert read_noise * 0.03 < np.mean(largest) < read_noise * 0.03 + 0.35

    def test_what_rounding_adds_is_in_the_claim(self):
        """Dark noise of 0.4 levels in 120 000 pixels: chance leaves 0.3 % of it, rounding up to
        10 %, at any place of the black level between two steps."""
        z = []
        for seed in range(40):
            rng = np.random.default_rng(seed)
            camera = anywhere(replace(SENSOR, read_noise_electrons=0.4 / 0.03), rng)
            shape = (300, 400)
            dark = dark_pair(camera, rng, shape=shape)
            found = photon_transfer(*pair(camera, rng), full_scale=255, dark=dark)
            z.append((found.read_noise_levels - 0.4) / found.read_noise_levels_sd)
        assert np.mean(np.abs(z) < 1) > 0.5  # the places are not normal: 50 % within the rms
        assert np.mean(np.abs(z) < 2) > 0.9
        assert 0.6 < np.std(z) < 1.4

    def test_a_dark_without_any_noise(self):
        """Two equal dark frames, all 4: the read noise could be 0, and is not known to be."""
        rng = np.random.default_rng(3)
        dark = np.full(SHAPE, 4, np.uint8)
        camera = replace(SENSOR, read_noise_electrons=1.0)
        found = photon_transfer(*pair(camera, rng), full_scale=255, dark=(dark, dark))
        assert abs(found.read_noise_levels - 0.03) < 2 * found.read_noise_levels_sd
        assert 0.05 < found.read_noise_levels_sd < 0.35
        assert Doubt.ROUNDED in found.doubt


class TestWithoutAnAnswer:
    def test_one_frame_given_twice(self):
        frame = pair(SENSOR, np.random.default_rng(4))[0]
        found = photon_transfer(frame, frame, full_scale=255)
        assert Doubt.NO_GAIN in found.doubt
        assert found.pixels == 0
        assert math.isnan(float(found.variance_at(20.0)))

    def test_a_flat_field_gives_its_variance_and_no_gain(self):
        rng = np.random.default_rng(5)
        flat = np.full(SHAPE, 3000.0)
        found = photon_transfer(
            expose(flat, SENSOR, rng), expose(flat, SENSOR, rng), full_scale=255
        )
        assert Doubt.NO_GAIN in found.doubt
        expected = 0.03**2 * (3000 + 625) + QUANTISATION_VAR
        assert float(found.variance_at(94.0)) == pytest.approx(expected, rel=0.05)
        assert math.isnan(found.read_noise_levels)

    def test_dark_frames_alone_give_a_read_noise_in_levels(self):
        """All in one level of the table, too: a slope cannot be had from that."""
        camera = replace(FINE, black_levels=72.0, read_noise_electrons=4.0)
        dark = dark_pair(camera, np.random.default_rng(10))
        found = photon_transfer(dark[0], dark[0], full_scale=4095, dark=dark)
        assert found.read_noise_levels == pytest.approx(2.0, abs=4 * found.read_noise_levels_sd)
        assert found.read_noise_levels_sd < 0.02
        assert math.isnan(found.read_noise_electrons)
        assert math.isnan(found.read_noise_electrons_sd)

    @pytest.mark.parametrize("level", [0, 255])
    def test_nothing_but_the_ends_of_the_scale(self, level):
        frame = np.full(SHAPE, level, np.uint8)
        other = frame.copy()
        other[3, 3] = 100
        found = photon_transfer(frame, other, full_scale=255)
        assert Doubt.NO_GAIN in found.doubt
        assert (Doubt.SATURATED in found.doubt) == (level == 255)

    def test_frames_of_two_shapes_are_refused(self):
        frame = np.zeros(SHAPE, np.uint8)
        with pytest.raises(ValueError, match="one shape"):
            photon_transfer(frame, frame[1:], full_scale=255)
        with pytest.raises(ValueError, match="8 x 8"):
            photon_transfer(frame[:4], frame[1:5], full_scale=255)

    def test_a_response_curve_is_no_straight_line(self):
        """Gamma 0.45: levels above 60 have less noise the brighter they are."""
        rng = np.random.default_rng(6)
        scene = crosshair_image((400, 500), 250.3, 200.2, replace(RETICLE, line_px=20.0))
        linear = (rng.poisson(scene) + rng.normal(0, 25, scene.shape) for _ in range(2))
        a, b = (
            np.rint(255 * np.clip(light / 9000, 0, 1) ** 0.45).astype(np.uint8) for light in linear
        )
        assert Doubt.CURVED in photon_transfer(a, b, full_scale=255).doubt


class TestRunning:
    def test_each_frame_is_used_once_and_pairs_add_up(self):
        rng = np.random.default_rng(7)
        frames = [*pair(FINE, rng), *pair(FINE, rng)]
        running = RunningTransfer(4095, most_pairs=2)
        for frame in frames:
            running = running.after(frame)
        assert running.waiting is None
        both = tally_pair(*frames[:2], 4095) + tally_pair(*frames[2:], 4095)
        assert running.transfer.pixels == both.count.sum()
        assert running.after(frames[0]).transfer == running.transfer

    def test_only_the_last_pairs_count(self):
        rng = np.random.default_rng(8)
        running = RunningTransfer(255)
        for sensor in (SENSOR, replace(SENSOR, gain_levels_per_electron=0.02)):
            for frame in pair(sensor, rng, shape=(300, 400)):
                running = running.after(frame)
        found = running.transfer
        assert found.gain_levels_per_electron == pytest.approx(0.02, abs=4 * found.gain_sd)
        assert found.gain_sd < 0.002

    def test_repeated_frames_are_passed_over_and_another_shape_begins_anew(self):
        rng = np.random.default_rng(9)
        frame, other = pair(SENSOR, rng)
        running = RunningTransfer(255).after(frame).after(frame)
        assert running.tallies == ()
        assert running.after(other).transfer.pixels > 0
        assert running.after(other[:100]).tallies == ()

    def test_the_claimed_change_of_gain_holds(self):
        """Gain and exposure as they were: the ratio is 1 within its uncertainty."""
        z = []
        for seed in range(TRIALS):
            rng = np.random.default_rng(seed)
            now, then = (photon_transfer(*pair(FINE, rng), full_scale=4095) for _ in range(2))
            ratio, sd = gain_change(now, then)
            z.append((ratio - 1) / sd)
        assert abs(np.mean(z)) < 4 / math.sqrt(TRIALS)
        assert 0.7 < np.std(z) < 1.35
