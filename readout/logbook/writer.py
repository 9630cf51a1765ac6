"""The one thread that writes a logbook.

``append`` never waits: a reading goes into a bounded queue, the thread commits what has come every
quarter of a second, rows and summaries in one transaction. What cannot be written is told at the
next ``append``; a queue that is full refuses. Nothing is lost in silence.
"""

from __future__ import annotations

import contextlib
import logging
import queue
import sqlite3
import threading
import time
from collections.abc import Callable
from concurrent.futures import Future
from contextlib import ExitStack
from pathlib import Path
from types import TracebackType
from typing import Any, NamedTuple, Self

from readout.errors import NotNow, NotRecorded
from readout.logbook.connection import held, open_writing
from readout.logbook.schema import key_of
from readout.logbook.statements import (
    CRASHED,
    STOPPED,
    UNWRITABLE,
    NewRun,
    Note,
    Row,
    Spread,
    end_open_runs,
    end_run,
    in_transaction,
    insert_run,
    note_of_calibration,
    note_of_event,
    write,
)
from readout.model import Reading

log = logging.getLogger(__name__)

CAPACITY = 20_000
"""Rows the queue holds: longer than another program may keep the file locked."""


class _Job(NamedTuple):
    """Work for the writing thread. ``begins``: with it a run begins, unburdened by what failed."""

    work: Callable[[sqlite3.Connection], Any]
    done: Future[Any]
    begins: bool = False


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
        self._inbox: queue.Queue[Row | Note | _Job | None] = queue.Queue(capacity)
        self._lock = threading.Lock()
        self._run_id: int | None = None
        self._failure: NotRecorded | None = None  # what callers are told
        self._broken = False  # what the writer knows: rows of this run have been lost
        self._committed_seq: int | None = None
        with ExitStack() as stack:
            stack.enter_context(held(path))
            self._connection = open_writing(path)
            stack.callback(self._connection.close)
            end_open_runs(self._connection, CRASHED)
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
            run_id = int(self._do(lambda connection: insert_run(connection, run), begins=True))
            self._run_id = run_id
            return run_id

    def append(self, reading: Reading, *, t_s: float, spread: Spread | None = None) -> None:
        """Queue a reading of the open run, ``t_s`` seconds after its start. Never waits.

        Raises NotRecorded if it, or one before it, cannot be written; NotNow without a run.
        """
        run_id = self._run_id
        if run_id is None:
            raise NotNow("no run is being recorded: start one first")
        key = key_of(run_id, reading.seq)
        self._queue(Row(run_id, key, round(t_s * 1e6), reading, spread))

    def note_calibration(self, from_seq: int, calibration_id: str, document: str) -> None:
        """Queue the calibration, whole, that the open run's readings have from ``from_seq`` on."""
        self._queue(note_of_calibration(self._run_id, from_seq, calibration_id, document))

    def note_event(self, t_utc_ns: int, event: str, text: str) -> None:
        """Queue something that happened, of the open run if there is one."""
        self._queue(note_of_event(self._run_id, t_utc_ns, event, text))

    def end(self, ended_utc_ns: int, ending: str = STOPPED) -> None:
        """End the open run; everything appended is written on return. Raises NotRecorded."""
        with self._lock:
            run_id, self._run_id = self._run_id, None
            if run_id is None:
                return
            self._do(
                lambda connection: end_run(
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

    def _queue(self, item: Row | Note) -> None:
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

    def _do(self, work: Callable[[sqlite3.Connection], Any], *, begins: bool = False) -> Any:
        """Have the writer do ``work`` after all that is queued, in a transaction of its own."""
        done: Future[Any] = Future()
        job = _Job(work, done, begins)
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

    def _commit(self, rows: list[Row], notes: list[Note]) -> None:
        try:
            in_transaction(self._connection, lambda: write(self._connection, rows, notes))
        except Exception as error:
            log.debug("a commit failed", exc_info=True)
            self._broken = True
            self._failure = self._not_recorded(error)
            self._on_failure(str(self._failure))
        else:
            if rows:
                self._committed_seq = rows[-1].reading.seq

    def _gather(self) -> tuple[list[Row], list[Note], _Job | None, bool]:
        """What comes within one interval, up to a job or the end."""
        rows: list[Row] = []
        notes: list[Note] = []
        due_s: float | None = None
        while True:
            try:
                wait_s = None if due_s is None else max(0.0, due_s - time.monotonic())
                item = self._inbox.get(timeout=wait_s)
            except queue.Empty:
                return rows, notes, None, True
            match item:
                case Row():
                    rows.append(item)
                case Note():
                    notes.append(item)
                case _Job():
                    return rows, notes, item, True
                case None:
                    return rows, notes, None, False
            if due_s is None:
                due_s = time.monotonic() + self._commit_every_s

    def _answer(self, job: _Job) -> None:
        try:
            result = in_transaction(self._connection, lambda: job.work(self._connection))
        except Exception as error:
            log.debug("a job failed", exc_info=True)
            job.done.set_exception(self._not_recorded(error))
        except BaseException as error:
            job.done.set_exception(error)
            raise
        else:
            if job.begins:  # here, so that no commit can fail between the beginning and its telling
                self._broken, self._failure, self._committed_seq = False, None, None
            job.done.set_result(result)

    def _not_recorded(self, error: Exception) -> NotRecorded:
        """What to tell; of a fault of our own, too: it must not pass for a run that goes on."""
        remedy = (
            "make room on the disk or look at the permissions"
            if isinstance(error, sqlite3.Error)
            else "please report it"
        )
        return NotRecorded(
            f"the log {self.path} cannot be written ({error}): {remedy}, then start a new run"
        )
