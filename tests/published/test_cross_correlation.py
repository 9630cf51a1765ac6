"""A second method that shares nothing with the fit: upsampled cross-correlation of two frames.

skimage.registration.phase_cross_correlation without normalisation (M. Guizar-Sicairos, S. T.
Thurman, J. R. Fienup, Opt. Lett. 33 (2008) 156). It knows the displacement between two frames only,
and takes pictures for periodic. So the crosshair keeps clear of the borders on an even ground: then
what leaves on one side is what comes in on the other, and no window is needed. Its uncertainty is
not known beforehand: it is the scatter over pairs that differ in nothing but noise.
"""

import math
from dataclasses import replace

import numpy as np
import pytest
from skimage.registration import phase_cross_correlation

from readout.sighting import locate
from readout.simulation import crossing_bound_cov
from tests.sighting.frames import BRIGHT, SENSOR, frame

SHAPE = (240, 320)
CROSSHAIR = replace(BRIGHT, half_length_px=85.0, rotation_deg=4.0)
SHIFTS_PX = [(0.37, -0.81), (3.25, 2.5), (-7.66, 4.13), (11.5, -9.09)]
PAIRS = 12
STEPS_PER_PX = 500
"""finer than the scatter by far: a step's rounding is 0.0006 px"""


def both_methods():
    """Displacement (x, y) of each pair by correlation and by the fit, with the fit's claimed sd:
    three arrays (shifts, PAIRS, 2)."""
    rng = np.random.default_rng(1)
    correlated, fitted, claimed = [], [], []
    for dx, dy in SHIFTS_PX:
        for _ in range(PAIRS):
            x, y = 158.0 + dx / 2, 121.0 + dy / 2
            before = frame(SHAPE, x - dx, y - dy, CROSSHAIR, rng=rng)
            after = frame(SHAPE, x, y, CROSSHAIR, rng=rng)
            (down, right), _, _ = phase_cross_correlation(
                after, before, upsample_factor=STEPS_PER_PX, normalization=None
            )
            a, b = locate(before, full_scale=255), locate(after, full_scale=255)
            correlated.append((right, down))
            fitted.append((b.x_px - a.x_px, b.y_px - a.y_px))
            claimed.append((math.hypot(a.x_sd_px, b.x_sd_px), math.hypot(a.y_sd_px, b.y_sd_px)))
    shape = (len(SHIFTS_PX), PAIRS, 2)
    return tuple(np.array(values).reshape(shape) for values in (correlated, fitted, claimed))


@pytest.fixture(scope="module")
def measured():
    return both_methods()


def scatter(values):
    """Standard deviation within the pairs of one shift, pooled over shifts, (2,)."""
    return np.sqrt(values.var(axis=1, ddof=1).mean(axis=0))


def test_they_agree_within_their_joint_uncertainty(measured):
    correlated, fitted, claimed = measured
    joint = np.sqrt(scatter(correlated) ** 2 + (claimed**2).mean(axis=(0, 1)))
    difference = (correlated - fitted).mean(axis=1)
    assert np.all(np.abs(difference) < 4 * joint / math.sqrt(PAIRS))
    assert np.all(np.abs(correlated - fitted) < 4.5 * joint)


def test_both_are_right(measured):
    """Against the truth, which neither of the two uncertainties above has looked at."""
    correlated, fitted, claimed = measured
    truth = np.array(SHIFTS_PX)[:, None, :]
    assert np.all(np.abs(correlated - truth) < 4.5 * scatter(correlated))
    assert np.all(np.abs(fitted - truth) < 4.5 * claimed)


def test_the_fit_is_no_worse(measured):
    """Two to four times the bound is what was once seen of the correlation. With steps too fine to
    matter it comes near the bound; the fit must come as near, and claim no less than it scatters.
    44 degrees of freedom know a scatter to 11 %.
    """
    correlated, fitted, claimed = measured
    bound = np.sqrt(2 * np.diag(crossing_bound_cov(SHAPE, 158.0, 121.0, CROSSHAIR, SENSOR)))
    assert np.all(scatter(correlated) > 0.7 * bound)
    assert np.all(scatter(correlated) < 4 * bound)
    assert np.all(scatter(fitted) < 1.3 * scatter(correlated))
    assert np.all(scatter(fitted) < 1.3 * claimed.mean(axis=(0, 1)))


def test_why_the_crosshair_keeps_clear_of_the_borders():
    """Turned arms that reach the border do not come in where they leave: the correlation is off by
    more than 0.005 px, and the fit is not."""
    rng = np.random.default_rng(2)
    reaching = replace(BRIGHT, rotation_deg=3.0)
    before = frame(SHAPE, 158.2, 121.4, reaching, rng=rng)
    after = frame(SHAPE, 160.8, 119.7, reaching, rng=rng)
    (down, right), _, _ = phase_cross_correlation(
        after, before, upsample_factor=STEPS_PER_PX, normalization=None
    )
    a, b = locate(before, full_scale=255), locate(after, full_scale=255)
    assert max(abs(right - 2.6), abs(down + 1.7)) > 0.005
    assert b.x_px - a.x_px == pytest.approx(2.6, abs=4 * math.hypot(a.x_sd_px, b.x_sd_px))
    assert b.y_px - a.y_px == pytest.approx(-1.7, abs=4 * math.hypot(a.y_sd_px, b.y_sd_px))
