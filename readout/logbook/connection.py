"""Opening a logbook: one connection that writes, any number that read.

Write-ahead logging lets readers look while the writer writes; ``synchronous = FULL`` has the disk
confirm each commit, so that what is committed outlives a power cut.
"""

from __future__ import annotations

import sqlite3
from collections.abc import Iterator
from contextlib import closing, contextmanager
from pathlib import Path
from urllib.parse import quote

from readout.errors import BadInput, Busy
from readout.logbook import schema

FILE_NAME = "logbook.sqlite"
WAIT_S = 30.0
"""How long to wait for another program that has the file locked; the queue holds longer."""


def open_writing(path: Path) -> sqlite3.Connection:
    """A connection that writes to the logbook at ``path``, made if it is not there.

    It may be handed to another thread, to be used by that one alone.
    Raises BadInput for what is no logbook, one of a newer version, or a place that cannot be
    written to.
    """
    connection: sqlite3.Connection | None = None
    try:
        connection = sqlite3.connect(
            path, timeout=WAIT_S, isolation_level=None, check_same_thread=False
        )
        connection.execute(f"PRAGMA page_size = {schema.PAGE_BYTES}")  # of a new file only
        _refuse_foreign(connection, path)
        connection.execute("PRAGMA journal_mode = WAL")
        connection.execute("PRAGMA synchronous = FULL")
        connection.execute("PRAGMA foreign_keys = ON")
        connection.execute("PRAGMA journal_size_limit = 16777216")
        connection.execute(f"PRAGMA application_id = {schema.APPLICATION_ID}")
        schema.migrate(connection)
    except (sqlite3.Error, OSError, BadInput) as error:
        if connection is not None:
            connection.close()
        raise _told(error, path) from error
    return connection


def open_reading(path: Path) -> sqlite3.Connection:
    """A connection that only reads. Raises BadInput if there is no logbook that can be read."""
    if not path.is_file():
        raise BadInput(f"there is no logbook at {path}: record a run first, or give its folder")
    uri = f"file:{quote(str(path.absolute()))}?mode=ro"
    connection: sqlite3.Connection | None = None
    try:
        connection = _connect(uri)
        try:
            version = schema.version_of(connection)
        except sqlite3.OperationalError:
            # A folder that may not be written to has no room for the file readers share. Without
            # a write-ahead log nobody is writing, and the file can be read as it lies there.
            if path.with_name(path.name + "-wal").exists():
                raise
            connection.close()
            connection = _connect(uri + "&immutable=1")
            version = schema.version_of(connection)
        _refuse_foreign(connection, path)
        if version == 0:
            raise BadInput(f"{path} is empty: record a run first, or give another folder")
        if version < len(schema.MIGRATIONS):
            connection.close()
            open_writing(path).close()
            return open_reading(path)
    except (sqlite3.Error, BadInput) as error:
        if connection is not None:
            connection.close()
        raise _told(error, path) from error
    return connection


@contextmanager
def held(path: Path) -> Iterator[None]:
    """Keep other programs from writing to the logbook at ``path`` meanwhile. Raises Busy.

    The lock is SQLite's own on a file beside it: it works on every system, and the system frees
    it when the program dies.
    """
    try:
        path.parent.mkdir(parents=True, exist_ok=True)
        lock = sqlite3.connect(
            path.with_name(path.name + ".lock"),
            timeout=0,
            isolation_level=None,
            check_same_thread=False,
        )
    except (sqlite3.Error, OSError) as error:
        raise _told(error, path) from error
    with closing(lock):
        try:
            lock.execute("BEGIN EXCLUSIVE")
        except sqlite3.OperationalError as error:
            if error.sqlite_errorcode != sqlite3.SQLITE_BUSY:
                raise _told(error, path) from error
            raise Busy(
                f"another readout is recording to {path.parent}: end it, or give another folder "
                "with --data"
            ) from error
        yield


def _connect(uri: str) -> sqlite3.Connection:
    """An export is read on by whichever thread is free, one after the other."""
    return sqlite3.connect(
        uri, uri=True, timeout=WAIT_S, isolation_level=None, check_same_thread=False
    )


def _refuse_foreign(connection: sqlite3.Connection, path: Path) -> None:
    version = schema.version_of(connection)
    known = len(schema.MIGRATIONS)
    if version > known:
        raise BadInput(
            f"logbook {path} is of version {version}, this readout knows up to {known}: "
            "install the newer readout, or give another folder with --data"
        )
    marked = connection.execute("PRAGMA application_id").fetchone()[0] == schema.APPLICATION_ID
    empty = connection.execute("SELECT count(*) FROM sqlite_schema").fetchone()[0] == 0
    if not (marked or (version == 0 and empty)):
        raise BadInput(f"{path} is a file of another program: give another folder with --data")


def _told(error: sqlite3.Error | OSError | BadInput, path: Path) -> BadInput:
    match error:
        case BadInput():
            return error
        case sqlite3.DatabaseError() if not isinstance(error, sqlite3.OperationalError):
            return BadInput(
                f"{path} cannot be read as a logbook ({error}): move it away, or give another "
                "folder with --data"
            )
        case _:
            reason = getattr(error, "strerror", None) or error
            return BadInput(
                f"logbook {path} cannot be opened ({reason}): look at the permissions and the "
                "room on the disk, or give another folder with --data"
            )
