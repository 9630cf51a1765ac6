"""Each blemish by what defines it: its mean, its size, its place, its repeatability."""

from __future__ import annotations

import math

import numpy as np
import pytest

from readout.simulation import Crosshair, crosshair_image
from readout.simulation.blemishes import (
    dust,
    graduated_scale,
    hot_pixels,
    pixel_response,
    second_return,
    slope,
    uneven_light,
    vignetting,
)
from readout.simulation.response import display_encoded

SHAPE = (121, 201)


@pytest.mark.parametrize("make", [dust, hot_pixels, pixel_response])
def test_the_same_generator_gives_the_same_blemish(make) -> None:
    one, two, other = (make(SHAPE, np.random.default_rng(seed)) for seed in (61, 61, 62))
    np.testing.assert_array_equal(one, two)
    assert np.any(one != other)
    assert one.shape == SHAPE


def test_grains_of_dust_are_soft_discs_of_their_depth() -> None:
    """An edge blurred by s, here a quarter of the radius R, makes the area pi (R^2 + s^2).

    600 shallow grains, so that overlaps do not count; half a per cent is lost at the border.
    """
    dusty = dust(
        (1000, 1000), np.random.default_rng(63), n=600, radius_px=(4.0, 4.0), depth=(1e-4, 1e-4)
    )
    area = math.pi * (4.0**2 + 1.0**2)
    assert (1 - dusty).sum() == pytest.approx(600 * 1e-4 * area, rel=0.015)
    deep = dust((400, 400), np.random.default_rng(63), n=30, depth=(0.4, 0.4))
    assert 0.6**3 - 1e-9 < deep.min() < 0.6 + 1e-3
    assert deep.max() == pytest.approx(1.0, abs=1e-9)


def test_pixel_response_has_its_spread() -> None:
    """40 000 values know their sd to 0.35 %."""
    response = pixel_response((200, 200), np.random.default_rng(64), sd=0.01)
    assert response.mean() == pytest.approx(1.0, abs=4 * 0.01 / 200)
    assert response.std() == pytest.approx(0.01, rel=4 * 0.0035)


def test_vignetting_is_one_in_the_middle_and_what_was_asked_in_the_corner() -> None:
    shade = vignetting(SHAPE, corner=0.4)
    assert shade[60, 100] == 1.0
    assert shade[[0, 0, -1, -1], [0, -1, 0, -1]] == pytest.approx(0.4, rel=1e-12)
    assert np.all(np.diff(shade[60, 100:]) < 0)


@pytest.mark.parametrize(("direction_deg", "brightest"), [(0.0, (60, 200)), (90.0, (120, 100))])
def test_uneven_light_rises_where_it_is_told(
    direction_deg: float, brightest: tuple[int, int]
) -> None:
    light = uneven_light(SHAPE, depth=0.3, direction_deg=direction_deg)
    assert light[brightest] == pytest.approx(1.3)
    assert light[60, 100] == pytest.approx(1.0)
    assert light.min() == pytest.approx(0.7)


def test_hot_pixels_are_as_many_and_as_hot_as_asked() -> None:
    """Binomial: 400 expected of 400 000, known to 20."""
    hot = hot_pixels((500, 800), np.random.default_rng(65), share=1e-3, electrons=(500.0, 900.0))
    n = np.count_nonzero(hot)
    assert abs(n - 400) < 4 * 20
    assert 500 <= hot[hot > 0].min() <= hot.max() <= 900


def test_a_slope_is_a_plane() -> None:
    plane = slope(SHAPE, along_x=50.0, along_y=-20.0)
    assert plane[60, 100] == pytest.approx(0.0)
    assert plane[0, -1] == pytest.approx(70.0)
    assert np.abs(np.diff(plane, 2, axis=0)).max() < 1e-11
    assert np.abs(np.diff(plane, 2, axis=1)).max() < 1e-11


def test_a_second_return_is_the_reticle_again_without_its_ground() -> None:
    crosshair = Crosshair(rotation_deg=3.0, level_contrast=2000.0)
    again = second_return(SHAPE, 90.2, 55.1, crosshair, strength=0.05, offset_px=(17.0, -11.0))
    there = crosshair_image(SHAPE, 107.2, 44.1, crosshair)
    np.testing.assert_allclose(again, 0.05 * (there - crosshair.background), atol=1e-9)


def test_a_scale_lies_where_it_is_put_and_repeats() -> None:
    scale = graduated_scale(SHAPE, at_px=60.4, pitch_px=20.0, first_px=10.0)
    rows = np.arange(SHAPE[0])
    between = scale[:, 20]  # no graduation: the long line alone
    assert (rows * between).sum() / between.sum() == pytest.approx(60.4, abs=1e-6)
    np.testing.assert_allclose(scale[:, 0:100], scale[:, 100:200], atol=1e-12)  # five pitches
    assert scale.min() >= 0
    assert scale.max() <= 1
    covered = math.erf(1.0 / math.sqrt(2 * (1.0 + 1 / 12)))  # middle of a line 2 px wide
    assert scale[70, 10] == pytest.approx(covered, rel=0.02)  # every fifth reaches 12 px
    assert scale[70, 30] < 0.01  # the others 6


def test_an_upright_scale_is_a_level_one_transposed() -> None:
    level = graduated_scale((90, 140), at_px=33.0)
    np.testing.assert_array_equal(level.T, graduated_scale((140, 90), at_px=33.0, upright=True))


def test_the_display_curve() -> None:
    """Ends stay, half light becomes 255 * 0.5^0.45 = 186.67, and the inverse brings it back."""
    linear = np.arange(4096, dtype=np.uint16).reshape(64, 64)
    shown = display_encoded(linear, 4095)
    assert shown.dtype == np.uint8
    assert (shown[0, 0], shown[-1, -1], shown.ravel()[2048]) == (0, 255, 187)
    assert np.all(np.diff(shown.ravel().astype(int)) >= 0)
    back = 4095 * (shown / 255.0) ** (1 / 0.45)
    step = 4095 / 0.45 / 255 * (np.maximum(shown, 1) / 255.0) ** (1 / 0.45 - 1)
    assert np.all(np.abs(back - linear) <= 0.5 * step + 1)
