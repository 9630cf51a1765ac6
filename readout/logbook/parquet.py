"""A run as Apache Parquet: columns with types, for programs that analyse long runs.

Rows come in groups of a few thousand, so that a run of any length takes the same memory. Columns
are those of the other exports; ``t_utc`` is a time, ``quality`` a list of words, and what is
missing is null.
"""

from __future__ import annotations

import importlib.util
from collections.abc import Iterator

from readout.errors import BadInput
from readout.logbook.export import cells_of, columns_of, signs_by_seq
from readout.logbook.reader import LogReader, Run
from readout.model import Quality

NEEDED = "parquet needs the package pyarrow: install it with `pip install pyarrow`"


def parquet_is_there() -> bool:
    """True if the package that writes Parquet is installed."""
    return importlib.util.find_spec("pyarrow") is not None


def parquet_of(reader: LogReader, run_id: int) -> Iterator[bytes]:
    """The run as Parquet. Raises BadInput, at once, for an id that is none or without pyarrow."""
    run = reader.run(run_id)
    if not parquet_is_there():
        raise BadInput(NEEDED)
    return _parquet(reader, run)


class _Pieces:
    """A file that is written to and handed on piece by piece."""

    closed = False

    def __init__(self) -> None:
        self._at = 0
        self._pieces: list[bytes] = []

    def write(self, data: bytes) -> int:
        self._pieces.append(bytes(data))
        self._at += len(data)
        return len(data)

    def tell(self) -> int:
        return self._at

    def flush(self) -> None:
        """Nothing lies anywhere else."""

    def close(self) -> None:
        self.closed = True

    def taken(self) -> bytes:
        """What has come since it was asked last."""
        piece, self._pieces = b"".join(self._pieces), []
        return piece


def _parquet(reader: LogReader, run: Run) -> Iterator[bytes]:
    import pyarrow as pa
    from pyarrow.parquet import ParquetWriter

    columns = columns_of(run)
    kinds = {
        "t_utc": pa.timestamp("us", tz="UTC"),
        "quality": pa.list_(pa.string()),
        "n": pa.int64(),
        "signs": pa.string(),
    }
    about = {"title": run.title, "source": run.source, "readout": run.version}
    schema = pa.schema([(c, kinds.get(c, pa.float64())) for c in columns], metadata=about)
    cells = cells_of(run, signs_by_seq(reader, run), Quality.words)
    file = _Pieces()
    with ParquetWriter(file, schema) as writer:
        for chunk in reader.readings(run.id):
            _, *values = (list(column) for column in zip(*map(cells, chunk), strict=True))
            t_utc_us = [run.started_utc_ns // 1000 + row.t_us for row in chunk]
            writer.write_table(pa.table([t_utc_us, *values], schema=schema))
            yield file.taken()
    yield file.taken()
