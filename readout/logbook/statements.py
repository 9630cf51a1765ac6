"""What a run and its rows become in SQL: pure statements on a connection, no queue, no thread."""

from __future__ import annotations

import json
import math
import sqlite3
from collections.abc import Callable
from dataclasses import dataclass, field
from typing import Any, NamedTuple, TypeVar

import numpy as np

from readout.logbook.schema import LEVELS_S
from readout.logbook.summary import UPSERT, AxisColumns, summarise
from readout.model import Quality, Reading

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


class Row(NamedTuple):
    """A reading and where it belongs."""

    run_id: int
    key: int
    t_us: int
    reading: Reading
    spread: Spread | None


class Note(NamedTuple):
    """Something beside the readings, to be inserted as it stands."""

    statement: str
    values: tuple[object, ...]


def note_of_calibration(
    run_id: int | None, from_seq: int, calibration_id: str, document: str
) -> Note:
    """The calibration, whole, that the readings of a run have from ``from_seq`` on."""
    return Note(
        "INSERT OR REPLACE INTO calibration VALUES (?, ?, ?, ?)",
        (run_id, from_seq, _text(calibration_id), _text(document)),
    )


def note_of_event(run_id: int | None, t_utc_ns: int, event: str, text: str) -> Note:
    """Something that happened, of a run if one is open."""
    return Note(
        "INSERT INTO event (run_id, t_utc_ns, event, text) VALUES (?, ?, ?, ?)",
        (run_id, t_utc_ns, _text(event), _text(text)),
    )


def _text(text: str) -> str:
    """``text`` as the file can hold it: a name that is not UTF-8 has its odd bytes spelt out."""
    return text.encode("utf-8", "backslashreplace").decode("utf-8")


_T = TypeVar("_T")


def in_transaction(connection: sqlite3.Connection, work: Callable[[], _T]) -> _T:
    """Do ``work`` wholly or not at all."""
    connection.execute("BEGIN IMMEDIATE")
    try:
        result = work()
        connection.execute("COMMIT")
    except BaseException:
        if connection.in_transaction:  # a full disk may have rolled it back already
            connection.execute("ROLLBACK")
        raise
    return result


def insert_run(connection: sqlite3.Connection, run: NewRun) -> int:
    """Begin a run and answer its id."""
    end_open_runs(connection, UNWRITABLE)
    cursor = connection.execute(
        "INSERT INTO run (title, note, source, started_utc_ns, every_s, settings, version) "
        "VALUES (?, ?, ?, ?, ?, ?, ?)",
        (
            _text(run.title),
            _text(run.note),
            _text(run.source),
            run.started_utc_ns,
            run.every_s,
            _text(json.dumps(run.settings, allow_nan=False, ensure_ascii=False)),
            run.version,
        ),
    )
    return cursor.lastrowid or 0


def end_run(connection: sqlite3.Connection, run_id: int, ended_utc_ns: int, ending: str) -> None:
    """End a run, for the reason ``ending``."""
    connection.execute(
        "UPDATE run SET ended_utc_ns = ?, ending = ? WHERE id = ?", (ended_utc_ns, ending, run_id)
    )


def end_open_runs(connection: sqlite3.Connection, ending: str) -> None:
    """End what nobody ended, at its last reading."""
    connection.execute(
        "UPDATE run SET ending = ?, ended_utc_ns = started_utc_ns + 1000 * coalesce(last_t_us, 0) "
        "WHERE ended_utc_ns IS NULL",
        (ending,),
    )


def write(connection: sqlite3.Connection, rows: list[Row], notes: list[Note]) -> None:
    """Insert notes, rows and what the rows add to the summaries."""
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


def _values(row: Row) -> tuple[int | float | None, ...]:
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


def _write_summaries(connection: sqlite3.Connection, rows: list[Row]) -> None:
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
