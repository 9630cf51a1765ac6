"""Fast frames against the exact path: mean, variance, and what moves with the frame."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest

from readout.simulation import Autocollimator, Crosshair, LiveRenderer, Sensor, expose

SEED = 20261202
SMALL = Autocollimator(width_px=160, height_px=120, rotation_deg=0.7)
DARK = Crosshair(background=7800.0, contrast=-7000.0)
KINDS = {
    "bright": SMALL,
    "dark, turned": replace(SMALL, reticle=DARK, rotation_deg=-8.0),
    "thin, sharp": replace(SMALL, reticle=Crosshair(line_px=2.0, blur_px=0.6)),
    "wide, 12 bit": replace(
        SMALL,
        rotation_deg=10.0,
        reticle=Crosshair(line_px=9.0, blur_px=2.5),
        sensor=Sensor(12, 0.4, 6.0, 64.0),
    ),
}
FINE = Sensor(16, 5.0, read_noise_electrons=0.0, black_levels=100.0)
PLACES = ((80.3, 61.8), (12.0, 115.5), (-3.0, 50.2), (200.0, -90.0))


@pytest.mark.parametrize("kind", KINDS)
@pytest.mark.parametrize("place", PLACES)
def test_expected_level_agrees_within_a_hundredth_of_a_level(
    kind: str, place: tuple[float, float], monkeypatch: pytest.MonkeyPatch
) -> None:
    """With the noise taken away and 16 bits, the mean of the live path shows bare.

    Stated: within 1/100 of a level of the 8-bit scale of 40 electrons a level, in every pixel.
    """

    class Silent:
        """A generator whose normal numbers are all zero."""

        def standard_normal(self, size: tuple[int, ...], dtype: type) -> np.ndarray:
            return np.zeros(size, dtype)

        def integers(self, high: int) -> int:
            return 0

    instrument = replace(KINDS[kind], sensor=FINE)
    live = LiveRenderer(instrument, Silent()).frame(*place, Silent())
    exact = FINE.mean_levels(instrument.electrons(*place))
    levels_8_bit = (live - exact) / (5.0 * 40.0)
    assert np.abs(levels_8_bit).max() < 0.01


@pytest.mark.parametrize("kind", KINDS)
def test_mean_and_variance_agree_with_the_exact_path(kind: str) -> None:
    """Pixel by pixel over 600 frames of each; bank offsets repeat, so the ground gets slack."""
    instrument, n = KINDS[kind], 600
    x_px, y_px = 80.3, 61.8
    rng = np.random.default_rng(SEED)
    renderer = LiveRenderer(instrument, rng)
    electrons = instrument.electrons(x_px, y_px)
    live = np.stack([renderer.frame(x_px, y_px, rng) for _ in range(n)]).astype(np.float32)
    exact = np.stack([expose(electrons, instrument.sensor, rng) for _ in range(n)])
    exact = exact.astype(np.float32)
    variance = instrument.sensor.noise_var_levels2(electrons) + 1 / 12
    pull = (live.mean(axis=0) - exact.mean(axis=0)) / np.sqrt(2 * variance / n)
    assert np.abs(pull).max() < 6
    assert pull.std() == pytest.approx(1, abs=0.1)
    change = live.var(axis=0) / exact.var(axis=0)
    arms = np.abs(electrons - instrument.reticle.background) > 100
    for part in (arms, ~arms):
        # sd of a ratio of two variances is 2 / sqrt(n); the mean over a part is far tighter
        assert change[part].mean() == pytest.approx(1, abs=0.01)
        assert change[part].std() == pytest.approx(2 / np.sqrt(n), rel=0.15)


def test_noise_in_the_arms_is_new_in_every_frame() -> None:
    """Means of frames settle as 1/n where the line is measured: no bank behind it.

    The sum over an arm is what a fit sees; over 400 frames the variance of the mean of blocks of
    20 is a twentieth of that of one (sd of the ratio: sqrt(2/19 + 2/399) = 0.33).
    """
    rng = np.random.default_rng(SEED)
    renderer = LiveRenderer(SMALL, rng)
    weight = np.gradient(SMALL.electrons(80.3, 61.8), axis=1)
    sums = np.array([(weight * renderer.frame(80.3, 61.8, rng)).sum() for _ in range(400)])
    ratio = sums.reshape(20, 20).mean(axis=1).var(ddof=1) / sums.var(ddof=1) * 20
    assert 0.33 < ratio < 2.2
    correlation = np.corrcoef(sums[1:], sums[:-1])[0, 1]
    assert abs(correlation) < 4 / np.sqrt(400)


def test_frames_are_the_same_for_the_same_seeds() -> None:
    def frame(bank_seed: int, seed: int) -> np.ndarray:
        renderer = LiveRenderer(SMALL, np.random.default_rng(bank_seed))
        return renderer.frame(70.2, 55.5, np.random.default_rng(seed))

    np.testing.assert_array_equal(frame(1, 2), frame(1, 2))
    assert np.count_nonzero(frame(1, 2) != frame(1, 3)) > 1000
    assert np.count_nonzero(frame(1, 2) != frame(4, 2)) > 1000


def test_a_frame_is_a_picture_of_its_own() -> None:
    renderer = LiveRenderer(SMALL, np.random.default_rng(0))
    first = renderer.frame(70.0, 60.0, np.random.default_rng(1))
    kept = first.copy()
    renderer.frame(20.0, 20.0, np.random.default_rng(2))
    np.testing.assert_array_equal(first, kept)
    assert first.flags.c_contiguous
    assert first.flags.writeable


@pytest.mark.parametrize("reticle", [Crosshair(half_length_px=30.0), Crosshair(rotation_deg=60.0)])
def test_what_it_cannot_draw_is_refused(reticle: Crosshair) -> None:
    with pytest.raises(ValueError, match="across the picture"):
        LiveRenderer(replace(SMALL, reticle=reticle), np.random.default_rng(0))
