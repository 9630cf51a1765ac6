"""The position of a spot against known truth: bias, spread and honesty are three assertions."""

from dataclasses import replace

import cv2
import numpy as np
import pytest
import skimage.data
from photutils.centroids import centroid_2dg, centroid_quadratic
from scipy.special import chndtr

from readout.model import Quality
from readout.sighting.disc import disc_profile, half_maximum
from readout.sighting.spot import locate_spot
from readout.sighting.spot_model import SpotShape, Window, columns_of, state_of
from readout.simulation.crosshair import Crosshair, crosshair_image
from readout.simulation.sensor import Sensor, expose
from readout.simulation.spot import Spot, spot_bound_cov, spot_image
from tests.sighting import search_scenes

SHAPE = (96, 104)
SENSOR = Sensor(bits=8, gain_levels_per_electron=0.03, read_noise_electrons=6.0)
FINE = Sensor(bits=16, gain_levels_per_electron=0.077, read_noise_electrons=6.0)
FRAMES = 400
PHASES = 50


def gaussian(blur_px, height=6000.0):
    """A spot without a disc, ``height`` electrons in its middle."""
    return Spot(0.02, blur_px, contrast=height * 8 * blur_px**2 / 0.02**2)


def bound_sd(spot, sensor=SENSOR):
    """Cramer-Rao bound of x and y with ground, slopes, height, disc, blur and shape free."""
    return np.sqrt(np.diag(spot_bound_cov(SHAPE, 50.3, 45.4, spot, sensor)))


def added(first, *others):
    """Light of several spots on one ground, each (spot, x, y)."""
    spot, x, y = first
    light = spot_image(SHAPE, x, y, spot)
    for spot, x, y in others:
        light = light + spot_image(SHAPE, x, y, replace(spot, background=0.0))
    return light


@pytest.mark.parametrize(
    ("spot", "seed", "words"),
    [
        (gaussian(2.0), 1, []),
        (Spot(4.0, 1.3), 2, []),
        (Spot(10.0, 1.3), 3, []),
        (replace(gaussian(1.5), elongation=1.35, rotation_deg=-50), 4, ["astigmatic"]),
        (Spot(4.0, 1.3, background=900, contrast=900), 5, ["dim"]),
    ],
)
def test_bias_spread_and_honesty(spot, seed, words):
    """800 errors know their rms to 2.5 %; over 2000 it is 0.98 to 1.03 of the bound."""
    rng = np.random.default_rng(seed)
    errors, claims = [], []
    for k in range(PHASES):
        x, y = 50 + (k * 0.618034) % 1.0, 45 + k / PHASES
        electrons = spot_image(SHAPE, x, y, spot)
        for _ in range(FRAMES // PHASES):
            found = locate_spot(expose(electrons, SENSOR, rng), full_scale=SENSOR.full_scale)
            # By chance one frame in some hundred is called lopsided, and a dim one is just not dim.
            assert set(found.quality.words()) <= {*words, "several_returns"}
            errors.append((found.x_px - x, found.y_px - y))
            claims.append((found.x_sd_px, found.y_sd_px))
    errors, claims, bound = np.array(errors), np.array(claims), bound_sd(spot)
    ratio = np.sqrt(((errors / bound) ** 2).mean())
    assert 0.92 < ratio < 1.10
    assert np.all(np.abs(errors.mean(axis=0)) < 0.0005 + 4 * bound / np.sqrt(FRAMES))
    assert 0.62 <= np.mean(np.abs(errors) <= claims) <= 0.77
    assert claims.mean(axis=0) == pytest.approx(bound, rel=0.12)


@pytest.mark.parametrize(
    "spot", [gaussian(0.7), gaussian(1.5), Spot(4.0, 0.7), Spot(12.0, 1.3), Spot(5.0, 1.0)]
)
def test_no_bias_goes_with_the_sub_pixel_phase(spot):
    """Sixteen bits and no noise: what is left is the method's own error."""
    bright = replace(spot, background=40000.0, contrast=100 * spot.contrast)
    errors = []
    for k in range(32):
        x, y = 50 + k / 32, 45 + (7 * k % 32) / 32
        levels = FINE.mean_levels(spot_image(SHAPE, x, y, bright))
        found = locate_spot(FINE.quantise(levels), full_scale=FINE.full_scale)
        errors.append((found.x_px - x, found.y_px - y))
    assert np.abs(errors).max() < 0.0002


def test_mirroring_the_picture_mirrors_the_position():
    """An exact property: it pins the origin at the centre of the top-left pixel."""
    spot = replace(Spot(5.0, 1.4), elongation=1.2, rotation_deg=20)
    pixels = expose(spot_image(SHAPE, 41.3, 57.8, spot), SENSOR, np.random.default_rng(15))
    found = locate_spot(pixels, full_scale=255)
    sides = locate_spot(np.ascontiguousarray(pixels[:, ::-1]), full_scale=255)
    swapped = locate_spot(np.ascontiguousarray(pixels.T), full_scale=255)
    near = 0.1 * found.x_sd_px
    assert sides.x_px == pytest.approx(SHAPE[1] - 1 - found.x_px, abs=near)
    assert sides.y_px == pytest.approx(found.y_px, abs=near)
    assert (swapped.x_px, swapped.y_px) == pytest.approx((found.y_px, found.x_px), abs=near)


class TestModel:
    @pytest.mark.parametrize("edge", [0.3, 1.013, 2.5, 8.0, 20.0])
    def test_the_table_is_the_profile(self, edge):
        """scipy.special.chndtr, the distribution itself, and differences of it."""
        r = np.linspace(0, edge + 9, 3001)
        true = chndtr(edge**2, 2.0, r**2) / -np.expm1(-(edge**2) / 2)
        found = disc_profile(r, edge)
        assert np.abs(found.value - true).max() < 3e-5
        assert np.abs(found.by_r_over_r * r - np.gradient(true, r)).max() < 4e-3
        by_edge = disc_profile(r, edge + 0.01).value - disc_profile(r, edge - 0.01).value
        assert np.abs(found.by_edge - by_edge / 0.02).max() < 4e-3
        assert disc_profile(np.array([half_maximum(edge)]), edge).value[0] == pytest.approx(
            0.5, abs=0.005
        )

    def test_the_derivatives_are_those_of_the_model(self):
        shape = SpotShape(7.3, 6.8, 10.0, 0.1, -0.2, 100.0, (6.0, 1.1, 4.0), 2.3)
        columns = columns_of(Window(np.zeros((15, 16)), np.ones((15, 16), bool), 0, 0, 1), shape)
        at = np.array([10.0, 0.1, -0.2, 100.0, 7.3, 6.8, 6.0, 1.1, 4.0, 2.3])

        def model(p):
            moved = SpotShape(p[4], p[5], p[0], p[1], p[2], p[3], tuple(p[6:9]), p[9])
            return state_of(columns, moved).model

        jacobian = state_of(columns, shape).jacobian
        for k, step in enumerate(np.eye(10) * 1e-3):
            numeric = (model(at + step) - model(at - step)) / 2e-3
            assert np.abs(numeric - jacobian[k]).max() < 4e-3 * np.abs(jacobian[k]).max(), k


class TestDirt:
    """What real cameras add: each kind by itself, against the claim and the truth."""

    def errors(self, spot, seed, *, light=None, finish=None, n=60):
        rng = np.random.default_rng(seed)
        z, errors = [], []
        for k in range(n):
            x, y = 50 + (k * 0.618034) % 1, 45 + k / n
            electrons = spot_image(SHAPE, x, y, spot)
            pixels = expose(electrons if light is None else light(electrons), SENSOR, rng)
            found = locate_spot(pixels if finish is None else finish(pixels, rng), full_scale=255)
            assert found.found
            errors += [found.x_px - x, found.y_px - y]
            z += [errors[-2] / found.x_sd_px, errors[-1] / found.y_sd_px]
        return np.array(errors), np.array(z)

    @pytest.mark.parametrize("spot", [gaussian(2.0), Spot(10.0, 1.5), Spot(4.0, 1.3)])
    def test_hot_pixels_fixed_pattern_dust_and_vignetting(self, spot):
        rng = np.random.default_rng(98)
        rows, columns = np.mgrid[: SHAPE[0], : SHAPE[1]]
        pattern = rng.normal(1, 0.01, SHAPE)
        for _ in range(10):
            x, y, size = rng.uniform(0, SHAPE[1]), rng.uniform(0, SHAPE[0]), rng.uniform(1, 3)
            pattern *= 1 - 0.4 * np.exp(-((columns - x) ** 2 + (rows - y) ** 2) / 2 / size**2)
        pattern *= 1 - 0.3 * ((columns - 52) ** 2 / 52**2 + (rows - 48) ** 2 / 48**2) / 2

        def hot(pixels, rng):
            pixels = pixels.copy()
            pixels[rng.integers(30, 62, 12), rng.integers(35, 67, 12)] = 255
            return pixels

        errors, z = self.errors(spot, 31, light=lambda light: light * pattern, finish=hot)
        assert np.sqrt(np.mean(errors**2)) < 1.3 * bound_sd(spot).mean()
        assert np.abs(z).max() < 5
        assert np.mean(np.abs(z) < 1) > 0.55

    def test_compression(self):
        def compressed(pixels, rng):
            return cv2.imdecode(cv2.imencode(".jpg", pixels, [1, 90])[1], cv2.IMREAD_GRAYSCALE)

        errors, z = self.errors(Spot(10.0, 1.5), 32, finish=compressed)
        assert np.sqrt(np.mean(errors**2)) < 1.5 * bound_sd(Spot(10.0, 1.5)).mean()
        assert np.mean(np.abs(z) < 1) > 0.6

    def test_noise_that_goes_from_pixel_to_pixel_is_not_averaged_away(self):
        """Noise smoothed by a Gaussian of 0.8 px: taken for independent, 40 % were within one."""
        rng = np.random.default_rng(33)
        sensor = Sensor(12, gain_levels_per_electron=0.48, read_noise_electrons=6.0)
        z = []
        for k in range(80):
            x, y = 50 + (k * 0.618034) % 1, 45 + k / 80
            light = spot_image(SHAPE, x, y, Spot(10.0, 1.5))
            noise = rng.poisson(light) + rng.normal(0, 6.0, SHAPE) - light
            smooth = cv2.GaussianBlur(noise, (0, 0), 0.8)
            pixels = sensor.quantise(sensor.mean_levels(light + smooth))
            found = locate_spot(pixels, full_scale=4095)
            z += [(found.x_px - x) / found.x_sd_px, (found.y_px - y) / found.y_sd_px]
        assert 0.5 < np.mean(np.abs(z) < 1) < 0.8

    @pytest.mark.parametrize("times", [1.7, 4.0])
    def test_a_saturated_top_is_left_out(self, times):
        rng = np.random.default_rng(34)
        spot = replace(Spot(8.0, 1.6), contrast=times * 6000)
        z = []
        for k in range(60):
            x, y = 50 + (k * 0.618034) % 1, 45 + k / 60
            found = locate_spot(expose(spot_image(SHAPE, x, y, spot), SENSOR, rng), full_scale=255)
            assert Quality.SATURATED in found.quality
            z += [(found.x_px - x) / found.x_sd_px, (found.y_px - y) / found.y_sd_px]
        assert 0.55 < np.mean(np.abs(z) < 1) < 0.82

    def test_defective_pixels_given_are_not_looked_at(self):
        rng = np.random.default_rng(35)
        pixels = expose(spot_image(SHAPE, 50.3, 45.4, Spot()), SENSOR, rng)
        unusable = np.zeros(SHAPE, bool)
        unusable[43:46, 52:54] = True
        spoilt = pixels.copy()
        spoilt[unusable] = 120
        found = locate_spot(spoilt, full_scale=255, unusable=unusable)
        assert abs(found.x_px - 50.3) < 4 * found.x_sd_px < 0.05
        assert found.quality is Quality.OK
        other = spoilt.copy()
        other[unusable] = 90
        again = locate_spot(other, full_scale=255, unusable=unusable)
        assert again.x_px == pytest.approx(found.x_px, abs=0.2 * found.x_sd_px)


class TestReturns:
    def test_the_highest_of_several_is_the_main_one_and_the_others_are_told(self):
        rng = np.random.default_rng(41)
        for _ in range(5):
            x, y = 30 + rng.random(), 40 + rng.random()
            fainter = replace(Spot(6.0, 1.5), contrast=3000.0)
            light = added((Spot(6.0, 1.5), x, y), (fainter, x + 32.2, y + 14.6))
            found = locate_spot(expose(light, SENSOR, rng), full_scale=255)
            assert found.quality is Quality.SEVERAL_RETURNS
            assert abs(found.x_px - x) < 5 * found.x_sd_px < 0.1
            (other,) = found.others
            assert abs(other.x_px - x - 32.2) < 5 * np.sqrt(other.cov_px2[0]) < 0.1
            assert abs(other.y_px - y - 14.6) < 5 * np.sqrt(other.cov_px2[2]) < 0.1
            assert other.share == pytest.approx(0.5, abs=0.05)

    def test_a_faint_ghost_is_no_rival_and_does_no_harm(self):
        rng = np.random.default_rng(42)
        ghost = replace(Spot(4.0, 1.3), contrast=300.0)
        for _ in range(20):
            x, y = 45 + rng.random(), 45 + rng.random()
            light = added((Spot(4.0, 1.3), x, y), (ghost, x + 17, y + 3))
            found = locate_spot(expose(light, SENSOR, rng), full_scale=255)
            assert Quality.SEVERAL_RETURNS not in found.quality
            assert abs(found.x_px - x) < 4 * found.x_sd_px < 0.06

    def test_what_lies_on_the_flank_unresolved_is_not_passed_over(self):
        rng = np.random.default_rng(43)
        ghost = replace(Spot(4.0, 1.3), contrast=1500.0)
        for _ in range(20):
            x, y = 45 + rng.random(), 45 + rng.random()
            light = added((Spot(4.0, 1.3), x, y), (ghost, x + 4, y))
            found = locate_spot(expose(light, SENSOR, rng), full_scale=255)
            assert found.quality is not Quality.OK

    def test_while_tracking_the_one_that_was_stays_the_main_one(self):
        rng = np.random.default_rng(44)
        twin = replace(Spot(6.0, 1.5), contrast=6300.0)
        alone = expose(spot_image(SHAPE, 30.0, 45.0, Spot(6.0, 1.5)), SENSOR, rng)
        last = locate_spot(alone, full_scale=255)
        for k in range(5):
            light = added((Spot(6.0, 1.5), 30.0 + k, 45.0), (twin, 65.0, 50.0))
            last = locate_spot(expose(light, SENSOR, rng), full_scale=255, prior=last)
            assert abs(last.x_px - 30.0 - k) < 5 * last.x_sd_px < 0.1
            assert Quality.SEVERAL_RETURNS in last.quality


class TestTracking:
    def test_a_prior_changes_nothing_but_the_time(self):
        rng = np.random.default_rng(51)
        big = (300, 400)
        before = locate_spot(
            expose(spot_image(big, 150.0, 110.0, Spot()), SENSOR, rng), full_scale=255
        )
        pixels = expose(spot_image(big, 153.4, 108.1, Spot()), SENSOR, rng)
        alone = locate_spot(pixels, full_scale=255)
        helped = locate_spot(pixels, full_scale=255, prior=before)
        assert helped.tracked == 1
        assert helped.x_px == pytest.approx(alone.x_px, abs=0.1 * alone.x_sd_px)
        assert helped.y_px == pytest.approx(alone.y_px, abs=0.1 * alone.y_sd_px)

    def test_only_pixels_near_the_prior_are_touched(self):
        """Beyond 100 px everything else in the frame may be anything."""
        rng = np.random.default_rng(52)
        pixels = expose(spot_image((400, 500), 150.0, 110.0, Spot()), SENSOR, rng)
        prior = locate_spot(pixels, full_scale=255)
        changed = rng.integers(0, 256, (400, 500), dtype=np.uint8)
        changed[10:211, 50:251] = pixels[10:211, 50:251]
        assert locate_spot(changed, full_scale=255, prior=prior) == locate_spot(
            pixels, full_scale=255, prior=prior
        )

    def test_a_wrong_prior_does_no_harm(self):
        rng = np.random.default_rng(53)
        big = (300, 400)
        elsewhere = locate_spot(
            expose(spot_image(big, 60.0, 50.0, Spot()), SENSOR, rng), full_scale=255
        )
        pixels = expose(spot_image(big, 350.0, 250.0, Spot()), SENSOR, rng)
        found = locate_spot(pixels, full_scale=255, prior=elsewhere)
        assert (found.x_px, found.y_px) == pytest.approx((350.0, 250.0), abs=0.04)


class TestWords:
    def test_no_spot_no_position(self):
        rng = np.random.default_rng(61)
        flat = np.full(SHAPE, 40, np.uint8)
        for pixels in (flat, flat * 0, flat * 0 + 255, flat[:1], flat[:0], flat[:4, :4]):
            assert locate_spot(pixels, full_scale=255).quality is Quality.NO_IMAGE
        for mean, sd in ((60, 8), (16.4, 0.2), (16, 0.6), (3000, 30)):
            noise = rng.normal(mean, sd, (240, 320))
            levels = np.clip(np.rint(noise), 0, 65535).astype(np.uint16)
            assert locate_spot(levels, full_scale=65535).quality is Quality.NO_IMAGE

    @pytest.mark.filterwarnings("error")
    def test_anything_at_all_may_be_in_it(self):
        rng = np.random.default_rng(66)
        pictures = [np.full(SHAPE, np.nan), np.zeros((5, 5, 3), np.uint8)]
        spot = expose(spot_image(SHAPE, 50.2, 45.1, Spot()), SENSOR, rng)
        pictures += [np.where(spot > 150, np.nan, spot), spot[::2, ::2], spot.T, spot[:, :12]]
        for _ in range(40):
            height, width = rng.integers(1, 70, 2)
            sparks = 255 * (rng.random((height, width)) < 0.02).astype(np.uint8)
            grain = cv2.GaussianBlur(sparks, (0, 0), float(rng.uniform(0.5, 4)))
            bars = 200 * np.outer(np.arange(height) % 7 < 3, np.arange(width) % 5 < 2)
            pictures += [sparks, grain, bars.astype(np.uint8)]
        for picture in pictures:
            found = locate_spot(picture, full_scale=255)
            assert found.found or found.quality is Quality.NO_IMAGE
            assert locate_spot(picture, full_scale=255, prior=found).found == found.found

    @pytest.mark.parametrize(
        "name", ["upright", "turned", "short", "round_field", "border", "returns", "fixed", "scale"]
    )
    def test_no_crosshair_passes_for_a_spot(self, name):
        for k in range(8):
            scene = search_scenes.KINDS[name](np.random.default_rng((62, k)))
            found = locate_spot(scene.pixels, full_scale=255)
            assert not found.found or Quality.SEVERAL_RETURNS in found.quality

    def test_a_crossing_brighter_than_its_arms_is_no_spot(self):
        rng = np.random.default_rng(63)
        cross = Crosshair(line_px=5.0, blur_px=1.3, half_length_px=40.0)
        light = crosshair_image(SHAPE, 50.2, 45.4, cross)
        both = light + spot_image(SHAPE, 50.2, 45.4, Spot(5.0, 1.3, background=0, contrast=4000))
        found = locate_spot(expose(both, SENSOR, rng), full_scale=SENSOR.full_scale)
        assert found.quality is not Quality.OK

    @pytest.mark.parametrize("name", ["page", "texture", "noise_only"])
    def test_no_page_or_texture_passes_for_a_spot(self, name):
        for k in range(8):
            pixels = search_scenes.EMPTY[name](np.random.default_rng((64, k)))
            found = locate_spot(pixels, full_scale=255)
            assert not found.found or Quality.SEVERAL_RETURNS in found.quality

    def test_no_picture_of_other_things_passes_for_a_spot(self):
        """Pictures that scikit-image ships: coins, text, a page, cells, the moon, gravel."""
        for name in ("coins", "text", "page", "cell", "moon", "gravel", "camera", "clock"):
            picture = getattr(skimage.data, name)()
            found = locate_spot(np.ascontiguousarray(picture), full_scale=255)
            assert not found.found or Quality.SEVERAL_RETURNS in found.quality, name

    def test_at_edge_and_blurred(self):
        rng = np.random.default_rng(65)
        edge = locate_spot(
            expose(spot_image(SHAPE, 3.3, 45.0, Spot(4.0, 1.3)), SENSOR, rng), full_scale=255
        )
        assert edge.quality is Quality.AT_EDGE
        assert abs(edge.x_px - 3.3) < 5 * edge.x_sd_px < 0.1
        wide = expose(spot_image((400, 500), 240.4, 199.7, gaussian(14.0)), SENSOR, rng)
        blurred = locate_spot(wide, full_scale=SENSOR.full_scale)
        assert blurred.quality is Quality.BLURRED
        assert abs(blurred.x_px - 240.4) < 5 * blurred.x_sd_px < 0.2


def test_real_stars_against_independent_centroids():
    """Stars of the Hubble deep field (the picture by NASA that scikit-image ships,
    skimage.data.hubble_deep_field) against photutils.centroids: a Gaussian fitted in two dimensions
    and a parabola through the peak. Round things that stand alone are taken.

    The two fits see the same pixels, so they ought to agree within the sd that one of them claims
    (photutils claims none); what was seen is 0.6 of it rms. A parabola through 5 by 5 pixels is no
    model of a star a few pixels wide: a fifth of a pixel is granted to it.
    """
    grey = cv2.cvtColor(skimage.data.hubble_deep_field(), cv2.COLOR_RGB2GRAY)
    half, core = 16, 7
    smooth = cv2.GaussianBlur(grey, (0, 0), 1.5)
    peaks = (smooth == cv2.dilate(smooth, np.ones((25, 25), np.uint8))) & (smooth > 50)
    peaks[:half] = peaks[-half:] = peaks[:, :half] = peaks[:, -half:] = False
    stars = {}
    for y, x in zip(*np.nonzero(peaks), strict=True):
        part = np.ascontiguousarray(grey[y - half : y + half + 1, x - half : x + half + 1])
        found = locate_spot(part, full_scale=255)
        if found.quality & ~Quality.DIM or np.hypot(found.x_px - half, found.y_px - half) > 2:
            continue
        near = part[half - core : half + core + 1, half - core : half + core + 1]
        near = near - np.median(part)
        place = np.array([found.x_px, found.y_px]) + core - half
        off = np.array([centroid_2dg(near) - place, centroid_quadratic(near) - place])
        stars[round(x + found.x_px), round(y + found.y_px)] = (
            off[0] / (found.x_sd_px, found.y_sd_px),
            off[1],
        )
    assert len(stars) > 40
    in_sds = np.array([by_sd for by_sd, _ in stars.values()])
    parabola_px = np.array([off for _, off in stars.values()])
    assert np.abs(in_sds).max() < 3
    assert np.sqrt(np.mean(in_sds**2)) < 1
    assert np.sqrt(np.mean(parabola_px**2)) < 0.2
    assert np.abs(parabola_px.mean(axis=0)).max() < 3 * 0.2 / np.sqrt(len(stars))
