"""The tables of a logbook, and how an older file becomes a present one.

``PRAGMA user_version`` counts the migrations a file has been through. A migration that has been
released is never changed: what is to be different is appended as the next one.

Reading rows carry their run and their number in one integer, ``key`` = run_id · 2³⁶ + seq. SQLite
fills the pages of a table with growing integer keys to the brim, those of a table keyed by two
columns to about seven eighths (measured: 92 and 104 bytes for the same row). The view ``reading``
shows both columns, seconds and UTC to anything that speaks SQL.
"""

from __future__ import annotations

import sqlite3
from collections.abc import Sequence

SEQ_BITS = 36
"""At 500 readings a second a program would have to run for four years to exceed this."""

RUNS_AT_MOST = 1 << (63 - SEQ_BITS)

APPLICATION_ID = 0x52646F74  # marks the file as a logbook, for tools that look at bytes 68 to 71
PAGE_BYTES = 8192

LEVELS_S = (1, 10, 100)
"""Lengths of the intervals that are summarised beside the rows. Each divides the next."""

Migration = Sequence[str]

_FIRST: Migration = (
    """CREATE TABLE run (
        id INTEGER PRIMARY KEY AUTOINCREMENT,
        title TEXT NOT NULL,
        note TEXT NOT NULL,
        source TEXT NOT NULL,
        started_utc_ns INTEGER NOT NULL,
        ended_utc_ns INTEGER,
        ending TEXT,
        every_s REAL NOT NULL,
        settings TEXT NOT NULL,
        version TEXT NOT NULL,
        readings INTEGER NOT NULL DEFAULT 0,
        last_seq INTEGER,
        last_t_us INTEGER
    ) STRICT""",
    # A run may see more than one: the scale may be changed while it is recorded.
    """CREATE TABLE calibration (
        run_id INTEGER NOT NULL REFERENCES run (id),
        from_seq INTEGER NOT NULL,
        calibration_id TEXT NOT NULL,
        document TEXT NOT NULL,
        PRIMARY KEY (run_id, from_seq)
    ) STRICT, WITHOUT ROWID""",
    """CREATE TABLE reading_row (
        key INTEGER PRIMARY KEY,
        t_us INTEGER NOT NULL,
        x_px REAL,
        y_px REAL,
        x_arcsec REAL,
        y_arcsec REAL,
        x_sd_arcsec REAL,
        y_sd_arcsec REAL,
        x_u_arcsec REAL,
        y_u_arcsec REAL,
        quality INTEGER NOT NULL
    ) STRICT""",
    # Only rows that are means have one.
    """CREATE TABLE spread (
        key INTEGER PRIMARY KEY,
        n INTEGER NOT NULL,
        x_scatter_arcsec REAL,
        y_scatter_arcsec REAL
    ) STRICT""",
    """CREATE VIEW reading AS SELECT
        r.key >> 36 AS run_id,
        r.key & 68719476735 AS seq,
        run.started_utc_ns + 1000 * r.t_us AS t_utc_ns,
        1e-6 * r.t_us AS t_s,
        r.x_px, r.y_px, r.x_arcsec, r.y_arcsec, r.x_sd_arcsec, r.y_sd_arcsec,
        r.x_u_arcsec, r.y_u_arcsec, r.quality, s.n, s.x_scatter_arcsec, s.y_scatter_arcsec
        FROM reading_row AS r
        JOIN run ON run.id = r.key >> 36
        LEFT JOIN spread AS s ON s.key = r.key""",
    """CREATE TABLE summary (
        run_id INTEGER NOT NULL REFERENCES run (id),
        level_s INTEGER NOT NULL,
        number INTEGER NOT NULL,
        first_seq INTEGER NOT NULL,
        n INTEGER NOT NULL,
        n_good INTEGER NOT NULL,
        x_min_arcsec REAL,
        x_max_arcsec REAL,
        x_sum_arcsec REAL NOT NULL,
        y_min_arcsec REAL,
        y_max_arcsec REAL,
        y_sum_arcsec REAL NOT NULL,
        PRIMARY KEY (run_id, level_s, number)
    ) STRICT, WITHOUT ROWID""",
    """CREATE TABLE event (
        id INTEGER PRIMARY KEY,
        run_id INTEGER REFERENCES run (id),
        t_utc_ns INTEGER NOT NULL,
        event TEXT NOT NULL,
        text TEXT NOT NULL
    ) STRICT""",
    "CREATE INDEX event_of_run ON event (run_id)",
)

MIGRATIONS: tuple[Migration, ...] = (_FIRST,)


def version_of(connection: sqlite3.Connection) -> int:
    """How many migrations the file has been through; 0 for an empty one."""
    return int(connection.execute("PRAGMA user_version").fetchone()[0])


def migrate(connection: sqlite3.Connection) -> None:
    """Bring the file up to the newest version, one transaction a step.

    ``connection`` commits by itself (``isolation_level=None``). A step that fails leaves the
    version before it, whole.
    """
    for number in range(version_of(connection), len(MIGRATIONS)):
        connection.execute("BEGIN IMMEDIATE")
        try:
            for statement in MIGRATIONS[number]:
                connection.execute(statement)
            connection.execute(f"PRAGMA user_version = {number + 1}")
            connection.execute("COMMIT")
        except BaseException:
            connection.execute("ROLLBACK")
            raise


def key_of(run_id: int, seq: int) -> int:
    """The key of a reading. Raises ValueError for a number that does not fit."""
    if not 0 <= seq < 1 << SEQ_BITS:
        raise ValueError(f"seq must be between 0 and 2^{SEQ_BITS}, got {seq}")
    return run_id << SEQ_BITS | seq


def keys_of(run_id: int) -> tuple[int, int]:
    """First and last key a reading of the run may have."""
    return run_id << SEQ_BITS, (run_id + 1 << SEQ_BITS) - 1
