"""The sharpest place: exact without noise, honest with it, found on frames blurred by a disc."""

import json
import math

import numpy as np
import pytest
from scipy.ndimage import gaussian_filter
from scipy.signal import fftconvolve

from readout.angle.focus import FocusSample, focus_sample
from readout.angle.focus_fit import fit_focus
from readout.errors import BadInput
from readout.sighting import locate

DISC_PX_PER_MM = 40 / 300 / 3.45e-3
"""An objective of 40 mm and 300 mm, pixels of 3.45 µm: diameter of the disc a point becomes."""


def spread(z_mm, at_mm, least_px=1.2):
    """The variance of an even disc along one axis is a sixteenth of its diameter squared."""
    return np.sqrt(least_px**2 + (DISC_PX_PER_MM * (z_mm - at_mm)) ** 2 / 16)


def samples(z_mm, upright_mm, level_mm, rng=None, share=0.0):
    noise = (lambda: 1 + share * rng.standard_normal()) if rng else (lambda: 1.0)
    return [
        FocusSample(spread(z, upright_mm) * noise(), spread(z, level_mm) * noise(), float(z))
        for z in z_mm
    ]


def test_without_noise_it_is_exact():
    found = fit_focus(samples(np.linspace(3.0, 3.3, 7), 3.17, 3.17))
    assert found.upright.position_mm == pytest.approx(3.17, abs=1e-9)
    assert found.upright.least_px == pytest.approx(1.2, abs=1e-6)
    assert not found.astigmatic


def test_bias_spread_and_honesty():
    """500 traces of nine positions, widths known to 1 %, the minimum anywhere inside."""
    runs, error, claimed, inside, astigmatic = 500, [], [], 0, 0
    for k in range(runs):
        rng = np.random.default_rng([1, k])
        truth = rng.uniform(-0.05, 0.05)
        found = fit_focus(samples(np.linspace(-0.2, 0.2, 9), truth, truth, rng, 0.01))
        error.append(found.upright.position_mm - truth)
        claimed.append(found.upright.position_u_mm)
        inside += abs(error[-1]) <= found.upright.expanded_u_mm
        astigmatic += found.astigmatic
    error = np.array(error)
    assert abs(error.mean()) < 4 * error.std() / math.sqrt(runs)
    rms_claim = math.sqrt(np.mean(np.square(claimed)))
    assert rms_claim == pytest.approx(error.std(), rel=4 / math.sqrt(2 * runs) + 0.1)
    assert abs(inside / runs - 0.95) < 4 * math.sqrt(0.95 * 0.05 / runs)
    # Two intervals joined as a root of squares cover their difference at least as well.
    assert astigmatic / runs < 0.05 + 4 * math.sqrt(0.95 * 0.05 / runs)


def test_arms_sharp_at_different_places_are_named():
    rng = np.random.default_rng(2)
    found = fit_focus(samples(np.linspace(-0.2, 0.2, 9), -0.04, 0.04, rng, 0.005))
    assert found.astigmatic
    assert found.apart_mm == pytest.approx(0.08, abs=0.005)
    assert found.position_mm == pytest.approx(0.0, abs=0.003)
    assert "apart" in found.words()[1]


def disc_frame(z_mm, line_px, rng, fine=4, size=160):
    """A crosshair blurred by the even disc of a defocused objective, not by a Gaussian alone.

    Drawn on a grid ``fine`` times finer, convolved by FFT, summed to pixels: no code shared with
    the package's simulator.
    """
    place = (np.arange(size * fine) + 0.5) / fine - 0.5
    x, y = size / 2 + rng.random(2)
    drawn = np.zeros((size * fine, size * fine))
    drawn[:, np.abs(place - x) < line_px / 2] = 1
    drawn[np.abs(place - y) < line_px / 2, :] = 1
    radius = max(0.5, abs(z_mm) * DISC_PX_PER_MM / 2 * fine)
    reach = int(radius) + 4 * fine
    v, u = np.mgrid[-reach : reach + 1, -reach : reach + 1]
    disc = gaussian_filter((np.hypot(u, v) <= radius).astype(float), fine)
    light = fftconvolve(np.pad(drawn, reach, mode="edge"), disc / disc.sum(), mode="valid")
    light = light.reshape(size, fine, size, fine).mean(axis=(1, 3))
    electrons = rng.poisson(400 + 6000 * np.clip(light, 0, 1))
    levels = np.round(electrons * 0.03 + rng.normal(0, 0.2, electrons.shape))
    return np.clip(levels, 0, 255).astype(np.uint8)


@pytest.mark.parametrize("line_px", [2.0, 6.0])
def test_on_frames_blurred_by_a_disc(line_px):
    """From one side mostly: within 2 µm, where the disc is still a thirteenth of a pixel."""
    rng = np.random.default_rng(3)
    seen = [
        focus_sample(locate(disc_frame(z, line_px, rng), full_scale=255), float(z))
        for z in np.linspace(-0.08, 0.24, 9)
    ]
    found = fit_focus(seen)
    assert found.position_mm == pytest.approx(0.0, abs=0.002)
    assert found.upright.bracketed
    assert found.upright.least_px == pytest.approx(math.sqrt(1 + line_px**2 / 12), rel=0.02)


def test_a_minimum_beyond_what_was_tried_is_a_guess():
    found = fit_focus(samples(np.linspace(0.05, 0.4, 8), 0.0, 0.0))
    assert found.upright.position_mm == pytest.approx(0.0, abs=1e-6)
    assert not found.upright.bracketed
    assert "go on that way" in found.words()[0]


def test_one_arm_alone():
    both = samples(np.linspace(-0.2, 0.2, 7), 0.01, 0.0)
    found = fit_focus([FocusSample(s.upright_px, math.nan, s.position_mm) for s in both])
    assert found.level is None
    assert math.isnan(found.apart_mm)
    assert not found.astigmatic
    assert found.position_mm == pytest.approx(0.01, abs=1e-9)


def test_it_is_written_as_json_and_said():
    rng = np.random.default_rng(5)
    found = fit_focus(samples(np.linspace(-0.2, 0.2, 9), 0.0, 0.0, rng, 0.01))
    document = json.loads(json.dumps(found.document(), allow_nan=False))
    assert document["upright"]["freedom"] == found.upright.freedom
    assert document["words"][0].startswith("sharpest at ")
    assert "−0.000" not in document["words"][0]
    assert "-0.000" not in document["words"][0]


@pytest.mark.parametrize(
    ("given", "line"),
    [
        ([], "0 positions of the screw tell no minimum"),
        (samples([0.0, 0.0, 0.1, 0.2], 0.1, 0.1), "3 positions of the screw"),
        ([FocusSample(2.0, 2.0)] * 9, "0 positions of the screw"),
        ([FocusSample(math.nan, math.nan, float(z)) for z in range(9)], "no arm was seen at 4"),
        (
            [FocusSample(5 - z**0.5, math.nan, float(z)) for z in np.linspace(0, 2, 9)][::-1],
            "no minimum of the upright arm shows between 0 and 2 mm: go on beyond 2 mm",
        ),
        (
            samples(np.linspace(-0.01, 0.01, 9), 0.0, 0.0, np.random.default_rng(6), 0.05),
            "no minimum of the upright arm shows",
        ),
    ],
)
def test_what_shows_no_minimum_is_refused_in_one_line(given, line):
    with pytest.raises(BadInput, match=line) as caught:
        fit_focus(given)
    assert "\n" not in str(caught.value)
