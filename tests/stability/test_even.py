"""Readings at uneven times become a series at even ones; a gap stays a gap."""

import numpy as np
import pytest

from readout.errors import BadInput
from readout.stability.even import even_series


def test_even_times_stay_as_they_are():
    values = np.random.default_rng(1).standard_normal(50)
    series = even_series(7.0 + 0.5 * np.arange(50), values)
    assert series.interval_s == 0.5
    assert np.array_equal(series.values, values)
    assert series.duration_s == 25.0


def test_a_gap_is_nan_and_keeps_time():
    t = np.array([0, 1, 2, 6, 7, 8, 9.0])
    series = even_series(t, np.array([1.0, 2, np.nan, 4, 5, 6, 7]))
    expected = [1, 2, *[np.nan] * 4, 4, 5, 6, 7]
    assert series.values == pytest.approx(expected, nan_ok=True)


def test_what_falls_into_one_bin_is_averaged():
    t = np.array([0, 1, 1.2, 2, 3, 4.0])
    assert even_series(t, np.array([0.0, 2, 4, 5, 6, 7])).values == pytest.approx([0, 3, 5, 6, 7])


@pytest.mark.parametrize(
    ("t_s", "line"),
    [
        ([0.0, 1.0], "2 readings are no series"),
        ([0.0, 2.0, 1.0], "row 3: its time is not after the one before"),
        ([0.0, 1.0, 1.0], "row 3: its time is not after"),
        ([0.0, np.nan, 2.0], "its time is not after"),
        ([0.0, 1.0, 2.0, 1e9], "row 4: its time is 1e\\+09 s after the one before: check t_s"),
    ],
)
def test_times_that_make_no_series(t_s, line):
    with pytest.raises(BadInput, match=line):
        even_series(np.array(t_s), np.zeros(len(t_s)))
