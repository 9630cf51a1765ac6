"""What a plot is drawn from: nothing invented, no extreme lost, gaps where nothing was."""

from __future__ import annotations

import math
from collections.abc import Iterable
from pathlib import Path

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from readout.errors import BadInput
from readout.logbook import FILE_NAME, Logbook, LogReader, Series
from readout.logbook.series import Cells, choose_level_s, series_of
from readout.model import F64, Quality, Reading
from tests.logbook.made import log_of, new_run, reading, unmeasured

COLUMNS = ("min", "max", "mean")


def log_at(folder: Path, times_s: Iterable[float], **run: object) -> Path:
    """A log of readings at these times."""
    path = folder / FILE_NAME
    with Logbook(path, capacity=1_000_000) as log:
        log.start(new_run(**run))
        for seq, t_s in enumerate(times_s):
            log.append(reading(seq), t_s=t_s)
        log.end(0)
    return path


def direct(
    readings: list[Reading], times_s: F64, series: Series, k: int
) -> tuple[int, list[float], list[float]]:
    """Count and x values of the readings in bin k, all measured and the good ones."""
    low, high = series.t_s[k] - series.bin_s / 2, series.t_s[k] + series.bin_s / 2
    inside = [r for r, t in zip(readings, times_s, strict=True) if low - 1e-9 <= t < high - 1e-9]
    measured = [r.x_arcsec for r in inside if math.isfinite(r.x_arcsec)]
    return len(inside), measured, [r.x_arcsec for r in inside if r.good]


@pytest.mark.parametrize(
    ("from_s", "to_s", "points", "bin_s"),
    [
        (0.0, None, 100, 10.0),  # from the summaries of one second and of ten
        (0.0, None, 700, 2.0),
        (120.0, 480.0, 100, 4.0),
        (0.0, 40.0, 100, 0.4),  # from the rows: 2000 readings, 100 bins
    ],
)
def test_bins_hold_what_the_readings_in_them_say(
    tmp_path: Path, from_s: float, to_s: float | None, points: int, bin_s: float
) -> None:
    rng = np.random.default_rng(11)
    kinds = rng.integers(0, 12, 50_000)
    readings = [
        unmeasured(k)
        if kinds[k] == 0
        else reading(k, quality=Quality.BLURRED if kinds[k] == 1 else Quality.OK)
        for k in range(kinds.size)
    ]
    times_s = np.arange(kinds.size) / 50
    with LogReader(log_of(tmp_path, readings)) as reader:
        series = reader.series(1, from_s, to_s, points)
    assert series.bin_s == pytest.approx(bin_s)
    assert points / 2 - 1 <= series.t_s.size <= points
    for k in range(series.t_s.size):
        n, measured, good = direct(readings, times_s, series, k)
        assert (series.n[k], series.n_good[k]) == (n, len(good))
        assert series.x_min_arcsec[k] == min(measured)
        assert series.x_max_arcsec[k] == max(measured)
        assert series.x_mean_arcsec[k] == pytest.approx(math.fsum(good) / len(good), abs=1e-9)


def test_one_reading_far_off_is_seen_in_a_day(tmp_path: Path) -> None:
    n = 86_400
    readings = (reading(k, 0.0 if k != 54_321 else 9.0, 0.0, t_s=float(k)) for k in range(n))
    with LogReader(log_of(tmp_path, readings)) as reader:
        series = reader.series(1, points=500)
    assert series.n.sum() == n
    [far] = np.flatnonzero(series.x_max_arcsec > 0)
    assert abs(series.t_s[far] - 54_321) <= series.bin_s / 2


def test_few_readings_stand_for_themselves(tmp_path: Path) -> None:
    readings = [reading(0), unmeasured(1), reading(2, quality=Quality.DIM), reading(3)]
    with LogReader(log_of(tmp_path, readings)) as reader:
        series = reader.series(1, points=10)
    assert series.bin_s == 0.0
    assert series.t_s == pytest.approx([0.0, 0.02, 0.04, 0.06])
    x = [r.x_arcsec for r in readings]
    assert series.x_min_arcsec.tolist()[2:] == series.x_max_arcsec.tolist()[2:] == x[2:]
    np.testing.assert_array_equal(np.isnan(series.x_min_arcsec), [False, True, False, False])
    # A flagged reading is drawn, but is in no mean.
    np.testing.assert_array_equal(np.isnan(series.x_mean_arcsec), [False, True, True, False])
    assert series.n_good.tolist() == [1, 0, 0, 1]


def test_a_pause_is_a_gap_among_single_readings(tmp_path: Path) -> None:
    times_s = [*np.arange(100) * 0.1, *(500.0 + np.arange(100) * 0.1)]
    with LogReader(log_at(tmp_path, times_s)) as reader:
        series = reader.series(1, points=1000)
    assert series.t_s.size == 201
    [gap] = np.flatnonzero(series.n == 0)
    assert 9.9 < series.t_s[gap] < 500.0
    for name in COLUMNS:
        assert np.isnan(getattr(series, f"y_{name}_arcsec")).sum() == 1
    assert np.all(np.diff(series.t_s) > 0)


@pytest.mark.parametrize(("every_s", "rows"), [(10.0, 3000), (7.0, 2100), (1.5, 9000)])
def test_means_far_apart_have_no_false_gaps(tmp_path: Path, every_s: float, rows: int) -> None:
    """Bins never fall between two rows, however long the run and whatever the interval."""
    times_s = (np.arange(rows) + 0.5) * every_s
    with LogReader(log_at(tmp_path, times_s, every_s=every_s)) as reader:
        for points in (100, 1000, 2000, 2100, 5000):
            for from_s, to_s in ((0.0, None), (0.0, 1000.0), (333.3, 2222.2)):
                series = reader.series(1, from_s, to_s, points)
                assert series.t_s.size <= points
                inner = series.n[1:-1]  # the first and last may be cut short
                assert inner.min() > 0, (points, from_s, to_s, series.bin_s)


def test_a_gap_in_a_long_run_is_a_gap(tmp_path: Path) -> None:
    times_s = [*np.arange(10_000) * 0.1, *(3000.0 + np.arange(10_000) * 0.1)]
    with LogReader(log_at(tmp_path, times_s)) as reader:
        series = reader.series(1, points=400)
    empty = series.t_s[series.n == 0]
    assert 1000.0 < empty.min() < 1020.0
    assert 2980.0 < empty.max() < 3000.0
    assert np.isnan(series.x_mean_arcsec[series.n == 0]).all()
    assert series.n.sum() == 20_000


def test_while_the_run_goes_on(tmp_path: Path) -> None:
    path = tmp_path / FILE_NAME
    with Logbook(path, commit_every_s=3600.0) as log, LogReader(path) as reader:
        run_id = log.start(new_run())
        empty = reader.series(run_id)
        assert empty.t_s.size == 0
        for seq in range(10):
            log.append(reading(seq), t_s=seq / 50)
        log.flush()
        assert reader.series(run_id).n.sum() == 10


def test_what_cannot_be_plotted(tmp_path: Path) -> None:
    with LogReader(log_of(tmp_path, [reading(0)])) as reader:
        with pytest.raises(BadInput, match="there is no run 2"):
            reader.series(2)
        with pytest.raises(BadInput, match="is empty"):
            reader.series(1, 5.0, 5.0)
        assert reader.series(1, 100.0).t_s.size == 0
        assert reader.series(1, -50.0, 200.0).n.sum() == 1


@given(
    st.lists(st.floats(0, 5000), min_size=0, max_size=300).map(sorted),
    st.floats(0, 4000),
    st.floats(0.01, 5000),
    st.integers(10, 400),
    st.sampled_from([0, 1, 10, 100]),
)
def test_nothing_is_lost_and_nothing_added(
    times_s: list[float], from_s: float, span_s: float, points: int, width_s: int
) -> None:
    to_s = from_s + span_s
    if width_s:
        numbers = sorted({math.floor(t / width_s) for t in times_s})
        t_s = np.array([(k + 0.5) * width_s for k in numbers])
        begin_s = math.floor(from_s / width_s) * width_s
        t_s = t_s[(t_s >= begin_s) & (t_s - width_s / 2 < to_s)]
    else:
        t_s = np.array([t for t in times_s if from_s <= t < to_s])
    values = np.sin(t_s)
    ones = np.ones(t_s.size, dtype=np.int64)
    cells = Cells(width_s, t_s, ones, ones, values, values, values, values, values, values)
    series = series_of(cells, from_s=from_s, to_s=to_s, points=points)
    assert series.t_s.size <= points
    assert series.n.sum() == t_s.size
    if t_s.size:
        assert np.nanmin(series.x_min_arcsec) == values.min()
        assert np.nanmax(series.y_max_arcsec) == values.max()
        assert np.nansum(series.x_mean_arcsec * series.n) == pytest.approx(values.sum(), abs=1e-9)
    assert np.all(np.diff(series.t_s) > 0) or len(set(times_s)) < len(times_s)


def test_the_level_leaves_at_least_half_of_the_points() -> None:
    for span_s in np.geomspace(1, 1e8, 300):
        level_s = choose_level_s(span_s, 2000)
        assert level_s == 0 or span_s / level_s >= 1000
    assert choose_level_s(86_400, 2000) == 10
