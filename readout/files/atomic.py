"""Replace a file whole: a reader sees the old text or the new one, never half of it."""

from __future__ import annotations

import os
import tempfile
from pathlib import Path

from readout.errors import cannot_write


def write_text_whole(path: Path, text: str) -> None:
    """Write ``text`` as UTF-8 to ``path``; see ``write_bytes_whole``."""
    write_bytes_whole(path, text.encode("utf-8"))


def write_bytes_whole(path: Path, data: bytes) -> None:
    """Write ``data`` to ``path`` through a new file in the same folder.

    The folder is made if it is missing. Raises BadInput where it cannot be written to, NoRoom
    on a full disk.
    """
    try:
        path.parent.mkdir(parents=True, exist_ok=True)
        handle, name = tempfile.mkstemp(dir=path.parent, prefix=f".{path.name}.")
        fresh = Path(name)
        try:
            with os.fdopen(handle, "wb") as file:
                file.write(data)
                file.flush()
                os.fsync(file.fileno())
            fresh.replace(path)
        finally:
            fresh.unlink(missing_ok=True)
    except OSError as error:
        raise cannot_write(path, error) from error
