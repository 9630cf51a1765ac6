"""Readings as rows: one set of columns for CSV files, JSON lines, the logging endpoint and exports.

A missing number is None in a row (null in JSON) and an empty cell in CSV. Numbers are rounded to
six decimals (1e-6 arcsec, 1 µs: far below anything that can be measured), small ones to four
digits, so that no uncertainty is rounded away.
"""

from __future__ import annotations

import math
from typing import Any

from numpy.typing import NDArray

from readout.model import Reading
from readout.utc import utc_text

Cell = str | float | int | list[str] | None
Number = float | None

VALUE_COLUMNS = (
    "t_s",
    "x_arcsec",
    "y_arcsec",
    "x_sd_arcsec",
    "y_sd_arcsec",
    "x_u_arcsec",
    "y_u_arcsec",
)
POSITION_COLUMNS = ("x_px", "y_px")
"""Where the return image lies: all there is while no scale is known."""
SIGNS_COLUMN = "signs"
"""Whether a nudge has shown which way the axes run: ``proven`` or ``unproven``, none without a
scale.
"""
SPREAD_COLUMNS = ("n", "x_scatter_arcsec", "y_scatter_arcsec")
"""What a row that is a mean has besides."""


def rounded(value: float) -> float | None:
    """``value`` to six decimals or four digits, whichever is finer; None unless it is finite."""
    if not math.isfinite(value):
        return None
    near = round(value, 6) if abs(value) >= 1e-3 else float(f"{value:.4g}")
    return near + 0.0  # of a negative zero a plain one


def rounded_column(column: NDArray[Any]) -> list[Number]:
    """Each value of ``column`` rounded."""
    return [rounded(value) for value in column.tolist()]


def reading_row(reading: Reading) -> dict[str, Cell]:
    """The row of one reading: ``file`` or ``t_utc``, values, quality words, positions, signs."""
    row: dict[str, Cell] = (
        {"file": reading.name} if reading.name else {"t_utc": utc_text(reading.t_utc_ns)}
    )
    row.update({column: rounded(getattr(reading, column)) for column in VALUE_COLUMNS})
    row["quality"] = reading.quality.words()
    row.update({column: rounded(getattr(reading, column)) for column in POSITION_COLUMNS})
    row[SIGNS_COLUMN] = reading.signs
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
