"""``tilts.csv`` of a calibration set: one row a frame, in one of three forms."""

from __future__ import annotations

import csv
import math
from dataclasses import dataclass
from pathlib import Path

from readout.errors import BadInput

TILT_COLUMNS = ("file", "x_arcsec", "y_arcsec", "sd_arcsec")
LEVER_COLUMNS = ("file", "lever_mm", "height_mm", "height_sd_mm", "axis")
TURN_COLUMNS = ("file", "turn_deg", "turn_sd_deg")


@dataclass(frozen=True, slots=True)
class TableRow:
    """One row; ``where`` is what a person finds it by."""

    where: str
    line: int
    cells: dict[str, str]

    @property
    def file(self) -> str:
        return self.cells["file"]

    def number(self, column: str) -> float:
        """A number, NaN for an empty cell. Raises BadInput for anything else."""
        text = self.cells[column]
        if not text:
            return math.nan
        try:
            value = float(text)
        except ValueError:
            raise BadInput(f"{self.where}: {column} is {text!r}, not a number") from None
        if not math.isfinite(value):
            raise BadInput(f"{self.where}: {column} is {text!r}: leave it empty if it is unknown")
        return value

    def required(self, column: str, *, least: float) -> float:
        """A number of at least ``least``."""
        value = self.number(column)
        if math.isnan(value) or value < least:
            raise BadInput(
                f"{self.where}: {column} must be {least:g} or more, it is "
                f"{self.cells[column] or 'empty'}"
            )
        return value


def read_table(path: Path) -> tuple[tuple[str, ...], list[TableRow]]:
    """Columns and rows of ``tilts.csv``. Raises BadInput, one line, if it cannot be used."""
    try:
        lines = path.read_text(encoding="utf-8-sig").splitlines()
    except FileNotFoundError:
        raise BadInput(
            f"{path} does not exist: a set needs one, {','.join(TILT_COLUMNS)}"
        ) from None
    except (OSError, ValueError) as error:
        raise BadInput(f"cannot read {path} ({error})") from error
    table = csv.DictReader(lines)
    columns = tuple(name.strip() for name in table.fieldnames or ())
    if columns not in (TILT_COLUMNS, LEVER_COLUMNS, TURN_COLUMNS):
        raise BadInput(
            f"{path} has the columns {','.join(columns) or 'of none'}: give "
            f"{','.join(TILT_COLUMNS)} or {','.join(LEVER_COLUMNS)} or {','.join(TURN_COLUMNS)}"
        )
    table.fieldnames = list(columns)
    rows = [
        TableRow(
            f"{path}, line {table.line_num}",
            table.line_num,
            {k: (v or "").strip() for k, v in row.items() if k},
        )
        for row in table
    ]
    rows = [row for row in rows if any(row.cells.values())]
    if not rows:
        raise BadInput(f"{path} holds no tilts: give one row a frame")
    names = [row.file for row in rows]
    for row in rows:
        if not is_inside(row.file):
            raise BadInput(f"{row.where}: {row.file or 'an empty name'} is no file of this folder")
        if names.count(row.file) > 1:
            raise BadInput(f"{row.where}: {row.file} is named twice: one row a frame")
    return columns, rows


def is_inside(name: str) -> bool:
    """True for the name of a file in the folder or below it."""
    return bool(name) and not Path(name).is_absolute() and ".." not in Path(name).parts
