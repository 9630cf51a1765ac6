"""An export read again is what was recorded; a copied run is the run."""

from __future__ import annotations

import csv
import io
import json
import sqlite3
from collections.abc import Callable, Iterator
from contextlib import closing
from pathlib import Path

import pytest

from readout.errors import BadInput
from readout.files.readings_file import ReadingsWriter
from readout.logbook import FILE_NAME, Logbook, LogReader, Spread
from readout.logbook.export import copy_run, csv_of, ndjson_of
from readout.model import Quality, Reading
from readout.rows import reading_row
from tests.logbook.made import STARTED_UTC_NS, log_of, new_run, reading, unmeasured

READINGS = [
    reading(0),
    unmeasured(1),
    reading(2, quality=Quality.AT_EDGE | Quality.DIM),
    reading(3, 0.0, -1.25e-7, x_sd_arcsec=0.00012345678),
]


def text_of(export: Callable[[LogReader, int], Iterator[str]], path: Path, run_id: int = 1) -> str:
    with LogReader(path) as reader:
        return "".join(export(reader, run_id))


def test_json_lines_are_the_rows_of_measure(tmp_path: Path) -> None:
    path = log_of(tmp_path, READINGS)
    rows = [json.loads(line) for line in text_of(ndjson_of, path).splitlines()]
    assert rows == [reading_row(r) for r in READINGS]
    assert [list(row) for row in rows] == [list(reading_row(READINGS[0]))] * 4


def test_the_table_is_that_of_measure(tmp_path: Path) -> None:
    path = log_of(tmp_path, READINGS)
    as_measured = io.StringIO()
    with ReadingsWriter(as_measured) as writer:
        for each in READINGS:
            writer.write(each)
    assert text_of(csv_of, path) == as_measured.getvalue()
    rows = list(csv.DictReader(io.StringIO(text_of(csv_of, path))))
    assert (rows[1]["x_arcsec"], rows[1]["quality"]) == ("", "no_image")
    assert rows[2]["quality"] == "dim at_edge"


def test_rows_that_are_means_have_count_and_scatter(tmp_path: Path) -> None:
    path = tmp_path / FILE_NAME
    with Logbook(path) as log:
        log.start(new_run(every_s=2.0))
        log.append(reading(9), t_s=1.0, spread=Spread(10, 0.5, 0.25))
        log.append(unmeasured(19), t_s=3.0, spread=Spread(0, float("nan"), float("nan")))
        log.end(0)
    first, second = csv.DictReader(io.StringIO(text_of(csv_of, path)))
    assert [first[name] for name in ("n", "x_scatter_arcsec", "y_scatter_arcsec")] == [
        "10",
        "0.5",
        "0.25",
    ]
    assert [second[name] for name in ("n", "x_scatter_arcsec")] == ["0", ""]
    line = json.loads(text_of(ndjson_of, path).splitlines()[1])
    assert (line["n"], line["y_scatter_arcsec"], line["x_arcsec"]) == (0, None, None)


def test_pieces_stay_small_however_long_the_run(tmp_path: Path) -> None:
    def many() -> Iterator[Reading]:
        yield from (reading(k) for k in range(35_000))

    with LogReader(log_of(tmp_path, many())) as reader:
        pieces = [piece.count("\n") for piece in csv_of(reader, 1)]
    assert sum(pieces) == 35_001
    assert max(pieces) <= 10_000


def test_a_run_without_readings_is_a_header(tmp_path: Path) -> None:
    path = log_of(tmp_path, [])
    assert text_of(csv_of, path).startswith("t_utc,t_s,x_arcsec,y_arcsec,")
    assert text_of(csv_of, path).count("\n") == 1
    assert text_of(ndjson_of, path) == ""


@pytest.mark.parametrize("export", [csv_of, ndjson_of])
def test_an_id_that_is_none_is_refused_before_anything_is_written(
    tmp_path: Path, export: Callable[[LogReader, int], Iterator[str]]
) -> None:
    with (
        LogReader(log_of(tmp_path, [])) as reader,
        pytest.raises(BadInput, match="there is no run 5"),
    ):
        export(reader, 5)


def test_a_copied_run_is_alone_and_whole(tmp_path: Path) -> None:
    path = tmp_path / FILE_NAME
    with Logbook(path) as log:
        for run_id in (1, 2, 3):
            log.start(new_run(title=f"run {run_id}", every_s=1.0))
            log.note_calibration(0, "made-1", "{}")
            for seq in range(300):
                log.append(reading(seq), t_s=seq / 50, spread=Spread(run_id, 0.1, 0.2))
            log.note_event(STARTED_UTC_NS, "lost", f"in run {run_id}")
            log.end(STARTED_UTC_NS + run_id)
        fresh = tmp_path / "handed over.sqlite"
        copy_run(path, 2, fresh)  # while the log is in use
    assert text_of(csv_of, fresh, 2) == text_of(csv_of, path, 2)
    with LogReader(fresh) as copied, LogReader(path) as whole:
        assert copied.runs() == [whole.run(2)]
        assert copied.calibrations(2) == whole.calibrations(2)
        assert [e.text for e in copied.events(2)] == ["in run 2"]
        assert copied.series(2, points=10).n.tolist() == whole.series(2, points=10).n.tolist()
    with closing(sqlite3.connect(fresh)) as connection:
        for table, rows in (("reading_row", 300), ("spread", 300), ("event", 1), ("run", 1)):
            assert connection.execute(f"SELECT count(*) FROM {table}").fetchone() == (rows,)
        assert connection.execute("PRAGMA integrity_check").fetchone() == ("ok",)
    assert {p.name for p in tmp_path.glob("handed*")} == {"handed over.sqlite"}


def test_copying_overwrites_nothing(tmp_path: Path) -> None:
    path = log_of(tmp_path, READINGS)
    with pytest.raises(BadInput, match="exists"):
        copy_run(path, 1, path)
    with pytest.raises(BadInput, match="there is no run 9"):
        copy_run(path, 9, tmp_path / "new.sqlite")
    assert not (tmp_path / "new.sqlite").exists()
    with pytest.raises(BadInput, match="cannot be opened"):
        copy_run(path, 1, tmp_path / "no such folder" / "new.sqlite")


def test_each_row_says_whether_its_signs_were_proven(tmp_path: Path) -> None:
    path = tmp_path / FILE_NAME
    with Logbook(path) as log:
        log.start(new_run())
        for seq in range(4):
            if seq == 1:
                log.note_calibration(1, "parts", json.dumps({"id": "parts", "signs": "unproven"}))
            if seq == 3:
                log.note_calibration(3, "bench", json.dumps({"id": "bench", "signs": "proven"}))
            log.append(reading(seq), t_s=seq / 50)
        log.end(STARTED_UTC_NS + 10**9, "stopped")
    rows = [json.loads(line) for line in text_of(ndjson_of, path).splitlines()]
    assert [row["signs"] for row in rows] == [None, "unproven", "unproven", "proven"]
    table = csv.DictReader(io.StringIO(text_of(csv_of, path)))
    assert [row["signs"] for row in table] == ["", "unproven", "unproven", "proven"]
