"""The mirror's motion: the same for a seed, smooth, bounded, alive, and valid for days."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest

from readout.simulation import Motion
from readout.simulation.motion import _mixed

DAY_S = 86400.0
STILL = Motion(
    seed=3,
    rest_arcsec=(0.0, 0.0),
    drift_arcsec=0.0,
    shake_arcsec=0.0,
    bump_arcsec=0.0,
    bump_shift_arcsec=0.0,
)


def test_the_same_seed_moves_the_same_and_another_differently() -> None:
    t = np.linspace(0.0, 600.0, 5000)
    first, again, other = (np.stack(Motion(seed=seed).tilt(t)) for seed in (5, 5, 6))
    np.testing.assert_array_equal(first, again)
    assert np.abs(first - other).max() > 1.0


def test_a_moment_does_not_depend_on_what_else_is_asked() -> None:
    t = np.array([[0.0, 31.7, 29.999], [1e6, 59.3, 12.0]])
    together = Motion(seed=1).tilt(t)
    for place in np.ndindex(t.shape):
        alone = Motion(seed=1).tilt(float(t[place]))
        assert (together[0][place], together[1][place]) == (float(alone[0]), float(alone[1]))
    assert together[0].shape == t.shape


def test_axes_are_different() -> None:
    x, y = Motion(seed=2).tilt(np.linspace(0.0, 3000.0, 20000))
    assert abs(np.corrcoef(x, y)[0, 1]) < 0.95
    assert np.abs((x - 24.0) - (y + 13.0)).max() > 1.0


@pytest.mark.parametrize("start_s", [0.0, 10 * DAY_S, 100 * DAY_S])
def test_smooth_at_every_time_also_where_bumps_and_cells_begin(start_s: float) -> None:
    """No jump: a step of 1 ms moves the mirror no more than its fastest swing can.

    Bounds: a bump of 6.4 arcsec at 4 Hz moves 161 arcsec/s, the shift left behind adds 1.2
    arcsec at 4 Hz, shake and drift below 10 arcsec/s.
    """
    t = start_s + np.arange(0.0, 300.0, 1e-3)
    for axis in Motion(seed=8).tilt(t):
        assert np.abs(np.diff(axis)).max() < (161 + 31 + 10) * 1e-3


def test_a_ring_goes_on_into_the_next_cell() -> None:
    """At 2000 cell borders, some soon after a bump: the same from both sides."""
    border = 30.0 * np.arange(1, 2001)
    before, after = (np.stack(Motion(seed=12).tilt(border + side)) for side in (-1e-9, 0.0))
    assert np.abs(before - after).max() < 1e-6


def test_bounded_for_a_week() -> None:
    """Tones of fixed rms cannot exceed sqrt(2 n) times it; bumps and shifts add at most theirs."""
    x, y = Motion(seed=4).tilt(np.arange(0.0, 7 * DAY_S, 1.7))
    bound = 4.0 * 5.0 + 5.0 * 0.12 + 1.6 * 4.0 + 3 * 0.6
    assert np.abs(x - 24.0).max() < bound
    assert np.abs(y + 13.0).max() < bound


def test_rms_of_drift_and_shake_are_what_was_asked_for() -> None:
    """Over many periods the mean square of a sum of tones is the sum of their half squares."""
    long = np.arange(0.0, 30 * DAY_S, 61.3)
    for axis in replace(STILL, drift_arcsec=5.0).tilt(long):
        assert np.sqrt((axis**2).mean()) == pytest.approx(5.0, rel=0.02)
    short = np.arange(0.0, 3000.0, 0.0137)
    for axis in replace(STILL, shake_arcsec=0.12).tilt(short):
        assert np.sqrt((axis**2).mean()) == pytest.approx(0.12, rel=0.02)


def test_one_bump_in_every_cell_that_dies_away() -> None:
    """In each 30 s there is a swing of some arc-seconds, gone before a second one begins."""
    motion = replace(STILL, bump_arcsec=4.0)
    t = np.arange(0.0, 3000.0, 0.01)
    size = np.hypot(*motion.tilt(t))
    peaks = size.reshape(100, -1).max(axis=1)
    assert peaks.min() > 0.8  # a bump late in its cell may reach its peak in the next
    assert 2.0 < peaks.mean() < 7.0
    assert (size < 0.1).mean() > 0.6


def test_a_bump_leaves_a_small_shift_that_does_not_add_up() -> None:
    motion = replace(STILL, bump_shift_arcsec=0.6)
    x, _ = motion.tilt(np.arange(0.0, 30000.0, 1.0))
    assert np.abs(x).max() < 3 * 0.6
    rest = np.median(x.reshape(-1, 10), axis=1)
    assert len(np.unique(rest.round(3))) > 500  # a new place after every bump, not one value


def test_mixing_is_splitmix64() -> None:
    """First outputs for the state 0, as published with the algorithm (value from memory)."""
    golden = np.uint64(0x9E3779B97F4A7C15)
    states = golden * np.arange(1, 4, dtype=np.uint64)
    expected = [0xE220A8397B1DCDAF, 0x6E789E6AA1B965F4, 0x06C45D188009454F]
    assert _mixed(states).tolist() == expected
