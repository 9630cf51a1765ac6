"""A run as Parquet says what the other exports say."""

from __future__ import annotations

import csv
import io
from datetime import UTC, datetime
from pathlib import Path

import pytest
from pyarrow import parquet

from readout.errors import BadInput
from readout.logbook import FILE_NAME, Logbook, LogReader, Spread, reader
from readout.logbook.export import csv_of
from readout.logbook.parquet import parquet_of
from readout.model import Quality
from tests.logbook.made import log_of, new_run, reading, unmeasured


def test_rows_are_those_of_the_csv(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(reader, "CHUNK", 3)  # more groups than one, the last one not full
    odd = reading(1, quality=Quality.DIM | Quality.AT_EDGE)
    path = log_of(tmp_path, [reading(0), odd, unmeasured(2), *(reading(k) for k in range(3, 8))])
    with LogReader(path) as log:
        pieces = list(parquet_of(log, 1))
        expected = list(csv.DictReader(io.StringIO("".join(csv_of(log, 1)))))
    assert len(pieces) == 4  # three groups, and the foot
    table = parquet.read_table(io.BytesIO(b"".join(pieces)))
    assert table.column_names == list(expected[0])
    rows = table.to_pylist()
    assert len(rows) == len(expected) == 8
    for row, line in zip(rows, expected, strict=True):
        t_utc = datetime.fromisoformat(line.pop("t_utc"))
        assert abs((row.pop("t_utc") - t_utc).total_seconds()) < 1e-3
        assert row.pop("quality") == line.pop("quality").split()
        assert {c: "" if v is None else str(v) for c, v in row.items()} == line
    assert table.schema.metadata[b"title"] == b"made"


def test_means_have_their_counts_and_an_empty_run_has_columns(tmp_path: Path) -> None:
    path = tmp_path / FILE_NAME
    with Logbook(path) as log:
        log.start(new_run(every_s=1.0))
        log.append(reading(9), t_s=0.5, spread=Spread(10, 0.25, 0.5))
        log.end(0)
        log.start(new_run())
        log.end(0)
    with LogReader(path) as log_reader:
        means, nothing = (
            parquet.read_table(io.BytesIO(b"".join(parquet_of(log_reader, run_id))))
            for run_id in (1, 2)
        )
    assert means.column("n").to_pylist() == [10]
    assert means.column("t_utc").to_pylist()[0].tzinfo is not None
    assert means.column("t_utc").to_pylist()[0] > datetime(2023, 11, 14, tzinfo=UTC)
    assert nothing.num_rows == 0
    assert "x_arcsec" in nothing.column_names


def test_an_id_that_is_none(tmp_path: Path) -> None:
    with (
        LogReader(log_of(tmp_path, [reading(0)])) as log,
        pytest.raises(BadInput, match="there is no run 2"),
    ):
        parquet_of(log, 2)
