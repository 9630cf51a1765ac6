"""A CSV file with a header: its rows by the names of their columns."""

from __future__ import annotations

import csv
from collections.abc import Iterator, Sequence
from contextlib import contextmanager
from pathlib import Path

from readout.errors import BadInput

Rows = Iterator[tuple[int, list[str]]]


@contextmanager
def csv_rows(path: Path) -> Iterator[tuple[list[str], Rows]]:
    """Names of the columns, and an iterator over the number of each line and its cells.

    Empty lines are left out; a short row is filled up with empty cells, and the header, where it
    comes again, passed over. Raises BadInput, one line, for a file that is missing or no CSV.
    """
    try:
        with path.open(encoding="utf-8-sig", newline="") as file:
            reader = csv.reader(file)
            names = [name.strip() for name in next(reader, [])]
            if not any(names):
                raise BadInput(f"{path} is empty: a table begins with the names of its columns")
            yield names, _rows(reader, names)
    except FileNotFoundError:
        raise BadInput(f"{path} does not exist: check the name") from None
    except OSError as error:
        raise BadInput(f"cannot read {path} ({error.strerror}): check the name") from error
    except (UnicodeDecodeError, csv.Error) as error:
        raise BadInput(f"{path} cannot be read as CSV ({error}): check the file") from error


def table_of(path: Path, needs: Sequence[str] = ()) -> list[dict[str, str]]:
    """All rows, each by the names of its columns.

    Raises BadInput as ``csv_rows`` does, and where a column it ``needs`` is missing.
    """
    with csv_rows(path) as (names, rows):
        refuse_missing(path, [name for name in needs if name not in names])
        return [dict(zip(names, cells, strict=False)) for _, cells in rows]


def refuse_missing(path: Path, columns: Sequence[str]) -> None:
    """Raise BadInput where there are any."""
    if columns:
        raise BadInput(f"{path} has no column {' nor '.join(columns)}: name it in the header")


def _rows(reader: Iterator[list[str]], names: list[str]) -> Rows:
    missing = [""] * len(names)
    for line, cells in enumerate(reader, start=2):
        if cells and cells != names:
            yield line, cells if len(cells) >= len(names) else cells + missing[len(cells) :]
