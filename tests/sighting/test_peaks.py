"""What stands out along a band, and what does not."""

from __future__ import annotations

import numpy as np
import pytest

from readout.sighting.peaks import CLEARLY, WIDTHS, peaks_of
from readout.sighting.stretches import stretches_of

SHAPE = (96, 600)
SEED = 32


def peaks(picture, sd=1.0):
    """Bright and dark peaks of a picture of averaged pixels with noise."""
    noise = np.random.default_rng(SEED).normal(0, sd, SHAPE)
    return peaks_of(stretches_of((picture + noise).astype(np.float32)), 2)


def columns():
    return np.arange(SHAPE[1])[None, :] + np.zeros((SHAPE[0], 1))


def clear(of):
    """Peaks that noise does not make: some 10^5 places are looked at."""
    return of.only(np.nonzero(of.height > 7)[0])


def highest(of):
    """The highest peak of each band: a band's own come first."""
    return of.only(np.nonzero(np.diff(of.band, prepend=-1))[0])


@pytest.mark.parametrize("polarity", [1, -1])
@pytest.mark.parametrize("width", [1, 3, 9])
def test_a_line_is_one_peak_in_each_band(polarity, width):
    """Its height is the contrast over the sd of the difference of two sums, where width matches.

    The sd of half a second difference of white noise is sqrt(6)/2 times that of a value.
    """
    contrast = 12.0
    line = polarity * contrast * (np.abs(columns() - 100) <= width // 2)
    same, other = peaks(line)[::polarity]
    same, other = clear(same), clear(other)
    assert same.band.tolist() == list(range(SHAPE[0] // 8))
    assert np.abs(same.x - 100).max() < 0.5
    assert np.all(same.slope == 0)
    assert np.all(same.width == width)
    expected = contrast * np.sqrt(8 * width) / (np.sqrt(6) / 2)
    expected /= CLEARLY ** WIDTHS.index(width)
    assert np.mean(same.height) == pytest.approx(expected, rel=0.15)
    assert other.x.size == 0


@pytest.mark.parametrize(
    "picture",
    [
        columns() * 2.0,
        60.0 * (columns() > 90),
        (columns() - 250) ** 2 / 2000,
        0.5 * columns() + 60.0 * (columns() > 150),
    ],
    ids=["slope", "step", "vignetting", "step on a slope"],
)
def test_steps_and_slopes_are_no_peaks(picture):
    for of in peaks(picture):
        assert clear(of).x.size == 0


@pytest.mark.parametrize("x", [0, 1, 3, SHAPE[1] - 1, SHAPE[1] - 3])
def test_a_line_at_the_border_is_a_peak_even_on_sloping_ground(x):
    """Between it and the border leaning stretches may see the other polarity, but much lower."""
    bright, dark = peaks(40.0 * (columns() == x) + 0.2 * columns())
    bright = highest(clear(bright))
    assert dark.height.max() < 0.4 * bright.height.min()
    assert bright.band.tolist() == list(range(SHAPE[0] // 8))
    assert np.abs(bright.x - x).max() <= 1.0


def test_the_ground_beside_a_strong_line_is_no_peak_of_the_other_polarity():
    """Neither on sloping ground nor near the border."""
    for x in (100, 585):
        _, dark = peaks(500.0 * (np.abs(columns() - x) <= 1) + 0.2 * columns())
        assert clear(dark).x.size == 0


def test_a_leaning_line_has_its_slope():
    rows = np.arange(SHAPE[0])[:, None]
    leaning = 30.0 * (np.abs(columns() - 60 - 0.5 * rows) <= 1)
    bright = highest(clear(peaks(leaning)[0]))
    assert np.abs(bright.x - 60 - 0.5 * bright.y).max() < 1.0
    assert np.abs(np.median(bright.slope) - 0.5) <= bright.slope_step / 2
