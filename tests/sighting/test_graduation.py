"""Scales found in whole frames: at any turn, with gaps, and a crosshair across the marks."""

from __future__ import annotations

import math

import numpy as np
import pytest
from scipy.optimize import curve_fit
from scipy.signal import find_peaks

from readout.sighting.graduation import Scale, find_graduation
from tests.sighting.graduated import Scene, scene


def one(made: Scene, seed: int = 0) -> Scale:
    """The only scale of a frame."""
    found = find_graduation(made.frame(seed), full_scale=255).scales
    assert len(found) == 1
    return found[0]


def assert_true(made: Scene, scale: Scale, *, least: int) -> None:
    """Marks counted right, and none off by more than its uncertainty allows."""
    error_px, counted = made.mark_errors_px(scale)
    assert counted
    assert len(scale.numbers) >= least
    pull = error_px / np.sqrt(np.diag(scale.cov_px2))
    assert np.abs(pull).max() < 4.5
    assert float(pull @ pull) / len(pull) < 1 + 4 * math.sqrt(2 / len(pull))


@pytest.mark.parametrize("rotation_deg", [-44.0, -31.0, -12.0, -3.5, 0.0, 1.5, 8.0, 22.0, 43.0])
def test_any_turn_with_the_return_across(rotation_deg: float) -> None:
    made = scene(rotation_deg=rotation_deg, phase_div=0.37, at_div=0.21)
    scale = one(made)
    assert_true(made, scale, least=8)
    assert not scale.upright
    assert scale.polarity == -1
    off = scale.turn_rad - math.radians(rotation_deg)
    assert abs(off) < max(5 * scale.turn_sd_rad, 0.001)


@pytest.mark.parametrize(
    ("kind", "least"),
    [
        ({"lit": True}, 12),
        ({"one_sided": True, "rotation_deg": 4.0, "crosshair_deg": -3.0}, 8),
        ({"axis_line": False, "rotation_deg": -6.0}, 8),
        ({"missing": (-3, 2, 3), "rotation_deg": 20.0}, 9),
        ({"step_px": 9.0, "rotation_deg": -9.0}, 20),
        ({"step_px": 45.0, "line_px": 5.0, "blur_px": 2.0, "rotation_deg": 13.0}, 5),
        ({"depth": 0.2, "rotation_deg": 2.0}, 12),
        ({"crosshair_px": None, "rotation_deg": -17.0}, 15),
    ],
)
def test_kinds_of_scale(kind: dict[str, object], least: int) -> None:
    made = scene(phase_div=0.11, **kind)  # type: ignore[arg-type]  # options by name
    scale = one(made, seed=1)
    assert_true(made, scale, least=least)
    assert scale.polarity == (1 if kind.get("lit") else -1)


def test_longer_marks_are_told() -> None:
    made = scene(crosshair_px=None, rotation_deg=3.0)
    scale = one(made)
    error_px, _ = made.mark_errors_px(scale)
    at = made.truth.slopes(*scale.place_px.T)[0] / made.ruling.division_slope
    assert np.array_equal(scale.longer, np.rint(at) % 5 == 0)
    assert len(error_px) == len(scale.longer)


@pytest.mark.parametrize("step_px", [10.0, 20.0])
def test_the_line_of_a_scale_gives_its_direction(step_px: float) -> None:
    pulls = []
    seeds = range(8)
    print("seeds", seeds)
    for seed in seeds:
        made = scene(
            rotation_deg=-2.3 + seed,
            step_px=step_px,
            phase_div=0.1 * seed,
            crosshair_px=(90.0, 205),
        )
        scale = one(made, seed)
        assert scale.turn_sd_rad < math.radians(0.01)
        pulls.append((scale.turn_rad - math.radians(seed - 2.3)) / scale.turn_sd_rad)
    assert np.abs(pulls).max() < 4
    assert np.sqrt(np.mean(np.square(pulls))) < 1 + 3 / math.sqrt(2 * len(pulls))


def test_two_scales_at_right_angles() -> None:
    made = scene(shape=(480, 640), rotation_deg=12.0, both=True, crosshair_px=(310.3, 250.7))
    found = find_graduation(made.frame(2), full_scale=255)
    assert found.level is not None
    assert found.upright is not None
    for scale, least in ((found.level, 22), (found.upright, 16)):
        assert_true(made, scale, least=least)


def test_a_lens_that_bends_the_field() -> None:
    made = scene(shape=(480, 640), rotation_deg=1.0, k1=600.0, crosshair_px=(310.3, 250.7))
    assert_true(made, one(made), least=25)


def test_spacing_agrees_with_single_gaussians_fitted_to_a_row_profile() -> None:
    # Independent of all that is tested: scipy's peaks and scipy's curve_fit on a plain mean.
    made = scene(crosshair_px=None, step_px=21.7, phase_div=0.2)
    picture = made.frame(4).astype(np.float64)
    profile = picture[113:117].mean(axis=0)  # beside the scale's line, through all marks
    dips, _ = find_peaks(-profile, prominence=20)
    places = []
    for dip in dips[(dips > 8) & (dips < 311)]:
        x = np.arange(dip - 7, dip + 8)

        def gaussian(x: np.ndarray, b: float, a: float, c: float, s: float) -> np.ndarray:
            return b - a * np.exp(-0.5 * ((x - c) / s) ** 2)

        (_, _, centre, _), _ = curve_fit(gaussian, x, profile[x], (110, 60, dip, 1.3))
        places.append(centre)
    step = np.polyfit(np.arange(len(places)), places, 1)[0]
    scale = one(made, seed=4)
    assert len(places) > 10
    own = np.polyfit(scale.numbers, scale.along_px, 1)[0]
    assert own == pytest.approx(step, rel=3e-4)
    assert own == pytest.approx(21.7, rel=1e-4)


@pytest.mark.parametrize("depth", [0.0])
def test_a_return_alone_is_no_scale(depth: float) -> None:
    made = scene(depth=depth, rotation_deg=10.0)
    assert find_graduation(made.frame(6), full_scale=255).scales == ()


@pytest.mark.parametrize(
    "picture",
    [
        np.zeros((0, 0), np.uint8),
        np.zeros((5, 7), np.uint8),
        np.full((200, 300), 255, np.uint8),
        np.random.default_rng(8).integers(0, 255, (200, 300)).astype(np.uint8),
        np.random.default_rng(9).normal(3000, 40, (240, 320)).astype(np.uint16),
    ],
)
def test_never_raises_on_a_bad_picture(picture: np.ndarray) -> None:
    full = 255 if picture.dtype == np.uint8 else 65535
    assert find_graduation(picture, full_scale=full).scales == ()
