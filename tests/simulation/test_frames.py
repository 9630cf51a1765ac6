"""Simulated frames: the same for a seed, true to their truth, options checked."""

from __future__ import annotations

import math

import numpy as np
import pytest

from readout.errors import BadInput
from readout.simulation import SimulatedFrames, crosshair_image, simulate_frames

SMALL = {"width_px": 96, "height_px": 80, "frames": 4}


def pixels_of(frames: SimulatedFrames) -> np.ndarray:
    return np.stack([pixels for pixels, _ in frames])


def test_the_same_seed_gives_the_same_frames_and_another_seed_others() -> None:
    first, again, other = (simulate_frames(seed=seed, **SMALL) for seed in (7, 7, 8))
    np.testing.assert_array_equal(pixels_of(first), pixels_of(again))
    np.testing.assert_array_equal(pixels_of(first), pixels_of(first))
    assert first.calibration == again.calibration
    assert [t for _, t in first] == [t for _, t in again]
    assert np.count_nonzero(pixels_of(first) != pixels_of(other)) > 1000
    assert [t for _, t in first] != [t for _, t in other]


def test_frames_differ_from_each_other() -> None:
    pictures = pixels_of(simulate_frames(still=True, **SMALL))
    assert np.count_nonzero(pictures[0] != pictures[1]) > 1000


def test_truth_is_what_the_picture_shows() -> None:
    """Without noise each picture is the rounded drawing of a crosshair at the true place."""
    frames = simulate_frames(noise=False, bits=12, seed=2, rotation_deg=1.5, **SMALL)
    for k, (pixels, truth) in enumerate(frames):
        assert truth.t_s == k / 30.0
        where = frames.calibration.position(truth.x_arcsec, truth.y_arcsec)
        assert (truth.x_px, truth.y_px) == pytest.approx(tuple(map(float, where)), abs=1e-12)
        picture = frames.autocollimator.picture_of_reticle
        drawn = crosshair_image((80, 96), truth.x_px, truth.y_px, picture)
        levels = 64.0 + (4095.0 - 64.0) / 10_000.0 * drawn
        assert np.abs(pixels - levels).max() <= 0.5 + 1e-9


@pytest.mark.parametrize("bits", [8, 10, 12, 16])
@pytest.mark.parametrize("dark", [False, True])
def test_levels_are_parts_of_the_full_scale(bits: int, dark: bool) -> None:
    frames = simulate_frames(
        bits=bits, dark=dark, background=0.1, contrast=0.6, noise=False, still=True, **SMALL
    )
    pixels, _ = next(iter(frames))
    full_scale = 2**bits - 1
    assert frames.full_scale == full_scale
    assert pixels.dtype == (np.uint8 if bits == 8 else np.uint16)
    black = 4 * 2 ** (bits - 8)
    low, high = (black + part * (full_scale - black) for part in (0.1, 0.7))
    assert abs(int(pixels.min()) - low) <= 0.01 * full_scale
    assert abs(int(pixels.max()) - high) <= 0.02 * full_scale  # a blurred line is nearly full
    assert (np.median(pixels) > full_scale / 2) == dark


def test_still_keeps_the_mirror_where_it_is_put() -> None:
    frames = simulate_frames(still=True, x_arcsec=11.0, y_arcsec=-7.5, **SMALL)
    assert {(t.x_arcsec, t.y_arcsec) for _, t in frames} == {(11.0, -7.5)}


@pytest.mark.parametrize(
    ("option", "value"),
    [
        ("frames", 0),
        ("bits", 7),
        ("bits", 17),
        ("width_px", 3),
        ("blur_px", 0.1),
        ("line_px", -1.0),
        ("rotation_deg", 60.0),
        ("contrast", 0.0),
        ("full_scale_electrons", math.nan),
        ("focal_length_mm", 0.0),
        ("frames_per_s", 0.0),
    ],
)
def test_what_cannot_be_is_refused_in_one_line_with_the_option(option: str, value: float) -> None:
    with pytest.raises(BadInput) as refusal:
        simulate_frames(**{option: value})
    text = str(refusal.value)
    assert text.startswith(f"--{option.replace('_', '-')} ")
    assert "give" in text
    assert "\n" not in text
