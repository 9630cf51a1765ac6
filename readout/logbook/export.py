"""A run as CSV, as JSON lines, or as a logbook of its own to hand over.

Texts come in pieces of a few thousand rows, so that a run of any length takes the same memory.
Columns are those of ``readout.rows``; rows that are means have count and scatter besides.
"""

from __future__ import annotations

import csv
import io
import json
import sqlite3
from bisect import bisect_right
from collections.abc import Callable, Iterator
from contextlib import closing
from pathlib import Path

from readout.errors import BadInput
from readout.logbook.connection import open_writing
from readout.logbook.reader import LoggedReading, LogReader, Run
from readout.logbook.schema import keys_of
from readout.model import Quality
from readout.rows import (
    POSITION_COLUMNS,
    SIGNS_COLUMN,
    SPREAD_COLUMNS,
    VALUE_COLUMNS,
    Cell,
    rounded,
)
from readout.utc import utc_text


def csv_of(reader: LogReader, run_id: int) -> Iterator[str]:
    """The run as CSV with a header. Raises BadInput, at once, for an id that is none."""
    run = reader.run(run_id)
    return _csv(reader, run)


def ndjson_of(reader: LogReader, run_id: int) -> Iterator[str]:
    """The run as one JSON object a line. Raises BadInput, at once, for an id that is none."""
    run = reader.run(run_id)
    return _ndjson(reader, run)


def _csv(reader: LogReader, run: Run) -> Iterator[str]:
    yield ",".join(columns_of(run)) + "\n"
    signs = signs_by_seq(reader, run)
    cells = cells_of(run, signs, lambda quality: " ".join(quality.words()))
    for chunk in reader.readings(run.id):
        text = io.StringIO()
        csv.writer(text, lineterminator="\n").writerows(map(cells, chunk))  # None: an empty cell
        yield text.getvalue()


def _ndjson(reader: LogReader, run: Run) -> Iterator[str]:
    columns = columns_of(run)
    cells = cells_of(run, signs_by_seq(reader, run), Quality.words)
    encode = json.JSONEncoder(allow_nan=False, separators=(",", ":")).encode
    for chunk in reader.readings(run.id):
        yield "".join(encode(dict(zip(columns, cells(row), strict=True))) + "\n" for row in chunk)


def columns_of(run: Run) -> tuple[str, ...]:
    """The columns of an export of ``run``."""
    spread = SPREAD_COLUMNS if run.every_s > 0 else ()
    return ("t_utc", *VALUE_COLUMNS, "quality", *POSITION_COLUMNS, SIGNS_COLUMN, *spread)


def signs_by_seq(reader: LogReader, run: Run) -> Callable[[LoggedReading], str | None]:
    """What tells the signs of the calibration a row was read with; None before there was one."""
    used = reader.calibrations(run.id)
    begins = [one.from_seq for one in used]
    signs = [str(one.document.get("signs", "unproven")) for one in used]

    def signs_of(row: LoggedReading) -> str | None:
        before = bisect_right(begins, row.seq)
        return signs[before - 1] if before else None

    return signs_of


def cells_of(
    run: Run,
    signs_of: Callable[[LoggedReading], str | None],
    words_of: Callable[[Quality], Cell],
) -> Callable[[LoggedReading], list[Cell]]:
    """What turns a row of ``run`` into cells."""
    averaged = run.every_s > 0
    words: dict[int, Cell] = {}  # few combinations of flags come in a run, each very often

    def cells(row: LoggedReading) -> list[Cell]:
        if row.quality not in words:
            words[row.quality] = words_of(Quality(row.quality))
        found: list[Cell] = [
            utc_text(run.started_utc_ns + 1000 * row.t_us),
            row.t_us / 1e6,
            *map(_number, row[2:8]),
            words[row.quality],
            _number(row.x_px),
            _number(row.y_px),
            signs_of(row),
        ]
        if averaged:
            found += [row.n, _number(row.x_scatter_arcsec), _number(row.y_scatter_arcsec)]
        return found

    return cells


def _number(value: float | None) -> float | None:
    return None if value is None else rounded(value)


_COPIES = (
    "INSERT INTO run SELECT * FROM whole.run WHERE id = :run",
    "INSERT INTO calibration SELECT * FROM whole.calibration WHERE run_id = :run",
    "INSERT INTO event SELECT * FROM whole.event WHERE run_id = :run",
    "INSERT INTO summary SELECT * FROM whole.summary WHERE run_id = :run",
    "INSERT INTO reading_row SELECT * FROM whole.reading_row WHERE key BETWEEN :first AND :last",
    "INSERT INTO spread SELECT * FROM whole.spread WHERE key BETWEEN :first AND :last",
)


def copy_run(path: Path, run_id: int, fresh: Path) -> None:
    """Copy a run of the logbook at ``path`` into a new one, alone in the file ``fresh``.

    Raises BadInput for an id that is none, and for a file that is there already.
    """
    if fresh.exists():
        raise BadInput(f"{fresh} exists: choose another name")
    with LogReader(path) as reader:
        reader.run(run_id)
    try:
        with closing(open_writing(fresh)) as connection:
            connection.execute("ATTACH ? AS whole", (str(path),))
            connection.execute("BEGIN")
            first, last = keys_of(run_id)
            for copy in _COPIES:
                connection.execute(copy, {"run": run_id, "first": first, "last": last})
            connection.execute("COMMIT")
            connection.execute("DETACH whole")
            connection.execute("PRAGMA journal_mode = DELETE")  # one file, not three
    except sqlite3.Error as error:
        fresh.unlink(missing_ok=True)
        raise BadInput(f"{fresh} cannot be written ({error}): choose another place") from error
