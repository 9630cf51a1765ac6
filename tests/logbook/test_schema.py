"""Versions of a logbook: each older file becomes a present one, whole; a newer one is refused."""

from __future__ import annotations

import re
import sqlite3
from collections.abc import Callable
from contextlib import closing
from pathlib import Path

import pytest

from readout.errors import BadInput
from readout.logbook import Logbook, LogReader, schema
from readout.logbook.connection import open_reading, open_writing
from tests.logbook.made import log_of, new_run, reading

SECOND = (
    "ALTER TABLE run ADD COLUMN place TEXT NOT NULL DEFAULT ''",
    "CREATE TABLE environment (id INTEGER PRIMARY KEY, name TEXT NOT NULL) STRICT",
)


def test_an_empty_file_becomes_version_one(tmp_path: Path) -> None:
    path = tmp_path / "logbook.sqlite"
    with closing(open_writing(path)) as connection:
        assert schema.version_of(connection) == 1 == len(schema.MIGRATIONS)
        pragmas = {
            name: connection.execute(f"PRAGMA {name}").fetchone()[0]
            for name in ("journal_mode", "synchronous", "foreign_keys", "page_size")
        }
        tables = connection.execute(
            "SELECT name, strict FROM pragma_table_list WHERE type = 'table' AND schema = 'main' "
            "AND name NOT LIKE 'sqlite_%'"
        ).fetchall()
    # 2 is FULL (SQLite documentation, PRAGMA synchronous).
    assert pragmas == {
        "journal_mode": "wal",
        "synchronous": 2,
        "foreign_keys": 1,
        "page_size": schema.PAGE_BYTES,
    }
    assert dict(tables).keys() >= {"run", "reading_row", "summary", "event", "calibration"}
    assert set(dict(tables).values()) == {1}


def test_a_file_of_version_one_goes_through_the_second_migration(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    path = log_of(tmp_path, [reading(k) for k in range(30)], title="of version one")
    monkeypatch.setattr(schema, "MIGRATIONS", (*schema.MIGRATIONS, SECOND))
    with closing(open_reading(path)) as connection:  # looking is enough
        assert schema.version_of(connection) == 2
        assert connection.execute("SELECT title, place, readings FROM run").fetchall() == [
            ("of version one", "", 30)
        ]
        assert connection.execute("SELECT count(*) FROM environment").fetchone() == (0,)
        assert connection.execute("SELECT count(*) FROM reading").fetchone() == (30,)


def test_a_migration_that_fails_leaves_the_version_before_it(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    path = log_of(tmp_path, [reading(0)])
    broken = (SECOND[0], "CREATE TABLE run (id INTEGER)")
    monkeypatch.setattr(schema, "MIGRATIONS", (*schema.MIGRATIONS, broken))
    with pytest.raises(BadInput, match="already exists"):
        open_writing(path)
    monkeypatch.undo()
    with LogReader(path) as reader:
        assert reader.run(1).readings == 1


@pytest.mark.parametrize("opened", [open_writing, open_reading])
def test_a_newer_version_is_refused_in_one_line(
    tmp_path: Path, opened: Callable[[Path], object]
) -> None:
    path = log_of(tmp_path, [reading(0)])
    with closing(sqlite3.connect(path)) as connection:
        connection.execute("PRAGMA user_version = 2")
    before = path.read_bytes()
    with pytest.raises(BadInput, match=re.escape("is of version 2, this readout knows up to 1")):
        opened(path)
    assert path.read_bytes() == before


@pytest.mark.parametrize("opened", [open_writing, open_reading])
def test_files_of_others_are_left_alone(tmp_path: Path, opened: Callable[[Path], object]) -> None:
    path = tmp_path / "logbook.sqlite"
    with closing(sqlite3.connect(path)) as connection:
        connection.execute("CREATE TABLE recipe (name TEXT)")
    before = path.read_bytes()
    with pytest.raises(BadInput, match="is a file of another program"):
        opened(path)
    assert path.read_bytes() == before

    path.write_bytes(b"no database, but a letter to somebody. " * 50)
    with pytest.raises(BadInput, match="cannot be read as a logbook"):
        opened(path)


def test_nothing_to_read(tmp_path: Path) -> None:
    with pytest.raises(BadInput, match="there is no logbook at"):
        open_reading(tmp_path / "logbook.sqlite")
    (tmp_path / "logbook.sqlite").touch()
    with pytest.raises(BadInput, match="is empty"):
        open_reading(tmp_path / "logbook.sqlite")


def test_a_place_that_cannot_be_written_to(tmp_path: Path) -> None:
    (tmp_path / "file").touch()
    with pytest.raises(BadInput, match="cannot be opened"):
        Logbook(tmp_path / "file" / "logbook.sqlite")


def test_readers_cannot_write(tmp_path: Path) -> None:
    path = log_of(tmp_path, [reading(0)])
    with (
        closing(open_reading(path)) as connection,
        pytest.raises(sqlite3.OperationalError, match="readonly"),
    ):
        connection.execute("DELETE FROM run")


def test_keys_hold_run_and_number(tmp_path: Path) -> None:
    top = (1 << schema.SEQ_BITS) - 1
    path = tmp_path / "logbook.sqlite"
    with Logbook(path) as log:
        for seqs in ((0, 1, top), (5,)):
            log.start(new_run())
            for seq in seqs:
                log.append(reading(seq, t_s=0.0), t_s=0.0)
            log.end(0)
        log.start(new_run())
        for seq in (-1, top + 1):
            with pytest.raises(ValueError, match="seq must be between"):
                log.append(reading(seq, t_s=0.0), t_s=0.0)
    with closing(open_reading(path)) as connection:
        found = connection.execute("SELECT run_id, seq FROM reading").fetchall()
    assert found == [(1, 0), (1, 1), (1, top), (2, 5)]
