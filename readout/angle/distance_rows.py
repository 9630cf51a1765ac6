"""The rows of the check with two tilts, from a table or a request."""

from __future__ import annotations

import math
from collections.abc import Iterable, Mapping
from dataclasses import dataclass

from readout.errors import BadInput


@dataclass(frozen=True, slots=True)
class DistanceRow:
    """One averaged reading of one of two tilts, the mirror at one distance from the objective.

    ``step``: the tilt's name, one of two. Readings from the optical axis, NaN for an axis not
    read. ``sd_arcsec``: standard uncertainty of a reading, NaN where unknown.
    """

    distance_mm: float
    step: str
    x_arcsec: float
    y_arcsec: float = math.nan
    sd_arcsec: float = math.nan


def distance_rows(table: Iterable[Mapping[str, object]]) -> tuple[DistanceRow, ...]:
    """Rows from ``distance_mm``, ``step``, ``x_arcsec``, ``y_arcsec``, ``sd_arcsec``.

    Cells are texts, as a CSV file has them, or numbers; the last three may be empty. Raises
    BadInput with one line that names the row.
    """
    rows = []
    for number, cells in enumerate(table, start=1):
        step = str(cells.get("step") or "").strip()
        if not step:
            raise BadInput(f"row {number}: no step; name the tilt, for example 'low' or 'high'")
        distance_mm, x, y, sd = (
            _number(cells.get(column), column, number)
            for column in ("distance_mm", "x_arcsec", "y_arcsec", "sd_arcsec")
        )
        if not distance_mm > 0:
            raise BadInput(f"row {number}: distance_mm must be the positive distance to the mirror")
        if sd <= 0:
            raise BadInput(f"row {number}: sd_arcsec must be positive, or empty if unknown")
        rows.append(DistanceRow(distance_mm, step, x, y, sd))
    return tuple(rows)


def _number(cell: object, column: str, row: int) -> float:
    """The number in a cell, NaN for an empty one."""
    if cell is None or (isinstance(cell, str) and not cell.strip()):
        return math.nan
    try:
        value = float(cell) if isinstance(cell, str | int | float) else math.inf
    except ValueError:
        value = math.inf
    if not math.isfinite(value) or isinstance(cell, bool):
        raise BadInput(f"row {row}: {column} is {str(cell)[:40]!r}, which is no number")
    return value
