"""Each correction of a frame against a known truth."""

import math
from dataclasses import replace

import cv2
import numpy as np
import pytest
from scipy.ndimage import center_of_mass

from readout.errors import BadInput
from readout.model import Arm, Quality, Return, Sighting
from readout.sighting.dark import defective_pixels, mean_frame, saturation_level
from readout.sighting.prepare import Preparation
from readout.sighting.raw import Colour, Depth, Mosaic, Plane, depth_of, luma_of
from readout.sighting.response import measured_response, power_response
from readout.sighting.spot import locate_spot
from readout.simulation.sensor import Sensor, expose
from readout.simulation.spot import Spot, spot_image

SHAPE = (96, 120)
SENSOR = Sensor(bits=8, gain_levels_per_electron=0.03, read_noise_electrons=6.0, black_levels=0.0)
FINE = replace(SENSOR, bits=12, gain_levels_per_electron=0.48)
SPOT = Spot(8.0, 1.6, background=400.0, contrast=5000.0)


def test_nothing_set_nothing_touched():
    pixels = np.arange(96 * 120, dtype=np.uint16).reshape(SHAPE)
    prepared = Preparation().prepare(pixels, 65535)
    assert prepared.levels is pixels
    assert prepared.unusable is None
    assert prepared.full_scale == 65535


class TestResponse:
    def test_a_power_law_and_back(self):
        """Exact: a table applied to the curve gives the light, to the rounding of its input."""
        light = np.linspace(0, 1, 1001)
        for gamma, black in ((0.45, 0.0), (0.45, 16.0), (2.2, 0.0), (1.0, 4.0)):
            levels = black + (1023 - black) * light**gamma
            table = power_response(gamma, 1023, black=black).table
            slope = np.gradient(table)
            found = np.interp(levels, np.arange(1024), table) / 1023
            assert np.abs(found - light).max() < slope.max() / 1023
            assert table[1023] == 1023
            assert np.all(np.diff(table) > 0)

    def test_a_measured_curve_is_the_true_one(self):
        """Eleven exposures of a camera that bends as light^0.45, from 2 % of the range up."""
        exposure_ms = np.geomspace(0.02, 1.0, 11) * 25
        levels = 4095 * (exposure_ms / 25) ** 0.45
        table = measured_response(exposure_ms, levels, 4095).table
        at = np.arange(math.ceil(levels[0]), 4096)
        true = 4095 * (at / 4095) ** (1 / 0.45)
        assert np.abs(table[at] - true).max() < 0.004 * 4095
        assert np.all(np.diff(table) > 0)

    def test_a_straight_camera_stays_straight(self):
        light = np.array([0.0, 1.0, 2.0, 5.0, 9.0])
        table = measured_response(light, 10 + 20 * light, 255).table
        assert np.diff(table) == pytest.approx(np.full(255, table[200] - table[199]), rel=1e-4)

    def test_an_uneven_spot_no_longer_moves_with_the_light(self):
        """A spot with a side lobe of 10 % on light that stays, gamma 0.45, 30 % more of its own:
        its centre of mass (scipy.ndimage) moves, and no longer once the curve is undone."""
        curve = Preparation(response=power_response(0.45, 4095))
        light = replace(SPOT, background=0.0, contrast=2700.0)
        lobe = replace(light, contrast=270.0)
        both = spot_image(SHAPE, 60.2, 47.7, light) + spot_image(SHAPE, 66.2, 47.7, lobe)
        places = {"bent": [], "straight": []}
        for brightness in (1.0, 1.3):
            bent = np.rint(4095 * ((brightness * both + 400.0) / 4095) ** 0.45).astype(np.uint16)
            for name, preparation in (("bent", Preparation()), ("straight", curve)):
                levels = preparation.prepare(bent, 4095).levels.astype(np.float64)
                levels -= np.median(levels)
                places[name].append(center_of_mass(levels)[1])
        assert abs(places["bent"][1] - places["bent"][0]) > 0.003
        assert abs(places["straight"][1] - places["straight"][0]) < 0.001
        truth = center_of_mass(both)[1]  # what the light itself has
        assert places["straight"] == pytest.approx([truth, truth], abs=0.002)

    def test_a_symmetric_spot_keeps_its_place_and_noise_its_measure(self):
        """Levels bent by 0.45 and rounded: once straight again, the place is right and the claimed
        sd covers the errors as ever."""
        rng = np.random.default_rng(4)
        curve = Preparation(response=power_response(0.45, 255))
        z = []
        for k in range(100):
            x, y = 60 + (k * 0.618034) % 1, 47 + k / 100
            electrons = spot_image(SHAPE, x, y, SPOT)
            straight = np.clip(0.04 * (rng.poisson(electrons) + rng.normal(0, 6, SHAPE)), 0, 255)
            bent = np.rint(255 * (straight / 255) ** 0.45).astype(np.uint8)
            prepared = curve.prepare(bent, 255)
            found = locate_spot(prepared.levels, full_scale=prepared.full_scale)
            z += [(found.x_px - x) / found.x_sd_px, (found.y_px - y) / found.y_sd_px]
        assert abs(np.mean(z)) < 4 / math.sqrt(200)
        assert 0.58 < np.mean(np.abs(z) < 1) < 0.80

    @pytest.mark.parametrize(
        ("light", "levels"),
        [([1, 2, 3], [10, 20, 30]), ([1, 2, 3, 4], [10, 20, 20, 30]), ([1, 2, 3, 4], [9, 5, 6, 7])],
    )
    def test_no_curve_through_bad_points(self, light, levels):
        with pytest.raises(BadInput):
            measured_response(light, levels, 255)


class TestMosaic:
    @pytest.mark.parametrize("mosaic", list(Mosaic))
    @pytest.mark.parametrize("colour", list(Colour))
    def test_the_plane_stands_where_it_says(self, mosaic, colour):
        """Exact: a ramp of the column (or row) number, sampled, gives the pixels' own places."""
        rows, columns = np.mgrid[:31, :43].astype(np.uint16)
        plane = Plane(mosaic, colour)
        x, y = plane.taken_from(columns), plane.taken_from(rows)
        assert np.array_equal(x, np.broadcast_to(plane.x0_px + 2 * np.arange(21), (15, 21)))
        assert np.array_equal(y.T, np.broadcast_to(plane.y0_px + 2 * np.arange(15), (21, 15)))

    @pytest.mark.parametrize("mosaic", list(Mosaic))
    def test_only_its_own_colour_is_in_it(self, mosaic):
        """OpenCV's own naming as the witness: its conversion of a mosaic of one colour shows that
        colour alone (cv2.COLOR_BayerRGGB2RGB and the others)."""
        for colour in Colour:
            raw = np.zeros((16, 16), np.uint8)
            for k, letter in enumerate(mosaic):
                raw[k // 2 :: 2, k % 2 :: 2] = 200 if letter == colour else 10
            code = getattr(cv2, f"COLOR_Bayer{mosaic}2RGB")
            channel = cv2.cvtColor(raw, code)[4:12, 4:12, "RGB".index(colour)]
            assert np.all(channel == 200)
            assert np.all(Plane(mosaic, colour).taken_from(raw) == 200)

    @pytest.mark.parametrize("colour", list(Colour))
    def test_a_spot_is_where_it_is(self, colour):
        """Seen through one colour of the mosaic; the other colours are all but dark."""
        rng = np.random.default_rng(5)
        preparation = Preparation(plane=Plane(Mosaic.GRBG, colour))
        spot = Spot(12.0, 3.0, background=400.0, contrast=5000.0)
        letters = np.tile(np.array([["G", "R"], ["B", "G"]]), (48, 60))
        for _ in range(4):
            x, y = 60 + rng.random(), 47 + rng.random()
            electrons = spot_image(SHAPE, x, y, spot) * np.where(letters == colour.value, 1.0, 0.1)
            prepared = preparation.prepare(expose(electrons, SENSOR, rng), 255)
            found = locate_spot(prepared.levels, full_scale=prepared.full_scale)
            in_frame = preparation.in_frame(found)
            assert abs(in_frame.x_px - x) < 4 * in_frame.x_sd_px < 0.1
            assert abs(in_frame.y_px - y) < 4 * in_frame.y_sd_px < 0.1

    def test_there_and_back(self):
        preparation = Preparation(plane=Plane(Mosaic.RGGB, Colour.BLUE))
        arm = Arm(1.0, 5.0, 100.0, 10.0, line_px=4.0, blur_px=1.5)
        other = Return(3.0, 4.0, (0.02, 0.0, 0.02), 0.3)
        sighting = Sighting(10.25, 7.5, (0.01, 0.002, 0.03), Quality.OK, arm, arm, 200.0, (other,))
        frame = preparation.in_frame(sighting)
        assert (frame.x_px, frame.y_px) == (21.5, 16.0)
        assert frame.cov_px2 == pytest.approx((0.04, 0.008, 0.12))
        assert frame.upright == replace(arm, width_px=10.0, line_px=8.0, blur_px=3.0)
        assert frame.others == (Return(7.0, 9.0, (0.08, 0.0, 0.08), 0.3),)
        assert preparation.in_prepared(frame) == sighting

    def test_a_saturated_green_is_not_hidden_by_its_neighbour(self):
        raw = np.full((8, 8), 100, np.uint8)
        raw[2, 3] = 255
        prepared = Preparation(plane=Plane(Mosaic.RGGB)).prepare(raw, 255)
        assert prepared.levels[1, 1] >= prepared.full_scale
        assert np.count_nonzero(prepared.levels >= prepared.full_scale) == 1


class TestSamples:
    def test_the_luma_is_taken_as_it_is(self):
        """OpenCV packs: BGR to YUYV and UYVY; its own Y (cv2.COLOR_BGR2YUV) is the truth."""
        rng = np.random.default_rng(6)
        picture = np.repeat(rng.integers(0, 256, (12, 16, 1), dtype=np.uint8), 3, axis=2)
        y = cv2.cvtColor(picture, cv2.COLOR_BGR2YUV)[:, :, 0]
        for order, first in (("YUYV", 0), ("UYVY", 1)):
            packed = np.full((12, 16, 2), 128, np.uint8)
            packed[:, :, first] = y
            assert np.array_equal(luma_of(packed, order), y)
            back = cv2.cvtColor(packed, getattr(cv2, f"COLOR_YUV2GRAY_{order}"))
            assert np.array_equal(back, y)
        with pytest.raises(BadInput):
            luma_of(packed, "NV12")

    @pytest.mark.parametrize(
        ("bits", "shift"), [(10, 0), (12, 0), (16, 0), (10, 6), (12, 4), (14, 2)]
    )
    def test_depth_and_place_of_the_bits(self, bits, shift):
        rng = np.random.default_rng(7)
        samples = rng.integers(0, 2**bits, SHAPE).astype(np.uint16) << shift
        assert depth_of(samples) == Depth(bits, shift)
        prepared = Preparation(shift=shift).prepare(samples, 2**bits - 1)
        assert np.array_equal(prepared.levels, samples >> shift)

    def test_saturation_below_full_scale(self):
        rng = np.random.default_rng(8)
        spot = replace(SPOT, contrast=9000.0)
        for level in (235, 250, 255):
            pixels = np.minimum(expose(spot_image(SHAPE, 60, 48, spot), SENSOR, rng), level)
            assert saturation_level(pixels.astype(np.uint8), 255) == level
        fine = np.minimum(expose(spot_image(SHAPE, 60, 48, spot), FINE, rng), 3760)
        assert saturation_level(fine.astype(np.uint16), 4095) == 3760

    def test_no_saturation_where_there_is_none(self):
        rng = np.random.default_rng(9)
        for contrast in (2000.0, 6500.0, 7400.0):
            pixels = expose(
                spot_image(SHAPE, 60, 48, replace(SPOT, contrast=contrast)), SENSOR, rng
            )
            assert saturation_level(pixels, 255) is None
        ground = np.clip(rng.normal(215, 4, SHAPE), 0, 255).astype(np.uint8)
        assert saturation_level(ground, 255) is None
        assert saturation_level(np.zeros(SHAPE, np.uint8), 255) is None

    def test_a_clipped_spot_is_right_and_said_to_be_saturated(self):
        """A sensor that clips at 235: unknown, the flat top is taken for the spot's own; known, it
        is left out."""
        rng = np.random.default_rng(10)
        preparation = Preparation(saturation=235)
        errors = []
        for k in range(40):
            x = 60 + k / 40
            electrons = spot_image(SHAPE, x, 47.7, replace(SPOT, contrast=11000.0))
            pixels = np.minimum(expose(electrons, SENSOR, rng), 235).astype(np.uint8)
            prepared = preparation.prepare(pixels, 255)
            found = locate_spot(prepared.levels, full_scale=prepared.full_scale)
            assert Quality.SATURATED in found.quality
            errors.append((found.x_px - x) / found.x_sd_px)
        assert np.sqrt(np.mean(np.square(errors))) < 1.4


class TestDark:
    def test_hot_and_dead_pixels_are_those_planted(self):
        rng = np.random.default_rng(11)
        frames = [
            np.clip(np.rint(rng.normal(12, 1.5, SHAPE)), 0, 255).astype(np.uint8) for _ in range(16)
        ]
        planted = np.zeros(SHAPE, bool)
        planted[rng.integers(0, 96, 30), rng.integers(0, 120, 30)] = True
        for k, frame in enumerate(frames):
            frame[planted] = 12 + rng.integers(20, 200)
            frame[5, 5] = 0
            frame[50, 60] = 12 + 9 * (-1) ** k  # unsteady about the right mean
        planted[5, 5] = planted[50, 60] = True
        assert np.array_equal(defective_pixels(frames), planted)

    def test_a_subtracted_frame_takes_out_what_is_fixed(self):
        """A bright fixed line beside the spot, seen alone with the mirror covered."""
        rng = np.random.default_rng(12)
        columns = np.arange(120.0)[None, :] * np.ones((96, 1))
        fixed = 1500.0 * np.exp(-((columns - 66.0) ** 2) / 2 / 2.0**2)
        covered = [expose(fixed, SENSOR, rng) for _ in range(32)]
        preparation = Preparation().with_fixed(covered)
        electrons = spot_image(SHAPE, 60.3, 47.8, SPOT) + fixed
        prepared = preparation.prepare(expose(electrons, SENSOR, rng), 255)
        found = locate_spot(prepared.levels, full_scale=prepared.full_scale)
        assert abs(found.x_px - 60.3) < 4 * found.x_sd_px < 0.08
        assert prepared.levels.mean() == pytest.approx(
            0.03 * spot_image(SHAPE, 60.3, 47.8, SPOT).mean(), abs=0.1
        )

    def test_the_mean_of_n_frames_has_the_noise_it_says(self):
        rng = np.random.default_rng(13)
        frames = [np.rint(rng.normal(1000, 20, SHAPE)).astype(np.uint16) for _ in range(25)]
        mean = mean_frame(frames)
        assert mean.std() == pytest.approx(20 / 5, rel=0.03)

    def test_dark_and_curve_together(self):
        """The dark level is subtracted in levels in proportion to the light."""
        curve = power_response(0.5, 255)
        raw = np.full((4, 4), 100, np.uint8)
        dark = [np.full((4, 4), 20, np.uint8)]
        prepared = Preparation(response=curve).with_dark(dark).prepare(raw, 255)
        assert prepared.levels == pytest.approx(
            255 * ((100 / 255) ** 2 - (20 / 255) ** 2), rel=1e-5
        )

    def test_the_wrong_size_is_said(self):
        preparation = Preparation().with_dark([np.zeros((4, 6), np.uint8)])
        with pytest.raises(BadInput, match=r"6x4.*120x96"):
            preparation.prepare(np.zeros(SHAPE, np.uint8), 255)
        with pytest.raises(BadInput, match=r"up to 255.*4095"):
            Preparation(response=power_response(0.45, 255)).prepare(
                np.zeros(SHAPE, np.uint16), 4095
            )
        with pytest.raises(BadInput):
            mean_frame([])
