"""A logbook that is damaged says so in one line, whatever is asked of it."""

from __future__ import annotations

import sqlite3
from collections.abc import Callable
from contextlib import closing
from pathlib import Path

import pytest

from readout.errors import BadInput
from readout.logbook import LogReader
from readout.logbook.export import csv_of
from tests.contracts import one_line
from tests.logbook.made import log_of, reading


def root_page(path: Path, name: str) -> int:
    with closing(sqlite3.connect(path)) as connection:
        [(page,)] = connection.execute(
            "SELECT rootpage FROM sqlite_schema WHERE name = ?", (name,)
        ).fetchall()
    return int(page)


@pytest.mark.parametrize(
    ("table", "ask"),
    [
        ("run", lambda reader: reader.runs()),
        ("run", lambda reader: reader.run(1)),
        ("reading_row", lambda reader: list(reader.readings(1))),
        ("reading_row", lambda reader: list(csv_of(reader, 1))),
        ("reading_row", lambda reader: reader.series(1)),
        ("calibration", lambda reader: reader.calibrations(1)),
        ("event_of_run", lambda reader: reader.events(1)),
    ],
)
def test_a_damaged_page(tmp_path: Path, table: str, ask: Callable[[LogReader], object]) -> None:
    path = log_of(tmp_path, (reading(seq) for seq in range(300)))
    page = root_page(path, table)
    content = bytearray(path.read_bytes())
    begin = (page - 1) * 8192
    content[begin : begin + 8192] = b"\xa5" * 8192
    path.write_bytes(content)
    with LogReader(path) as reader, pytest.raises(BadInput, match="cannot be read any") as raised:
        ask(reader)
    one_line(raised.value)


def test_a_broken_document(tmp_path: Path) -> None:
    path = log_of(tmp_path, [reading(0)])
    with closing(sqlite3.connect(path)) as connection, connection:
        connection.execute("UPDATE run SET settings = '{'")
    with LogReader(path) as reader, pytest.raises(BadInput, match="cannot be read any"):
        reader.runs()


@pytest.mark.parametrize("run_id", [0, -1, 1 << 27, 1 << 63, 10**30])
def test_an_id_that_cannot_be_is_none(tmp_path: Path, run_id: int) -> None:
    with (
        LogReader(log_of(tmp_path, [reading(0)])) as reader,
        pytest.raises(BadInput, match="there is no run"),
    ):
        reader.run(run_id)
