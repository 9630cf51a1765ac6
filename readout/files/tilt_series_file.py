"""A record of tilts from a CSV file: what ``measure --csv`` or the logging endpoint writes.

Needed are ``x_arcsec``, ``y_arcsec`` and ``t_s`` or ``t_utc``; others are passed over. A row with
a word in ``quality`` counts as missing: what has a caution is no reading to judge a drift by.
"""

from __future__ import annotations

import math
from collections.abc import Callable
from datetime import UTC, datetime
from pathlib import Path

import numpy as np

from readout.errors import BadInput
from readout.files.csv_table import csv_rows, refuse_missing
from readout.model import F64
from readout.stability import TiltSeries

ANGLES = ("x_arcsec", "y_arcsec")
TOLD_EVERY = 20_000


def _nothing(_rows: int) -> None:
    return None


def read_tilt_series(path: Path, on_rows: Callable[[int], None] = _nothing) -> TiltSeries:
    """The record in the file at ``path``; ``on_rows`` is told from time to time how many.

    Times are those of ``t_s``, or of ``t_utc`` where ``t_s`` is not there or begins anew, as in a
    log that outlasted a restart. Raises BadInput with one line that names file and line.
    """
    with csv_rows(path) as (names, rows):
        clocks = [name for name in ("t_s", "t_utc") if name in names]
        missing = [name for name in ANGLES if name not in names]
        missing += [] if clocks else ["t_s (or t_utc)"]
        refuse_missing(path, missing)
        columns = [*ANGLES, *clocks]
        at = [names.index(name) for name in columns]
        quality = names.index("quality") if "quality" in names else None
        reads = [_instant if name == "t_utc" else _number for name in columns]
        found: list[list[float]] = [[] for _ in columns]
        flagged = 0
        for n, (line, cells) in enumerate(rows, start=1):
            try:
                values = [read(cells[k]) for read, k in zip(reads, at, strict=True)]
            except ValueError:
                raise _fault(path, line, columns, [cells[k] for k in at]) from None
            if quality is not None and cells[quality].strip():
                flagged += 1
                values[0] = values[1] = math.nan
            for column, value in zip(found, values, strict=True):
                column.append(value)
            if n % TOLD_EVERY == 0:
                on_rows(n)
    x_arcsec, y_arcsec, *times = (np.array(column, dtype=np.float64) for column in found)
    return TiltSeries(_chosen(times), x_arcsec, y_arcsec, flagged)


def _chosen(times: list[F64]) -> F64:
    """The first clock, the second where the first one does not rise; from its first instant."""
    rising = [t for t in times if np.all(np.diff(t) > 0)]
    t_s = (rising or times)[0]
    return t_s - t_s[0] if t_s.size else t_s


def _number(cell: str) -> float:
    if not cell or cell.isspace():
        return math.nan
    value = float(cell)
    if not math.isfinite(value):
        raise ValueError(cell)
    return value


def _instant(cell: str) -> float:
    """Seconds since 1970; without an offset it is UTC."""
    if not cell or cell.isspace():
        return math.nan
    instant = datetime.fromisoformat(cell.strip())
    return (instant if instant.tzinfo else instant.replace(tzinfo=UTC)).timestamp()


def _fault(path: Path, line: int, columns: list[str], cells: list[str]) -> BadInput:
    """What to say of a row in which one cell cannot be read."""
    for name, cell in zip(columns, cells, strict=True):
        read, wanted = (_instant, "time") if name == "t_utc" else (_number, "number")
        try:
            read(cell)
        except ValueError:
            return BadInput(
                f"{path}, line {line}: {name} is {cell[:40]!r}, which is no {wanted}: correct it, "
                "or leave it empty if it is not known"
            )
    return BadInput(f"{path}, line {line} cannot be read: correct it")
