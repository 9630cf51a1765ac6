"""Files a command writes its results to: one rule, so that nothing is lost.

A file that holds something is replaced only with ``--overwrite``, and what the command reads
never. Where the file cannot be written the command says so before the work; the file itself is
touched only once there is something to put into it.
"""

from __future__ import annotations

from collections.abc import Iterable
from contextlib import suppress
from pathlib import Path
from types import TracebackType
from typing import Annotated, Self, TextIO

import typer

from readout.cli.say import opened
from readout.errors import BadInput, cannot_write
from readout.files.readings_file import ReadingsWriter
from readout.model import Reading

OverwriteOption = Annotated[
    bool, typer.Option("--overwrite", help="Replace a file that is there already.")
]


def refuse_loss(
    path: Path, *, overwrite: bool, inputs: Iterable[Path] = (), makes_folder: bool = False
) -> None:
    """Raise BadInput unless results may go to ``path``.

    ``inputs``: files and folders the command reads; nothing in them is replaced.
    ``makes_folder``: what writes the file makes its folder, too.
    """
    if path.is_dir():
        raise BadInput(f"{path} is a folder: name a file")
    if not (makes_folder or path.parent.is_dir()):
        raise BadInput(f"cannot write {path} (there is no such folder): choose another place")
    for given in inputs:
        replaced = path.samefile(given) if path.exists() and given.exists() else False
        inside = given.is_dir() and path.exists() and path.resolve().is_relative_to(given.resolve())
        if replaced or inside:
            raise BadInput(f"{path} belongs to what is read: name another file for the result")
    if not overwrite and path.is_file() and path.stat().st_size > 0:
        raise BadInput(f"{path} exists: name another file, or give --overwrite to replace it")


class ReadingsFile:
    """A CSV file of readings that comes into being with its first row.

    Raises BadInput, or NoRoom on a full disk, naming the file; what was written before stays.
    """

    def __init__(self, path: Path) -> None:
        self._path = path
        self._file: TextIO | None = None
        self._writer: ReadingsWriter | None = None

    def __enter__(self) -> Self:
        return self

    def __exit__(
        self,
        exc_type: type[BaseException] | None,
        exc: BaseException | None,
        tb: TracebackType | None,
    ) -> None:
        if self._file is not None:
            with suppress(OSError):  # every row was flushed, or its failure told
                self._file.close()

    def write(self, reading: Reading) -> None:
        try:
            if self._writer is None:
                self._file = opened(self._path)
                self._writer = ReadingsWriter(self._file)
            self._writer.write(reading)
        except OSError as error:
            raise cannot_write(self._path, error) from error
