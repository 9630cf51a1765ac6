"""The noise-free picture against integrals and renderings that share none of its code."""

from __future__ import annotations

import math
from dataclasses import replace

import numpy as np
import pytest
from scipy.integrate import dblquad
from scipy.ndimage import gaussian_filter

from readout.simulation import Crosshair, crosshair_image
from readout.simulation.bar import LEAST_BLUR_PX

BARE = {"background": 0.0, "contrast": 1.0}


def point_brightness(x: float, y: float, c: Crosshair) -> float:
    """The picture's definition at a point, for like arms: math.erf, no scipy."""
    up, level = math.radians(c.rotation_deg), math.radians(c.rotation_deg + c.skew_deg)

    def within(distance: float, half: float) -> float:
        edge = math.sqrt(2) * c.blur_px
        return 0.5 * (math.erf((distance + half) / edge) - math.erf((distance - half) / edge))

    def between_ends(distance: float) -> float:
        return within(distance, c.half_length_px) - within(distance, c.gap_px)

    def cut(distance: float) -> float:
        half = c.line_px / 2
        return within(distance, half) - within(distance, min(c.gap_px, half))

    u, along_up = math.cos(up) * x + math.sin(up) * y, math.cos(up) * y - math.sin(up) * x
    v, along_level = (
        math.cos(level) * y - math.sin(level) * x,
        math.cos(level) * x + math.sin(level) * y,
    )
    upright = within(u, c.line_px / 2) * between_ends(along_up)
    across = within(v, c.line_px / 2) * between_ends(along_level)
    return upright + across - cut(u) * cut(v)


@pytest.mark.parametrize("rotation_deg", [0.0, 3.7, -10.0, 45.0])
@pytest.mark.parametrize("blur_px", [LEAST_BLUR_PX, 0.6, 1.2])
def test_a_pixel_is_the_integral_over_its_square(rotation_deg: float, blur_px: float) -> None:
    """scipy.integrate.dblquad (QUADPACK): pixels at an edge, in an inner corner, in the middle."""
    crosshair = Crosshair(line_px=5.0, blur_px=blur_px, rotation_deg=rotation_deg, **BARE)
    x, y = 12.37, 11.81
    image = crosshair_image((25, 25), x, y, crosshair)
    for row, column in ((3, 10), (14, 15), (12, 12), (9, 20), (15, 10)):
        expected, _ = dblquad(
            lambda b, a: point_brightness(a - x, b - y, crosshair),
            *(column - 0.5, column + 0.5, row - 0.5, row + 0.5),
            epsabs=1e-10,
        )
        assert image[row, column] == pytest.approx(expected, rel=0, abs=1e-6)


@pytest.mark.parametrize(
    "reticle",
    [
        Crosshair(5.0, 1.2, 6.0, skew_deg=5.0, **BARE),
        Crosshair(5.0, 0.7, -31.0, half_length_px=9.0, gap_px=4.0, **BARE),
        Crosshair(5.0, 1.2, 12.0, gap_px=1.5, **BARE),
    ],
    ids=["skewed", "short with a gap", "narrow gap"],
)
def test_skewed_short_and_gapped_arms_are_the_integral_too(reticle: Crosshair) -> None:
    """As above, at the crossing, in the gap, on both ends and along the arms."""
    x, y = 12.37, 11.81
    image = crosshair_image((25, 25), x, y, reticle)
    for row, column in ((12, 12), (11, 14), (14, 10), (8, 12), (3, 11), (12, 4), (16, 20), (4, 17)):
        expected, _ = dblquad(
            lambda b, a: point_brightness(a - x, b - y, reticle),
            *(column - 0.5, column + 0.5, row - 0.5, row + 0.5),
            epsabs=1e-10,
        )
        assert image[row, column] == pytest.approx(expected, rel=0, abs=1e-6)


@pytest.mark.parametrize("rotation_deg", [0.0, 7.3])
def test_agrees_with_a_blurred_supersampled_drawing(rotation_deg: float) -> None:
    """Bars drawn on a grid 16 times finer, blurred by scipy.ndimage, averaged over each pixel.

    The drawing's stair steps leave an error of about a sixteenth of a pixel's edge, averaged over
    many steps; upright bars on the grid have none but the filter's own pixel, 1/16 px wide.
    """
    fine, size = 16, 40
    crosshair = Crosshair(line_px=5.0, blur_px=1.2, rotation_deg=rotation_deg, **BARE)
    x, y = 19.5, 20.25  # edges fall on the fine grid when upright
    at = (np.arange(size * fine) + 0.5) / fine - 0.5
    turn = math.radians(rotation_deg)
    u = math.cos(turn) * (at[None, :] - x) + math.sin(turn) * (at[:, None] - y)
    v = math.cos(turn) * (at[:, None] - y) - math.sin(turn) * (at[None, :] - x)
    drawn = ((np.abs(u) < 2.5) | (np.abs(v) < 2.5)).astype(float)
    blurred = gaussian_filter(drawn, 1.2 * fine, truncate=6, mode="nearest")
    expected = blurred.reshape(size, fine, size, fine).mean(axis=(1, 3))
    image = crosshair_image((size, size), x, y, crosshair)
    inner = (slice(9, -9), slice(9, -9))  # the drawing ends at its border, the arms do not
    tolerance = 2e-4 if rotation_deg == 0 else 4e-3
    assert np.abs(image - expected)[inner].max() < tolerance


@pytest.mark.parametrize(("rotation_deg", "x_px", "y_px"), [(0.0, 60.2, 59.7), (-8.0, 58.9, 61.4)])
def test_blur_and_pixels_keep_the_flux(rotation_deg: float, x_px: float, y_px: float) -> None:
    """Sum of all pixels = contrast x area of two bars of finite length, counted once where both."""
    crosshair = Crosshair(
        line_px=4.0, blur_px=1.5, rotation_deg=rotation_deg, half_length_px=40.0, **BARE
    )
    area = 2 * 4.0 * 80.0 - 4.0**2
    image = crosshair_image((121, 121), x_px, y_px, crosshair)
    assert image.sum() == pytest.approx(area, rel=1e-9)


@pytest.mark.parametrize(("gap_px", "both_px"), [(10.0, 0.0), (1.5, 0.5)])
def test_a_gap_takes_its_flux(gap_px: float, both_px: float) -> None:
    """Area of two lines without their gaps, less the four corners both cover in a narrow gap."""
    crosshair = Crosshair(
        line_px=4.0, blur_px=1.5, rotation_deg=19.0, half_length_px=40.0, gap_px=gap_px, **BARE
    )
    area = 2 * 4.0 * 2 * (40.0 - gap_px) - 4 * both_px**2
    image = crosshair_image((121, 121), 60.2, 59.7, crosshair)
    assert image.sum() == pytest.approx(area, rel=1e-9)


def test_every_reticle_is_symmetric_about_its_crossing() -> None:
    """Turned by 180 degrees about a pixel centre it is itself: the truth cannot be in doubt."""
    odd = Crosshair(
        rotation_deg=17.0,
        skew_deg=-6.0,
        half_length_px=21.0,
        gap_px=3.0,
        level_line_px=8.0,
        level_blur_px=2.1,
        level_contrast=3000.0,
    )
    image = crosshair_image((61, 61), 30.0, 30.0, odd)
    np.testing.assert_allclose(image, image[::-1, ::-1], rtol=1e-10)
    assert np.abs(image - image[::-1]).max() > 100.0


def test_the_level_arm_may_differ() -> None:
    """Its own width, blur and contrast are those of a reticle that has them for both arms."""
    mixed = Crosshair(level_line_px=9.0, level_blur_px=2.0, level_contrast=3000.0)
    other = Crosshair(line_px=9.0, blur_px=2.0, contrast=3000.0)
    image = crosshair_image((81, 81), 40.2, 39.7, mixed)
    np.testing.assert_array_equal(
        image[:10], crosshair_image((81, 81), 40.2, 39.7, Crosshair())[:10]
    )
    np.testing.assert_array_equal(
        image[:, :10], crosshair_image((81, 81), 40.2, 39.7, other)[:, :10]
    )
    wide = replace(mixed, line_px=15.0, level_line_px=15.0)
    crossing = crosshair_image((81, 81), 40.0, 40.0, wide)[40, 40]
    assert crossing == pytest.approx(800.0 + 7000.0, abs=2.0)  # the stronger one holds


def test_skew_turns_the_level_arm_alone() -> None:
    straight = crosshair_image((101, 101), 50.0, 50.0, Crosshair(**BARE))
    skewed = crosshair_image((101, 101), 50.0, 50.0, Crosshair(skew_deg=5.0, **BARE))
    np.testing.assert_array_equal(straight[:10], skewed[:10])
    rows, right = np.arange(101.0), skewed[:, 90]
    expected_px = 40 * math.tan(math.radians(5.0))
    assert (rows * right).sum() / right.sum() - 50 == pytest.approx(expected_px, abs=1e-3)


def test_an_arm_beyond_the_frame_leaves_the_ground() -> None:
    ground = crosshair_image((20, 30), -300.0, 500.0, Crosshair(rotation_deg=3.0))
    np.testing.assert_array_equal(ground, np.full((20, 30), 800.0))


def test_a_part_of_the_picture_is_the_picture_s_part() -> None:
    crosshair = Crosshair(rotation_deg=2.0)
    whole = crosshair_image((60, 80), 41.3, 28.9, crosshair)
    part = crosshair_image((20, 30), 41.3, 28.9, crosshair, first_row=15, first_column=25)
    np.testing.assert_array_equal(part, whole[15:35, 25:55])


def test_a_dark_crosshair_is_the_complement_of_a_bright_one() -> None:
    bright = crosshair_image((40, 40), 20.3, 19.1, Crosshair(background=100.0, contrast=900.0))
    dark = crosshair_image((40, 40), 20.3, 19.1, Crosshair(background=1000.0, contrast=-900.0))
    np.testing.assert_allclose(bright + dark, 1100.0, rtol=1e-14)


def test_rotation_is_clockwise_on_screen() -> None:
    """A level arm turned clockwise stands lower, at larger y, on its right side."""
    image = crosshair_image((101, 101), 50.0, 50.0, Crosshair(rotation_deg=5.0, **BARE))
    rows = np.arange(101.0)
    right, left = image[:, 90], image[:, 10]
    expected_px = 40 * math.tan(math.radians(5.0))
    assert (rows * right).sum() / right.sum() - 50 == pytest.approx(expected_px, abs=1e-3)
    assert (rows * left).sum() / left.sum() - 50 == pytest.approx(-expected_px, abs=1e-3)


@pytest.mark.parametrize(
    "wrong",
    [
        {"line_px": 0.0},
        {"blur_px": -1.0},
        {"half_length_px": 0.0},
        {"level_line_px": 0.0},
        {"level_blur_px": -0.5},
    ],
)
def test_sizes_must_be_positive(wrong: dict[str, float]) -> None:
    with pytest.raises(ValueError, match="must be positive"):
        Crosshair(**wrong)


@pytest.mark.parametrize("gap_px", [-1.0, 30.0])
def test_a_gap_is_shorter_than_the_arms(gap_px: float) -> None:
    with pytest.raises(ValueError, match="gap"):
        Crosshair(half_length_px=30.0, gap_px=gap_px)
