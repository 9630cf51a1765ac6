"""Readings as a CSV file, written as they come."""

from __future__ import annotations

import csv
from types import TracebackType
from typing import Self, TextIO

from readout.model import Reading
from readout.rows import POSITION_COLUMNS, SIGNS_COLUMN, VALUE_COLUMNS, csv_cell, reading_row


class ReadingsWriter:
    """Writes readings to an open text file, a row at a time, each flushed at once.

    The header follows the first reading: ``file`` if it has a name, else ``t_utc``.
    """

    def __init__(self, file: TextIO) -> None:
        self._file = file
        self._writer = csv.writer(file, lineterminator="\n")
        self._columns: list[str] | None = None

    def __enter__(self) -> Self:
        return self

    def __exit__(
        self,
        exc_type: type[BaseException] | None,
        exc: BaseException | None,
        tb: TracebackType | None,
    ) -> None:
        if self._columns is None:  # no reading came: a header all the same
            columns = ["t_utc", *VALUE_COLUMNS, "quality", *POSITION_COLUMNS, SIGNS_COLUMN]
            self._writer.writerow(columns)
        self._file.flush()

    def write(self, reading: Reading) -> None:
        row = reading_row(reading)
        if self._columns is None:
            self._columns = list(row)
            self._writer.writerow(self._columns)
        self._writer.writerow([csv_cell(row.get(column)) for column in self._columns])
        self._file.flush()
