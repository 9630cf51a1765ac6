"""What is appended is kept, exactly; what cannot be kept is told of."""

from __future__ import annotations

import json
import math
import sqlite3
import threading
from concurrent.futures import Future
from contextlib import closing
from pathlib import Path

import pytest
from hypothesis import given
from hypothesis import strategies as st

from readout.errors import Busy, NotNow, NotRecorded
from readout.logbook import FILE_NAME, Logbook, LogReader, Spread
from readout.logbook.connection import open_reading
from readout.logbook.statements import CRASHED, UNWRITABLE
from readout.logbook.writer import _Job
from readout.model import Quality, Reading
from tests.logbook.made import STARTED_UTC_NS, log_of, new_run, reading, unmeasured

FLOATS = (
    "x_px",
    "y_px",
    "x_arcsec",
    "y_arcsec",
    "x_sd_arcsec",
    "y_sd_arcsec",
    "x_u_arcsec",
    "y_u_arcsec",
)
NEVER_S = 3600.0
"""A commit interval that does not pass while a test runs: commits come by ``flush`` alone."""

numbers = st.one_of(st.floats(allow_nan=True, allow_infinity=True), st.just(math.nan))
flags = st.lists(st.sampled_from(list(Quality))).map(
    lambda chosen: Quality.from_words([q.name.lower() for q in chosen if q.name])
)
readings = st.builds(
    lambda values, quality: (values, quality),
    st.lists(numbers, min_size=len(FLOATS), max_size=len(FLOATS)),
    flags,
)


def logged(path: Path, columns: str) -> list[tuple[object, ...]]:
    with closing(open_reading(path)) as connection:
        return connection.execute(f"SELECT {columns} FROM reading ORDER BY run_id, seq").fetchall()


def made(seq: int, row: tuple[list[float], Quality]) -> Reading:
    values, quality = row
    return reading(seq, quality=quality, **dict(zip(FLOATS, values, strict=True)))


@given(st.lists(readings, min_size=1, max_size=40))
def test_every_number_comes_back_exactly_and_what_is_none_as_null(
    tmp_path_factory: pytest.TempPathFactory, rows: list[tuple[list[float], Quality]]
) -> None:
    given_rows = [made(seq, row) for seq, row in enumerate(rows)]
    path = log_of(tmp_path_factory.mktemp("log"), given_rows)
    expected = [
        (
            r.seq,
            *(v if math.isfinite(v) else None for v in (getattr(r, name) for name in FLOATS)),
            r.quality.value,
        )
        for r in given_rows
    ]
    assert logged(path, f"seq, {', '.join(FLOATS)}, quality") == expected


def test_times_are_those_of_the_run(tmp_path: Path) -> None:
    path = log_of(tmp_path, [reading(0, t_s=0.0), reading(1, t_s=0.0333334)])
    assert logged(path, "t_s, t_utc_ns") == [
        (0.0, STARTED_UTC_NS),
        (0.033333, STARTED_UTC_NS + 33_333_000),
    ]


def test_means_keep_count_and_scatter(tmp_path: Path) -> None:
    path = tmp_path / FILE_NAME
    with Logbook(path) as log:
        log.start(new_run(every_s=1.0))
        log.append(reading(9), t_s=0.5, spread=Spread(10, 0.25, 0.5))
        log.append(reading(19), t_s=1.5, spread=Spread(1, math.nan, math.nan))
        log.end(0)
    assert logged(path, "n, x_scatter_arcsec, y_scatter_arcsec") == [
        (10, 0.25, 0.5),
        (1, None, None),
    ]


def test_a_run_keeps_what_belongs_to_it(tmp_path: Path) -> None:
    path = tmp_path / FILE_NAME
    calibration = {"schema": "readout.calibration/1", "id": "made-1", "parameters": {"k1": 0.25}}
    with Logbook(path) as log:
        log.note_event(STARTED_UTC_NS - 5, "opened", "before any run")
        run_id = log.start(
            new_run(note="two\nlines", source="usb:0", settings={"unit": "µrad"}, version="9.9")
        )
        log.note_calibration(3, "made-1", json.dumps(calibration))
        log.append(reading(3), t_s=0.06)
        log.note_event(STARTED_UTC_NS + 7, "lost", "the cable")
        log.end(STARTED_UTC_NS + 10**9)
        log.note_event(STARTED_UTC_NS + 2 * 10**9, "opened", "after the run")
    with LogReader(path) as reader:
        run = reader.run(run_id)
        [kept] = reader.calibrations(run_id)
        events = reader.events(run_id)
    assert (run.title, run.note, run.source, run.version) == ("made", "two\nlines", "usb:0", "9.9")
    assert (run.settings, run.ended_utc_ns) == ({"unit": "µrad"}, STARTED_UTC_NS + 10**9)
    assert (run.ending, run.readings, run.duration_s) == ("stopped", 1, 0.06)
    assert (kept.from_seq, kept.document) == (3, calibration)
    assert [(e.event, e.text) for e in events] == [("lost", "the cable")]
    with closing(open_reading(path)) as connection:
        apart = connection.execute("SELECT text FROM event WHERE run_id IS NULL").fetchall()
    assert apart == [("before any run",), ("after the run",)]


def test_acknowledged_is_what_is_committed(tmp_path: Path) -> None:
    path = tmp_path / FILE_NAME
    with Logbook(path, commit_every_s=NEVER_S) as log:
        log.start(new_run())
        assert log.committed_seq is None
        for seq in range(5):
            log.append(reading(seq), t_s=seq)
        assert log.committed_seq is None
        assert logged(path, "seq") == []
        log.flush()
        assert log.committed_seq == 4
        assert logged(path, "seq") == [(0,), (1,), (2,), (3,), (4,)]
        log.end(0)
        log.start(new_run())
        assert log.committed_seq is None  # of the new run, nothing yet


def test_commits_come_by_themselves(tmp_path: Path) -> None:
    with Logbook(tmp_path / FILE_NAME, commit_every_s=0.0) as log:
        log.start(new_run())
        log.append(reading(7), t_s=0.0)
        waited = threading.Event()
        for _ in range(2000):  # at most ten seconds for what takes milliseconds
            if log.committed_seq == 7:
                break
            waited.wait(0.005)
        assert log.committed_seq == 7


def test_one_run_at_a_time(tmp_path: Path) -> None:
    with Logbook(tmp_path / FILE_NAME) as log:
        with pytest.raises(NotNow, match="no run is being recorded"):
            log.append(reading(0), t_s=0.0)
        assert log.start(new_run()) == 1
        with pytest.raises(NotNow, match="run 1 is being recorded"):
            log.start(new_run())
        log.end(0)
        assert log.start(new_run()) == 2


def test_one_writer_at_a_time(tmp_path: Path) -> None:
    path = tmp_path / FILE_NAME
    with Logbook(path) as log:
        log.start(new_run())
        with pytest.raises(Busy, match="another readout is recording"):
            Logbook(path)
        with LogReader(path) as reader:
            assert reader.run(1).ending is None  # the second one has not touched it
    with Logbook(path):
        pass


def test_a_run_nobody_ended_is_ended_at_its_last_reading(tmp_path: Path) -> None:
    path = tmp_path / FILE_NAME
    with Logbook(path) as log:  # left without `end`, as after a crash
        log.start(new_run())
        for seq in range(100):
            log.append(reading(seq), t_s=seq / 50)
    with LogReader(path) as reader:
        assert (reader.run(1).ended_utc_ns, reader.run(1).ending) == (None, None)
    with Logbook(path) as log, LogReader(path) as reader:
        run = reader.run(1)
        assert (run.ending, run.readings) == (CRASHED, 100)
        assert run.ended_utc_ns == STARTED_UTC_NS + 1_980_000_000
        assert log.start(new_run()) == 2


def test_a_run_without_a_reading_that_crashed_has_no_length(tmp_path: Path) -> None:
    path = tmp_path / FILE_NAME
    with Logbook(path) as log:
        log.start(new_run())
    with Logbook(path), LogReader(path) as reader:
        assert (reader.run(1).ended_utc_ns, reader.run(1).readings) == (STARTED_UTC_NS, 0)


def stop_writer(log: Logbook) -> threading.Event:
    """Keep the writing thread busy until the event answered is set."""
    go = threading.Event()
    begun = threading.Event()
    log._inbox.put(_Job(lambda _connection: begun.set() or go.wait(), Future()))
    assert begun.wait(10)
    return go


def test_a_full_queue_refuses_and_loses_nothing_it_took(tmp_path: Path) -> None:
    path = tmp_path / FILE_NAME
    with Logbook(path, capacity=50) as log:
        log.start(new_run())
        go = stop_writer(log)
        for seq in range(50):
            log.append(reading(seq), t_s=seq)
        with pytest.raises(NotRecorded, match="its queue is full"):
            log.append(reading(50), t_s=50.0)
        with pytest.raises(NotRecorded, match="its queue is full"):  # no hole in the middle
            log.append(reading(51), t_s=51.0)
        go.set()
        with pytest.raises(NotRecorded, match="its queue is full"):
            log.end(STARTED_UTC_NS)
        assert log.start(new_run()) == 2
        log.append(reading(60), t_s=0.0)
        log.end(STARTED_UTC_NS)
    assert logged(path, "seq") == [(seq,) for seq in (*range(50), 60)]
    with LogReader(path) as reader:
        assert (reader.run(1).ending, reader.run(1).readings) == (UNWRITABLE, 50)
        assert reader.run(2).ending == "stopped"


@pytest.mark.parametrize(
    ("spoil", "mend", "words"),
    [
        # A limit on its pages makes SQLite say what it says on a full disk.
        ("PRAGMA max_page_count = 1", "PRAGMA max_page_count = 1000000", "disk is full"),
        ("PRAGMA query_only = 1", "PRAGMA query_only = 0", "readonly database"),
    ],
)
def test_a_log_that_cannot_be_written_is_told_of(
    tmp_path: Path, spoil: str, mend: str, words: str
) -> None:
    path = tmp_path / FILE_NAME
    told: list[str] = []
    with Logbook(path, commit_every_s=NEVER_S, on_failure=told.append) as log:
        log.start(new_run())
        for seq in range(200):
            log.append(reading(seq), t_s=seq / 50)
        log.flush()
        log._connection.execute(spoil)  # the writing thread waits for its queue meanwhile
        for seq in range(200, 2000):
            log.append(reading(seq), t_s=seq / 50)
        with pytest.raises(NotRecorded, match=words):
            log.flush()
        assert len(told) == 1
        assert words in told[0]
        assert "\n" not in told[0]
        assert log.committed_seq == 199
        for _ in range(2):
            with pytest.raises(NotRecorded, match=words):
                log.append(reading(2000), t_s=40.0)
        with pytest.raises(NotRecorded, match=words):
            log.note_event(0, "lost", "…")

        log._connection.execute(mend)
        assert log.start(new_run()) == 2  # room was made: no need to start the program again
        log.append(reading(3000), t_s=0.0)
        log.end(STARTED_UTC_NS + 1)
    assert logged(path, "seq") == [(seq,) for seq in (*range(200), 3000)]
    with LogReader(path) as reader:
        assert (reader.run(1).ending, reader.run(1).readings) == (UNWRITABLE, 200)
        assert reader.run(1).ended_utc_ns == STARTED_UTC_NS + 3_980_000_000
    assert len(told) == 1


def test_a_run_cannot_begin_in_a_log_that_cannot_be_written(tmp_path: Path) -> None:
    with Logbook(tmp_path / FILE_NAME) as log:
        log._connection.execute("PRAGMA query_only = 1")
        with pytest.raises(NotRecorded, match="look at the permissions"):
            log.start(new_run())
        with pytest.raises(NotNow):
            log.append(reading(0), t_s=0.0)


def test_closing_twice_and_asking_afterwards(tmp_path: Path) -> None:
    log = Logbook(tmp_path / FILE_NAME)
    log.close()
    log.close()
    with pytest.raises(NotRecorded, match="is closed"):
        log.start(new_run())


def test_a_closed_log_is_one_file(tmp_path: Path) -> None:
    log_of(tmp_path, [unmeasured(0), reading(1)])
    assert {p.name for p in tmp_path.iterdir()} == {FILE_NAME, f"{FILE_NAME}.lock"}
    with closing(sqlite3.connect(tmp_path / FILE_NAME)) as connection:
        assert connection.execute("PRAGMA integrity_check").fetchone() == ("ok",)


@pytest.mark.filterwarnings("ignore::pytest.PytestUnhandledThreadExceptionWarning")
def test_an_end_of_the_writing_thread_leaves_nobody_waiting(tmp_path: Path) -> None:
    def leave(_connection: sqlite3.Connection) -> None:
        raise SystemExit

    with Logbook(tmp_path / FILE_NAME) as log:
        log.start(new_run())
        with pytest.raises(SystemExit):
            log._do(leave)
        log._thread.join()
        with pytest.raises(NotRecorded, match="is closed"):
            log.append(reading(0), t_s=0.0)
        with pytest.raises(NotRecorded, match="is closed"):
            log.end(0)


def test_a_fault_of_ours_is_told_of_and_the_next_run_is_kept(tmp_path: Path) -> None:
    told: list[str] = []
    with Logbook(tmp_path / FILE_NAME, on_failure=told.append) as log:
        log.start(new_run())
        with pytest.raises(NotRecorded, match="division by zero"):
            log._do(lambda _connection: 1 / 0)
        log.note_event(1 << 63, "odd", "a time SQLite cannot hold")
        with pytest.raises(NotRecorded, match="please report it"):
            log.flush()
        assert len(told) == 1
        run_id = log.start(new_run())
        log.append(reading(0), t_s=0.0)
        log.end(0)
    with LogReader(tmp_path / FILE_NAME) as reader:
        assert reader.run(run_id).readings == 1


def test_names_that_are_not_utf_8_are_kept_spelt_out(tmp_path: Path) -> None:
    path = tmp_path / FILE_NAME
    odd = b"fr\xff".decode("utf-8", "surrogateescape")  # as the system hands over such a name
    with Logbook(path) as log:
        run_id = log.start(new_run(title=odd, note=odd, source=odd, settings={"source": odd}))
        log.note_event(1, "opened", f"folder {odd}")
        log.note_calibration(0, odd, json.dumps({"id": odd}, ensure_ascii=False))
        log.append(reading(0), t_s=0.0)
        log.end(0)
    with LogReader(path) as reader:
        run = reader.run(run_id)
        assert (run.title, run.note, run.source) == ("fr\\udcff",) * 3
        assert run.settings == {"source": odd}
        assert [event.text for event in reader.events(run_id)] == ["folder fr\\udcff"]
        assert run.readings == 1


def test_a_failure_while_a_run_begins_is_not_forgotten(tmp_path: Path) -> None:
    """What fails right after the beginning of a run, before `start` returns, belongs to the run."""
    with Logbook(tmp_path / FILE_NAME, commit_every_s=0.0) as log:
        do, told = log._do, threading.Event()
        log._on_failure = lambda _line: told.set()

        def begin_and_fail(*arguments: object, **options: object) -> object:
            run_id = do(*arguments, **options)
            log.note_event(1 << 63, "odd", "a time SQLite cannot hold")
            assert told.wait(10)
            return run_id

        log._do = begin_and_fail  # type: ignore[method-assign] (a place between two threads)
        log.start(new_run())
        with pytest.raises(NotRecorded, match="cannot be written"):
            log.append(reading(0), t_s=0.0)
