"""Looking into a logbook, from any thread or program, while it is being written."""

from __future__ import annotations

import json
import math
import sqlite3
from collections.abc import Iterator
from contextlib import contextmanager
from dataclasses import dataclass
from pathlib import Path
from types import TracebackType
from typing import Any, NamedTuple, Self

import numpy as np

from readout.errors import BadInput
from readout.logbook.connection import open_reading
from readout.logbook.schema import RUNS_AT_MOST, key_of, keys_of
from readout.logbook.series import Cells, Series, choose_level_s, series_of
from readout.model import F64
from readout.stability import TiltSeries

CHUNK = 10_000
LONGEST_S = 1e9  # thirty years


@dataclass(frozen=True, slots=True)
class Run:
    """A run as the log holds it. ``ended_utc_ns`` and ``ending`` are None while it is open;
    ``duration_s`` reaches from its start to its last reading.
    """

    id: int
    title: str
    note: str
    source: str
    started_utc_ns: int
    ended_utc_ns: int | None
    ending: str | None
    every_s: float
    settings: dict[str, Any]
    version: str
    readings: int
    duration_s: float


@dataclass(frozen=True, slots=True)
class RunCalibration:
    """A calibration the readings of a run have from ``from_seq`` on; ``document`` as in a file."""

    from_seq: int
    document: dict[str, Any]


@dataclass(frozen=True, slots=True)
class LoggedEvent:
    """Something that happened, with one line for people; of a run if one was open."""

    run_id: int | None
    t_utc_ns: int
    event: str
    text: str


class LoggedReading(NamedTuple):
    """A row of a run. None is a number that is missing; ``n`` and scatter only of means."""

    seq: int
    t_us: int
    x_arcsec: float | None
    y_arcsec: float | None
    x_sd_arcsec: float | None
    y_sd_arcsec: float | None
    x_u_arcsec: float | None
    y_u_arcsec: float | None
    quality: int
    x_px: float | None
    y_px: float | None
    n: int | None
    x_scatter_arcsec: float | None
    y_scatter_arcsec: float | None


class LogReader:
    """The logbook at ``path``, read only. Raises BadInput if there is none that can be read."""

    def __init__(self, path: Path) -> None:
        self.path = path
        self._connection = open_reading(path)

    def __enter__(self) -> Self:
        return self

    def __exit__(
        self,
        exc_type: type[BaseException] | None,
        exc: BaseException | None,
        tb: TracebackType | None,
    ) -> None:
        self._connection.close()

    def runs(self) -> list[Run]:
        """All runs, the newest first."""
        with self._told():
            return [_run(row) for row in self._named(f"{_RUNS} ORDER BY id DESC")]

    def run(self, run_id: int) -> Run:
        """Raises BadInput for an id that is none."""
        with self._told():
            known = 0 < run_id < RUNS_AT_MOST
            row = self._named(f"{_RUNS} WHERE id = ?", run_id).fetchone() if known else None
            if row is None:
                raise BadInput(
                    f"there is no run {run_id} in {self.path}: list the runs to see the ids"
                )
            return _run(row)

    def calibrations(self, run_id: int) -> list[RunCalibration]:
        """The calibrations of a run, whole, in the order in which they came into use."""
        with self._told():
            rows = self._connection.execute(
                "SELECT from_seq, document FROM calibration WHERE run_id = ? ORDER BY from_seq",
                (run_id,),
            )
            return [RunCalibration(from_seq, json.loads(document)) for from_seq, document in rows]

    def events(self, run_id: int) -> list[LoggedEvent]:
        """What happened during a run, in order of time."""
        with self._told():
            rows = self._connection.execute(
                "SELECT run_id, t_utc_ns, event, text FROM event WHERE run_id = ? "
                "ORDER BY t_utc_ns, id",
                (run_id,),
            )
            return [LoggedEvent(*row) for row in rows]

    def readings(self, run_id: int) -> Iterator[list[LoggedReading]]:
        """All rows of a run in order of seq, a few thousand at a time, as they stand now."""
        with self._told():
            yield from self._chunks(run_id)

    def tilts(self, run_id: int) -> TiltSeries:
        """All rows of a run as columns, to judge its drift by.

        Raises BadInput for an id that is none, and for a run read with several calibrations:
        angles of two scales have no common drift.
        """
        self.run(run_id)
        count = len(self.calibrations(run_id))
        if count > 1:
            raise BadInput(
                f"run {run_id} was read with {count} calibrations, and angles of different scales "
                "have no common drift: export it, and keep the rows of one"
            )
        with self._told():
            cursor = self._connection.execute(
                "SELECT 1e-6 * t_us, x_arcsec, y_arcsec, quality FROM reading_row "
                "WHERE key BETWEEN ? AND ? ORDER BY key",
                keys_of(run_id),
            )
            parts = [np.empty((0, 4))]
            while chunk := cursor.fetchmany(CHUNK):  # numbers take a tenth of what rows do
                parts.append(np.array(chunk, dtype=np.float64))
        t_s, x, y, quality = np.concatenate(parts).T
        flagged = quality != 0
        x, y = (np.where(flagged, np.nan, values) for values in (x, y))
        return TiltSeries(t_s, x, y, int(flagged.sum()))

    def _chunks(self, run_id: int) -> Iterator[list[LoggedReading]]:
        cursor = self._connection.execute(
            "SELECT r.key - ?1, r.t_us, r.x_arcsec, r.y_arcsec, "
            "r.x_sd_arcsec, r.y_sd_arcsec, r.x_u_arcsec, r.y_u_arcsec, r.quality, "
            "r.x_px, r.y_px, s.n, s.x_scatter_arcsec, s.y_scatter_arcsec "
            "FROM reading_row AS r LEFT JOIN spread AS s USING (key) "
            "WHERE r.key BETWEEN ?1 AND ?2 ORDER BY r.key",
            keys_of(run_id),
        )
        while chunk := cursor.fetchmany(CHUNK):
            yield [LoggedReading(*row) for row in chunk]

    def series(
        self, run_id: int, from_s: float = 0.0, to_s: float | None = None, points: int = 2000
    ) -> Series:
        """What a plot of a part of a run shows, in at most ``points`` bins.

        Without ``to_s``: up to the last reading. Raises BadInput for an id that is none, or a
        part that ends before it begins.
        """
        run = self.run(run_id)
        if max(abs(from_s), abs(to_s or 0.0)) > LONGEST_S:
            raise BadInput(f"no run is {LONGEST_S:g} s long: give another part of it")
        if to_s is None:
            to_s = max(run.duration_s, from_s) + 1e-6
        if not from_s < to_s:
            raise BadInput(f"the part from {from_s:g} s to {to_s:g} s is empty: give another")
        level_s = choose_level_s(to_s - from_s, points)
        with self._told():
            cells = self._summaries(run_id, level_s, from_s, to_s) if level_s else None
            if cells is None or cells.n.sum() <= points:
                cells = self._rows(run_id, from_s, to_s)
        return series_of(cells, from_s=from_s, to_s=to_s, points=points)

    @contextmanager
    def _told(self) -> Iterator[None]:
        """What SQLite cannot read, a damaged page or a broken document, is told in one line."""
        try:
            yield
        except (sqlite3.Error, json.JSONDecodeError) as error:
            raise BadInput(
                f"{self.path} cannot be read any further ({error}): it is damaged or locked; "
                "export what can be read from a copy of it"
            ) from error

    def _named(self, statement: str, *values: object) -> sqlite3.Cursor:
        """A cursor whose rows know the names of their columns."""
        cursor = self._connection.cursor()
        cursor.row_factory = sqlite3.Row
        return cursor.execute(statement, values)

    def _summaries(self, run_id: int, level_s: int, from_s: float, to_s: float) -> Cells:
        cursor = self._connection.execute(
            "SELECT number, n, n_good, x_min_arcsec, x_max_arcsec, x_sum_arcsec, "
            "y_min_arcsec, y_max_arcsec, y_sum_arcsec FROM summary "
            "WHERE run_id = ? AND level_s = ? AND number >= ? AND number * level_s < ? "
            "ORDER BY number",
            (run_id, level_s, math.floor(from_s / level_s), to_s),
        )
        number, n, n_good, *values = _columns(cursor, 9)
        t_s = (number + 0.5) * level_s
        return Cells(level_s, t_s, n.astype(np.int64), n_good.astype(np.int64), *values)

    def _rows(self, run_id: int, from_s: float, to_s: float) -> Cells:
        cursor = self._connection.execute(
            "SELECT t_us, x_arcsec, y_arcsec, quality FROM reading_row "
            "WHERE key BETWEEN ? AND ? AND t_us >= ? AND t_us < ? ORDER BY key",
            (*self._keys_between(run_id, from_s, to_s), from_s * 1e6, to_s * 1e6),
        )
        t_us, x, y, quality = _columns(cursor, 4)
        good = (quality == 0) & np.isfinite(x) & np.isfinite(y)
        n = np.ones(t_us.size, dtype=np.int64)
        x_good, y_good = np.where(good, x, 0.0), np.where(good, y, 0.0)
        return Cells(0, t_us * 1e-6, n, good.astype(np.int64), x, x, x_good, y, y, y_good)

    def _keys_between(self, run_id: int, from_s: float, to_s: float) -> tuple[int, int]:
        """Keys within which all rows of these times lie, from the one-second summaries."""
        first, last = keys_of(run_id)
        of_run = "SELECT first_seq FROM summary WHERE run_id = ? AND level_s = 1 AND number "
        before = self._connection.execute(
            of_run + "<= ? ORDER BY number DESC LIMIT 1", (run_id, math.floor(from_s))
        ).fetchone()
        after = self._connection.execute(
            of_run + "> ? ORDER BY number LIMIT 1", (run_id, math.floor(to_s))
        ).fetchone()
        return (
            key_of(run_id, before[0]) if before else first,
            key_of(run_id, after[0]) if after else last,
        )


_RUNS = (
    "SELECT id, title, note, source, started_utc_ns, ended_utc_ns, ending, every_s, settings, "
    "version, readings, 1e-6 * coalesce(last_t_us, 0) AS duration_s FROM run"
)


def _run(row: sqlite3.Row) -> Run:
    values = dict(row)
    values["settings"] = json.loads(values["settings"])
    return Run(**values)


def _columns(cursor: sqlite3.Cursor, count: int) -> list[F64]:
    """The rows of ``cursor`` as columns, NULL as NaN."""
    return list(np.array(cursor.fetchall(), dtype=np.float64).reshape(-1, count).T)
