"""Readings as rows: one set of columns for CSV files, JSON lines and the logging endpoint.

A missing number is None in a row (null in JSON) and an empty cell in CSV. Numbers are rounded to
six decimals (1e-6 arcsec, 1 µs: far below anything that can be measured), small ones to four
digits, so that no uncertainty is rounded away.
"""

from __future__ import annotations

import csv
import math
from types import TracebackType
from typing import Self, TextIO

from readout.files.utc import utc_text
from readout.model import Reading

Cell = str | float | int | list[str] | None

VALUE_COLUMNS = (
    "t_s",
    "x_arcsec",
    "y_arcsec",
    "x_sd_arcsec",
    "y_sd_arcsec",
    "x_u_arcsec",
    "y_u_arcsec",
)


def rounded(value: float) -> float | None:
    """``value`` to six decimals or four digits, whichever is finer; None unless it is finite."""
    if not math.isfinite(value):
        return None
    return round(value, 6) if abs(value) >= 1e-3 else float(f"{value:.4g}")


def reading_row(reading: Reading) -> dict[str, Cell]:
    """The row of one reading: ``file`` or ``t_utc`` first, then values, then the quality words."""
    row: dict[str, Cell] = (
        {"file": reading.name} if reading.name else {"t_utc": utc_text(reading.t_utc_ns)}
    )
    row.update({column: rounded(getattr(reading, column)) for column in VALUE_COLUMNS})
    row["quality"] = reading.quality.words()
    return row


def csv_cell(cell: Cell) -> str | float | int:
    """A cell as CSV writes it: empty for None, words separated by spaces."""
    match cell:
        case None:
            return ""
        case list():
            return " ".join(cell)
        case _:
            return cell


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
            self._writer.writerow(["t_utc", *VALUE_COLUMNS, "quality"])
        self._file.flush()

    def write(self, reading: Reading) -> None:
        row = reading_row(reading)
        if self._columns is None:
            self._columns = list(row)
            self._writer.writerow(self._columns)
        self._writer.writerow([csv_cell(row.get(column)) for column in self._columns])
        self._file.flush()
