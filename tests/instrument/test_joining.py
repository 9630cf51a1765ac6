"""Readings joined to a row: against the textbook's sums."""

from __future__ import annotations

import math
import tracemalloc

import numpy as np
import pytest

from readout.instrument.joining import Intervals, join
from readout.model import Quality
from tests.instrument.fakes import reading, unmeasured

SEED = 11


def test_mean_count_and_scatter_of_the_good_ones() -> None:
    values = np.random.default_rng(SEED).normal(5.0, 2.0, 50)
    joined = join([reading(k, x, 2 * x) for k, x in enumerate(values)])
    assert joined.n == 50
    assert joined.reading.x_arcsec == pytest.approx(values.mean())
    assert joined.reading.y_arcsec == pytest.approx(2 * values.mean())
    assert joined.x_scatter_arcsec == pytest.approx(values.std(ddof=1))
    assert joined.reading.t_s == pytest.approx(4.9 / 2)  # ten a second, from 0 to 4.9 s


def test_noise_averages_down_and_what_is_common_does_not() -> None:
    # JCGM 100:2008, 5.1.2 and 5.2.2: independent parts add in quadrature, common ones stay
    joined = join([reading(k, sd=0.04, u=0.05) for k in range(16)])
    assert joined.reading.x_sd_arcsec == pytest.approx(0.01)
    assert joined.reading.x_u_arcsec == pytest.approx(math.hypot(0.03, 0.01))


def test_flagged_readings_stay_outside() -> None:
    wild = reading(2, 500.0, 500.0, quality=Quality.AT_EDGE)
    joined = join([reading(0, 1.0), reading(1, 3.0), wild])
    assert (joined.reading.x_arcsec, joined.n) == (2.0, 2)
    assert joined.reading.quality is Quality.OK
    assert joined.reading.seq == 2


def test_an_interval_mostly_bad_is_void_and_says_why() -> None:
    joined = join([reading(0, 1.0), unmeasured(1), reading(2, quality=Quality.DIM)])
    assert math.isnan(joined.reading.x_arcsec)
    assert math.isnan(joined.reading.x_u_arcsec)
    assert math.isnan(joined.x_scatter_arcsec)
    assert joined.n == 1
    assert joined.reading.quality == Quality.NO_IMAGE | Quality.DIM


def test_one_reading_has_no_scatter() -> None:
    joined = join([reading(0, 1.0)])
    assert (joined.reading.x_arcsec, joined.n) == (1.0, 1)
    assert math.isnan(joined.x_scatter_arcsec)


@pytest.mark.parametrize("origin_s", [0.0, 0.25])
def test_intervals_are_counted_from_their_origin(origin_s: float) -> None:
    intervals = Intervals(0.5, origin_s=origin_s)
    rows = [row for k in range(20) if (row := intervals.add(reading(k, float(k))))]
    last = intervals.close()
    assert last is not None
    assert intervals.close() is None
    members = {
        0.0: [range(5), range(5, 10), range(10, 15), range(15, 20)],
        0.25: [range(3), range(3, 8), range(8, 13), range(13, 18), range(18, 20)],
    }[origin_s]
    assert [row.n for row in (*rows, last)] == [len(m) for m in members]
    assert [row.reading.x_arcsec for row in (*rows, last)] == [float(np.mean(m)) for m in members]


def test_a_long_interval_takes_no_more_memory_than_a_short_one() -> None:
    intervals = Intervals(86_400.0)
    for k in range(100):
        intervals.add(reading(k, float(k)))
    tracemalloc.start()
    for k in range(100, 20_000):
        intervals.add(reading(k, float(k)))
    grown, _ = tracemalloc.get_traced_memory()
    tracemalloc.stop()
    assert grown < 50_000  # 20 000 readings held would be some 5 MB
    row = intervals.close()
    assert row is not None
    assert (row.n, row.reading.x_arcsec) == (20_000, pytest.approx(9999.5))


def test_a_small_scatter_far_from_zero_loses_no_digits() -> None:
    # 1e9 + {4, 7, 13, 16}: variance by hand (36 + 9 + 9 + 36) / 3 = 30
    joined = join([reading(k, 1e9 + x) for k, x in enumerate((4.0, 7.0, 13.0, 16.0))])
    assert joined.x_scatter_arcsec == math.sqrt(30)
    assert joined.reading.x_arcsec == 1e9 + 10
