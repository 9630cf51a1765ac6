"""The one thread that writes a logbook.

``append`` never waits: a reading goes into a bounded queue, the thread commits what has come every
quarter of a second, rows and summaries in one transaction. What cannot be written is told at the
next ``append``; a queue that is full refuses. Nothing is lost in silence.
"""

from __future__ import annotations

import contextlib
import json
import math
import queue
import sqlite3
import threading
import time
from collections.abc import Callable
from concurrent.futures import Future
from contextlib import ExitStack
from dataclasses import dataclass, field
from pathlib import Path
from types import TracebackType
from typing import Any, NamedTuple, Self, TypeVar

import numpy as np

from readout.errors import NotNow, NotRecorded
from readout.logbook.connection import held, open_writing
from readout.logbook.schema import LEVELS_S, key_of
from readout.logbook.summary import UPSERT, AxisColumns, summarise
from readout.model import Quality, Reading

CAPACITY = 20_000
"""Rows the queue holds: longer than another program may keep the file locked."""

CRASHED = "ended by a crash"
STOPPED = "stopped"
UNWRITABLE = "the log could not be written"

_INSERT_READING = "INSERT INTO reading_row VALUES (?, ?, ?, ?, ?, ?, ?, ?, ?, ?, ?)"
_INSERT_SPREAD = "INSERT INTO spread VALUES (?, ?, ?, ?)"


@dataclass(frozen=True, slots=True)
class NewRun:
    """What is known of a run when it begins. ``every_s`` 0: every reading, else means."""

    title: str
    started_utc_ns: int
    note: str = ""
    source: str = ""
    every_s: float = 0.0
    settings: dict[str, Any] = field(default_factory=dict)
    version: str = ""


class Spread(NamedTuple):
    """What a row that is a mean has besides: count, and scatter of what went into it."""

    n: int
    x_scatter_arcsec: float
    y_scatter_arcsec: float


class _Row(NamedTuple):
    run_id: int
    key: int
    t_us: int
    reading: Reading
    spread: Spread | None


class _Note(NamedTuple):
    statement: str
    values: tuple[object, ...]


class _Job(NamedTuple):
    work: Callable[[sqlite3.Connection], Any]
    done: Future[Any]


class Logbook:
    """The logbook at ``path``, open for writing until ``close``.

    A run that a crash left open is ended when the book is opened, at its last reading.
    ``on_failure`` is called once, from the writing thread, with a line that says why a run cannot
    be written any more. Raises BadInput or Busy if the book cannot be opened.
    """

    def __init__(
        self,
        path: Path,
        *,
        commit_every_s: float = 0.25,
        capacity: int = CAPACITY,
        on_failure: Callable[[str], None] = lambda _line: None,
    ) -> None:
        self.path = path
        self._commit_every_s = commit_every_s
        self._on_failure = on_failure
        self._inbox: queue.Queue[_Row | _Note | _Job | None] = queue.Queue(capacity)
        self._lock = threading.Lock()
        self._run_id: int | None = None
        self._failure: NotRecorded | None = None  # what callers are told
        self._broken = False  # what the writer knows: rows of this run have been lost
        self._committed_seq: int | None = None
        with ExitStack() as stack:
            stack.enter_context(held(path))
            self._connection = open_writing(path)
            stack.callback(self._connection.close)
            _end_open_runs(self._connection, CRASHED)
            self._open = stack.pop_all()
        self._thread = threading.Thread(target=self._write_all, name="logbook", daemon=True)
        self._thread.start()

    def __enter__(self) -> Self:
        return self

    def __exit__(
        self,
        exc_type: type[BaseException] | None,
        exc: BaseException | None,
        tb: TracebackType | None,
    ) -> None:
        self.close()

    # -- from any thread ----------------------------------------------------------------------

    @property
    def committed_seq(self) -> int | None:
        """The number of the newest reading of this run that no crash can take away any more."""
        return self._committed_seq

    def start(self, run: NewRun) -> int:
        """Begin a run and answer its id. Raises NotNow while another one is open, NotRecorded."""
        with self._lock:
            if self._run_id is not None and self._failure is None:
                raise NotNow(f"run {self._run_id} is being recorded: stop it first")
            run_id = int(self._do(lambda connection: self._begin(connection, run)))
            self._failure, self._committed_seq, self._run_id = None, None, run_id
            return run_id

    def append(self, reading: Reading, *, t_s: float, spread: Spread | None = None) -> None:
        """Queue a reading of the open run, ``t_s`` seconds after its start. Never waits.

        Raises NotRecorded if it, or one before it, cannot be written; NotNow without a run.
        """
        run_id = self._run_id
        if run_id is None:
            raise NotNow("no run is being recorded: start one first")
        key = key_of(run_id, reading.seq)
        self._queue(_Row(run_id, key, round(t_s * 1e6), reading, spread))

    def note_calibration(self, from_seq: int, calibration_id: str, document: str) -> None:
        """Queue the calibration, whole, that the open run's readings have from ``from_seq`` on."""
        values = self._run_id, from_seq, calibration_id, document
        self._queue(_Note("INSERT OR REPLACE INTO calibration VALUES (?, ?, ?, ?)", values))

    def note_event(self, t_utc_ns: int, event: str, text: str) -> None:
        """Queue something that happened, of the open run if there is one."""
        values = self._run_id, t_utc_ns, event, text
        self._queue(
            _Note("INSERT INTO event (run_id, t_utc_ns, event, text) VALUES (?, ?, ?, ?)", values)
        )

    def end(self, ended_utc_ns: int, ending: str = STOPPED) -> None:
        """End the open run; everything appended is written on return. Raises NotRecorded."""
        with self._lock:
            run_id, self._run_id = self._run_id, None
            if run_id is None:
                return
            self._do(
                lambda connection: _end_run(
                    connection, run_id, ended_utc_ns, UNWRITABLE if self._failure else ending
                )
            )
            if self._failure is not None:
                raise self._failure

    def flush(self) -> None:
        """Return when everything queued so far is committed. Raises NotRecorded."""
        self._do(lambda _connection: None)
        if self._failure is not None:
            raise self._failure

    def close(self) -> None:
        """Write what is queued and let the file go. A run still open stays so: end it before."""
        while self._thread.is_alive():
            try:
                self._inbox.put(None, timeout=0.1)
                break
            except queue.Full:
                continue
        self._thread.join()
        self._open.close()

    def _queue(self, item: _Row | _Note) -> None:
        if self._failure is not None:
            raise self._failure
        try:
            self._inbox.put_nowait(item)
        except queue.Full:
            self._failure = NotRecorded(
                f"the log {self.path} is written too slowly, its queue is full: use a faster disk "
                "or record means, then start a new run"
            )
            raise self._failure from None

    def _do(self, work: Callable[[sqlite3.Connection], Any]) -> Any:
        """Have the writer do ``work`` after all that is queued, in a transaction of its own."""
        done: Future[Any] = Future()
        job = _Job(work, done)
        while self._thread.is_alive():
            try:
                self._inbox.put(job, timeout=0.1)
                break
            except queue.Full:
                continue
        while self._thread.is_alive() or done.done():
            with contextlib.suppress(TimeoutError):
                return done.result(timeout=0.5)
        raise self._closed()

    def _closed(self) -> NotRecorded:
        return NotRecorded(f"the log {self.path} is closed: start readout again")

    # -- the writing thread -------------------------------------------------------------------

    def _write_all(self) -> None:
        more = True
        try:
            while more:
                rows, notes, job, more = self._gather()
                if (rows or notes) and not self._broken:
                    self._commit(rows, notes)
                if job is not None:
                    self._answer(job)
        finally:  # also where a fault of ours ends the thread: nobody may go on in good faith
            self._failure = self._failure or self._closed()

    def _begin(self, connection: sqlite3.Connection, run: NewRun) -> int:
        run_id = _insert_run(connection, run)
        self._broken = False
        return run_id

    def _commit(self, rows: list[_Row], notes: list[_Note]) -> None:
        try:
            _in_transaction(self._connection, lambda: _write(self._connection, rows, notes))
        except sqlite3.Error as error:
            self._broken = True
            self._failure = self._not_recorded(error)
            self._on_failure(str(self._failure))
        else:
            if rows:
                self._committed_seq = rows[-1].reading.seq

    def _gather(self) -> tuple[list[_Row], list[_Note], _Job | None, bool]:
        """What comes within one interval, up to a job or the end."""
        rows: list[_Row] = []
        notes: list[_Note] = []
        due_s: float | None = None
        while True:
            try:
                wait_s = None if due_s is None else max(0.0, due_s - time.monotonic())
                item = self._inbox.get(timeout=wait_s)
            except queue.Empty:
                return rows, notes, None, True
            match item:
                case _Row():
                    rows.append(item)
                case _Note():
                    notes.append(item)
                case _Job():
                    return rows, notes, item, True
                case None:
                    return rows, notes, None, False
            if due_s is None:
                due_s = time.monotonic() + self._commit_every_s

    def _answer(self, job: _Job) -> None:
        try:
            result = _in_transaction(self._connection, lambda: job.work(self._connection))
        except sqlite3.Error as error:
            job.done.set_exception(self._not_recorded(error))
        except BaseException as error:
            job.done.set_exception(error)
            raise
        else:
            job.done.set_result(result)

    def _not_recorded(self, error: sqlite3.Error) -> NotRecorded:
        return NotRecorded(
            f"the log {self.path} cannot be written ({error}): make room on the disk or look at "
            "the permissions, then start a new run"
        )


_T = TypeVar("_T")


def _in_transaction(connection: sqlite3.Connection, work: Callable[[], _T]) -> _T:
    connection.execute("BEGIN IMMEDIATE")
    try:
        result = work()
        connection.execute("COMMIT")
    except BaseException:
        if connection.in_transaction:  # a full disk may have rolled it back already
            connection.execute("ROLLBACK")
        raise
    return result


def _insert_run(connection: sqlite3.Connection, run: NewRun) -> int:
    _end_open_runs(connection, UNWRITABLE)
    cursor = connection.execute(
        "INSERT INTO run (title, note, source, started_utc_ns, every_s, settings, version) "
        "VALUES (?, ?, ?, ?, ?, ?, ?)",
        (
            run.title,
            run.note,
            run.source,
            run.started_utc_ns,
            run.every_s,
            json.dumps(run.settings, allow_nan=False, ensure_ascii=False),
            run.version,
        ),
    )
    return cursor.lastrowid or 0


def _end_run(connection: sqlite3.Connection, run_id: int, ended_utc_ns: int, ending: str) -> None:
    connection.execute(
        "UPDATE run SET ended_utc_ns = ?, ending = ? WHERE id = ?", (ended_utc_ns, ending, run_id)
    )


def _end_open_runs(connection: sqlite3.Connection, ending: str) -> None:
    """End what nobody ended, at its last reading."""
    connection.execute(
        "UPDATE run SET ending = ?, ended_utc_ns = started_utc_ns + 1000 * coalesce(last_t_us, 0) "
        "WHERE ended_utc_ns IS NULL",
        (ending,),
    )


def _write(connection: sqlite3.Connection, rows: list[_Row], notes: list[_Note]) -> None:
    for note in notes:
        connection.execute(note.statement, note.values)
    if not rows:
        return
    connection.executemany(_INSERT_READING, map(_values, rows))
    connection.executemany(
        _INSERT_SPREAD,
        (
            (
                r.key,
                r.spread.n,
                _finite(r.spread.x_scatter_arcsec),
                _finite(r.spread.y_scatter_arcsec),
            )
            for r in rows
            if r.spread is not None
        ),
    )
    _write_summaries(connection, rows)
    last = rows[-1]
    connection.execute(
        "UPDATE run SET readings = readings + ?, last_seq = ?, "
        "last_t_us = max(coalesce(last_t_us, 0), ?) WHERE id = ?",
        (len(rows), last.reading.seq, max(r.t_us for r in rows), last.run_id),
    )


def _values(row: _Row) -> tuple[int | float | None, ...]:
    r = row.reading
    return (
        row.key,
        row.t_us,
        _finite(r.x_px),
        _finite(r.y_px),
        _finite(r.x_arcsec),
        _finite(r.y_arcsec),
        _finite(r.x_sd_arcsec),
        _finite(r.y_sd_arcsec),
        _finite(r.x_u_arcsec),
        _finite(r.y_u_arcsec),
        r.quality.value,
    )


def _finite(value: float) -> float | None:
    """What could not be measured is missing (NULL), never a number."""
    return value if math.isfinite(value) else None


def _write_summaries(connection: sqlite3.Connection, rows: list[_Row]) -> None:
    t_us = np.array([r.t_us for r in rows], dtype=np.int64)
    x_arcsec = np.array([_finite(r.reading.x_arcsec) for r in rows], dtype=np.float64)
    y_arcsec = np.array([_finite(r.reading.y_arcsec) for r in rows], dtype=np.float64)
    unflagged = np.array([r.reading.quality is Quality.OK for r in rows])
    good = unflagged & np.isfinite(x_arcsec) & np.isfinite(y_arcsec)
    for level_s in LEVELS_S:
        s = summarise(t_us, x_arcsec, y_arcsec, good, level_s * 1_000_000)
        first_seq = [rows[i].reading.seq for i in s.first.tolist()]
        connection.executemany(
            UPSERT,
            zip(
                [rows[0].run_id] * len(first_seq),
                [level_s] * len(first_seq),
                s.number.tolist(),
                first_seq,
                s.n.tolist(),
                s.n_good.tolist(),
                *_columns(s.x),
                *_columns(s.y),
                strict=True,
            ),
        )


def _columns(axis: AxisColumns) -> list[list[float]]:
    return [column.tolist() for column in axis]
