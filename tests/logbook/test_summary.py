"""Summaries are what SQL and plain Python say over the rows themselves, at every level."""

from __future__ import annotations

import math
from collections import defaultdict
from contextlib import closing
from pathlib import Path

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from readout.logbook import FILE_NAME, Logbook
from readout.logbook.connection import open_reading
from readout.logbook.schema import LEVELS_S
from readout.logbook.summary import summarise
from readout.model import Quality
from tests.logbook.made import new_run, reading, unmeasured

angle = st.one_of(st.floats(-2000, 2000), st.just(math.nan))
row = st.tuples(st.integers(0, 400_000_000), angle, angle, st.booleans())


@given(st.lists(row, min_size=1, max_size=60), st.sampled_from([10**6, 10**7, 10**8]))
def test_of_arrays_they_are_what_plain_python_says(
    rows: list[tuple[int, float, float, bool]], width_us: int
) -> None:
    rows.sort(key=lambda r: r[0])
    t_us, x, y, chosen = (np.array(column) for column in zip(*rows, strict=True))
    good = chosen & np.isfinite(x) & np.isfinite(y)
    found = summarise(t_us, x, y, good, width_us)

    intervals: dict[int, list[int]] = defaultdict(list)
    for index, (t, *_) in enumerate(rows):
        intervals[t // width_us].append(index)
    assert found.number.tolist() == list(intervals)
    assert found.first.tolist() == [members[0] for members in intervals.values()]
    for k, members in enumerate(intervals.values()):
        assert found.n[k] == len(members)
        assert found.n_good[k] == sum(bool(good[m]) for m in members)
        for axis, values in ((found.x, x), (found.y, y)):
            measured = [float(values[m]) for m in members if math.isfinite(values[m])]
            used = [float(values[m]) for m in members if good[m]]
            assert axis.minimum[k] == pytest.approx(min(measured, default=math.nan), nan_ok=True)
            assert axis.maximum[k] == pytest.approx(max(measured, default=math.nan), nan_ok=True)
            assert axis.total[k] == pytest.approx(math.fsum(used), abs=1e-9)


BY_SQL = """SELECT CAST(t_us / 1e6 / :level AS INTEGER) AS number, min(key & 68719476735),
    count(*), sum(good),
    min(x_arcsec), max(x_arcsec),
    total(iif(good, x_arcsec, 0)),
    min(y_arcsec), max(y_arcsec),
    total(iif(good, y_arcsec, 0))
FROM (SELECT *, quality = 0 AND x_arcsec IS NOT NULL AND y_arcsec IS NOT NULL AS good
      FROM reading_row WHERE key >> 36 = :run) GROUP BY number ORDER BY number"""


@pytest.mark.parametrize("commit_every", [7, 1000])
def test_in_the_log_they_are_what_sql_says_over_the_rows(tmp_path: Path, commit_every: int) -> None:
    """Commits that cut through the intervals (7 rows) and ones that hold many (1000)."""
    path = tmp_path / FILE_NAME
    rng = np.random.default_rng(3)
    with Logbook(path, commit_every_s=3600.0) as log:
        for _ in range(2):
            log.start(new_run())
            t_s = 0.0
            for seq in range(2500):
                t_s += 0.02 if seq % 500 else 37.3  # pauses too
                kind = rng.integers(0, 10)
                x, y = rng.normal(100.0, 0.1), rng.normal(-40.0, 0.1)
                each = (
                    unmeasured(seq)
                    if kind == 0
                    else reading(seq, x, y, Quality.SATURATED if kind == 1 else Quality.OK)
                )
                log.append(each, t_s=t_s)
                if seq % commit_every == 0:
                    log.flush()
            log.end(0)
    with closing(open_reading(path)) as connection:
        for run_id in (1, 2):
            for level_s in LEVELS_S:
                kept = connection.execute(
                    "SELECT number, first_seq, n, n_good, x_min_arcsec, x_max_arcsec, "
                    "x_sum_arcsec, y_min_arcsec, y_max_arcsec, y_sum_arcsec FROM summary "
                    "WHERE run_id = ? AND level_s = ? ORDER BY number",
                    (run_id, level_s),
                ).fetchall()
                direct = connection.execute(BY_SQL, {"run": run_id, "level": level_s}).fetchall()
                assert len(kept) >= 3
                assert [r[:4] for r in kept] == [r[:4] for r in direct]
                np.testing.assert_allclose(
                    np.array(kept, dtype=float), np.array(direct, dtype=float), rtol=1e-12
                )
        assert connection.execute("SELECT readings FROM run").fetchall() == [(2500,), (2500,)]
