"""The Cramér-Rao bound against closed forms and against models that know more."""

from __future__ import annotations

import math
from dataclasses import replace

import numpy as np
import pytest
from scipy.optimize import least_squares

from readout.sighting.bound import cramer_rao_cov
from readout.simulation import Crosshair, Sensor, crosshair_image, crossing_bound_cov, expose
from readout.simulation.bar import Bar
from readout.simulation.crosshair import union_image

NO_ROUNDING = Sensor(16, gain_levels_per_electron=1e3, read_noise_electrons=0.0)


@pytest.mark.parametrize("half_size_px", [60, 120])
def test_thin_lines_reach_the_closed_form(half_size_px: int) -> None:
    """A thin bar is a Gaussian line; n rows of it have 1/n of the variance of one.

    The rows of the crossing say nothing about x, some five sigmas of them on either side.
    """
    n, blur, ground, flux = 2 * half_size_px + 1, 2.5, 1e5, 50.0
    crosshair = Crosshair(line_px=0.2, blur_px=blur, background=ground, contrast=flux / 0.2)
    cov = crossing_bound_cov((n, n), half_size_px, half_size_px, crosshair, NO_ROUNDING)
    sigma2 = blur**2 + (1 + 0.2**2) / 12
    one_row = 4 * math.sqrt(math.pi) * sigma2**1.5 * ground / flux**2
    assert cov[0, 0] == pytest.approx(one_row / n, rel=2.5 * blur / half_size_px)
    assert cov[0, 0] >= one_row / n
    assert cov[1, 1] == pytest.approx(cov[0, 0], rel=1e-6)
    assert abs(cov[0, 1]) < 1e-3 * cov[0, 0]


def test_background_limited_bound_goes_with_noise_over_contrast() -> None:
    bright = Crosshair(background=1e6, contrast=1e3)
    shape, where = (90, 120), (61.3, 44.8)
    one = crossing_bound_cov(shape, *where, bright, NO_ROUNDING)
    half = crossing_bound_cov(shape, *where, replace(bright, contrast=500.0), NO_ROUNDING)
    np.testing.assert_allclose(np.diag(half), 4 * np.diag(one), rtol=2e-3)


def test_rounding_and_read_noise_count() -> None:
    """Read noise r adds r^2 electrons^2 to each pixel, rounding 1 / (12 K^2)."""
    dim = Crosshair(background=1e4, contrast=1e2)
    shape, where = (60, 60), (30.2, 29.6)
    quiet = crossing_bound_cov(shape, *where, dim, NO_ROUNDING)
    noisy = crossing_bound_cov(shape, *where, dim, replace(NO_ROUNDING, read_noise_electrons=100.0))
    coarse_gain = 1 / math.sqrt(12 * 1e4)  # rounding of variance 1e4 electrons^2
    coarse = crossing_bound_cov(
        shape, *where, dim, replace(NO_ROUNDING, gain_levels_per_electron=coarse_gain)
    )
    np.testing.assert_allclose(np.diag(noisy), 2 * np.diag(quiet), rtol=0.01)
    np.testing.assert_allclose(coarse, noisy, rtol=1e-6)


@pytest.mark.parametrize("rotation_deg", [0.0, 6.0])
@pytest.mark.parametrize("where", [(80.3, 61.8), (30.1, 100.4)])
def test_a_fit_that_knows_more_gains_little_when_arms_are_whole(
    rotation_deg: float, where: tuple[float, float]
) -> None:
    """One turn and one profile for both arms, from crosshair_image alone, against two arms.

    The bound with fewer free parameters is never greater (Fisher information of a subset). With
    the crossing in the middle they agree within one per cent; off the middle, one turn for both
    arms helps the one that is extrapolated.
    """
    crosshair, sensor = Crosshair(rotation_deg=rotation_deg), Sensor()
    shape = (120, 160)

    def expected(p: np.ndarray) -> np.ndarray:
        changed = replace(
            crosshair,
            background=p[2],
            contrast=p[3],
            line_px=p[4],
            blur_px=p[5],
            rotation_deg=p[6],
        )
        return crosshair_image(shape, p[0], p[1], changed)

    parameters = np.array([*where, 800.0, 7000.0, 5.0, 1.2, rotation_deg])
    steps = np.array([1e-3, 1e-3, 1.0, 7.0, 1e-3, 1e-3, 1e-3])
    variance = expected(parameters) + 36.0 + 1 / (12 * 0.025**2)
    one_turn = cramer_rao_cov(expected, parameters, steps, variance)[:2, :2]
    two_arms = crossing_bound_cov(shape, *where, crosshair, sensor)
    assert np.linalg.eigvalsh(two_arms - one_turn).min() > -1e-6 * two_arms.max()
    if where == (80.3, 61.8):
        np.testing.assert_allclose(np.diag(two_arms), np.diag(one_turn), rtol=0.01)


def test_a_coordinate_without_its_arm_is_unknown() -> None:
    cov = crossing_bound_cov((80, 100), 50.3, -60.0, Crosshair(), Sensor())
    assert math.isinf(cov[1, 1])
    cov = crossing_bound_cov((80, 100), 50.3, 41.0, Crosshair(), Sensor())
    assert np.all(np.isfinite(cov))


@pytest.mark.parametrize("skew_deg", [-12.0, 25.0])
def test_skewed_thin_lines_reach_the_closed_form(skew_deg: float) -> None:
    """A level line turned by a alone: y takes on tan(a) of the upright line's error in x.

    The level line's own share of the variance of y is that across it over cos^2, its length in
    the frame n / cos, so n one-row variances over cos.
    """
    n, half, blur, ground, flux = 241, 120, 2.0, 1e5, 50.0
    crosshair = Crosshair(
        line_px=0.2, blur_px=blur, background=ground, contrast=flux / 0.2, skew_deg=skew_deg
    )
    cov = crossing_bound_cov((n, n), half, half, crosshair, NO_ROUNDING)
    one_row = 4 * math.sqrt(math.pi) * (blur**2 + (1 + 0.2**2) / 12) ** 1.5 * ground / flux**2
    tan, cos = math.tan(math.radians(skew_deg)), math.cos(math.radians(skew_deg))
    expected = one_row / n * np.array([[1, tan], [tan, tan**2 + 1 / cos]])
    np.testing.assert_allclose(cov, expected, rtol=0.08)


def test_ends_and_gap_say_nothing_of_the_crossing() -> None:
    """A frame that shows the level arm alone, with both its ends and its gap, leaves x unknown."""
    crosshair = Crosshair(half_length_px=60.0, gap_px=25.0)
    cov = crossing_bound_cov((24, 160), 80.3, 12.2, crosshair, Sensor())
    assert math.isinf(cov[0, 0])
    assert math.isfinite(cov[1, 1])


def test_short_arms_count_by_their_length() -> None:
    """Arms of half the length have half the information, and a gap takes its share."""
    whole, half = Crosshair(half_length_px=160.0), Crosshair(half_length_px=80.0)
    shape, where = (341, 341), (170.4, 169.8)
    long = np.diag(crossing_bound_cov(shape, *where, whole, Sensor()))
    short = np.diag(crossing_bound_cov(shape, *where, half, Sensor()))
    gapped = replace(whole, gap_px=80.0)
    cut = np.diag(crossing_bound_cov(shape, *where, gapped, Sensor()))
    np.testing.assert_allclose(short / long, 2.0, rtol=0.06)
    np.testing.assert_allclose(cut / long, 2.0, rtol=0.06)


def test_a_free_plane_costs_little_and_never_helps() -> None:
    crosshair, shape, where = Crosshair(rotation_deg=3.0), (120, 160), (80.3, 61.8)
    level = crossing_bound_cov(shape, *where, crosshair, Sensor())
    plane = crossing_bound_cov(shape, *where, crosshair, Sensor(), plane=True)
    assert np.linalg.eigvalsh(plane - level).min() > -1e-6 * level.max()
    np.testing.assert_allclose(np.diag(plane), np.diag(level), rtol=0.01)
    assert plane[0, 0] > level[0, 0]


@pytest.mark.slow
def test_a_joint_fit_of_everything_reaches_the_bound() -> None:
    """Least squares by scipy, weights from the true variance; gap, ends, plane and all free.

    All fits take the Jacobian of the truth, as errors are small. 400 fits know the
    rms of a coordinate to 3.5 %.
    """
    crosshair = Crosshair(
        line_px=3.0, blur_px=1.3, rotation_deg=7.0, skew_deg=4.0, half_length_px=18.0, gap_px=4.0
    )
    shape, x, y, sensor = (48, 52), 26.3, 23.6, Sensor(16, 4.0, read_noise_electrons=6.0)
    cov = crossing_bound_cov(shape, x, y, crosshair, sensor, plane=True)
    columns, rows = np.arange(shape[1], dtype=float), np.arange(shape[0], dtype=float)

    def model(p: np.ndarray) -> np.ndarray:
        up = Bar(p[6] / 2, p[8], p[10], 18.0, 4.0, p[12])
        level = Bar(p[7] / 2, p[9], p[11], 18.0, 4.0, p[13])
        image = union_image(
            columns - p[0], rows - p[1], up, level, background=p[2], contrasts=p[3:6]
        )
        return image + p[14] * (columns - x) + p[15] * (rows - y)[:, None]

    turn = crosshair.upright.normal_rad, crosshair.level.normal_rad
    truth = np.array([x, y, 800.0, *[7000.0] * 3, 3.0, 3.0, 1.3, 1.3, *turn, *[0.0] * 4])
    scale = np.array([0.01, 0.01, 5.0, *[50.0] * 3, *[0.05] * 4, 1e-3, 1e-3, 0.05, 0.05, 0.1, 0.1])
    expected = crosshair_image(shape, x, y, crosshair)
    np.testing.assert_allclose(model(truth), expected, rtol=1e-12)
    sd = np.sqrt(expected + 36.0)
    steps = np.diag(1e-2 * scale)
    slopes = np.stack(
        [((model(truth + h) - model(truth - h)) / sd).ravel() / (2 * h.sum()) for h in steps],
        axis=1,
    )
    rng = np.random.default_rng(44)
    errors = []
    for _ in range(400):
        levels = expose(expected, sensor, rng) - sensor.black_levels
        fit = least_squares(
            lambda p, seen: ((model(p) - seen) / sd).ravel(),
            truth + scale * rng.normal(size=truth.size),
            jac=lambda p, seen: slopes,
            args=(levels / sensor.gain_levels_per_electron,),
            x_scale=scale,
            xtol=1e-5,
        )
        errors.append(fit.x[:2] - truth[:2])
    ratio = np.sqrt(np.mean(np.square(errors), axis=0) / np.diag(cov))
    assert np.all(np.abs(ratio - 1) < 3 * 0.035)
    assert np.corrcoef(np.array(errors).T)[0, 1] == pytest.approx(
        cov[0, 1] / math.sqrt(cov[0, 0] * cov[1, 1]), abs=0.15
    )
