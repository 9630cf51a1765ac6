"""A folder of pictures, read in the order of their names."""

from __future__ import annotations

import csv
import math
from dataclasses import dataclass
from itertools import pairwise
from pathlib import Path
from types import TracebackType
from typing import Self

import numpy as np

from readout.capture.damaged import blank
from readout.errors import BadInput, SourceEnded, SourceLost
from readout.files.pictures import PICTURE_SUFFIXES, read_picture
from readout.model import Frame, Quality

TIME_TABLES = ("times.csv", "truth.csv")
_LONGEST_S = 1e9  # thirty years


@dataclass(frozen=True, slots=True)
class _Entry:
    path: Path
    t_ns: int
    t_utc_ns: int


class FolderSource:
    """Every picture of a folder once, chosen by its suffix, sorted by name.

    Times come from the columns ``file,t_s`` of ``times.csv`` or ``truth.csv`` in the folder, else
    from the modification times of the files; they count from the first frame. UTC is the
    modification time of the first picture, counted on.

    A picture that cannot be read still has its place in time: it becomes a black frame of the
    size of the first sound one, marked ``damaged``. Only where no picture can be read, the
    folder is refused.
    """

    live = False

    def __init__(self, folder: Path | str) -> None:
        """Nothing is opened yet. ``folder``: path of an existing folder."""
        self._folder = Path(folder)
        self._entries: list[_Entry] | None = None
        self._next = 0
        self._shape: tuple[int, ...] = (0, 0)
        self._full_scale = 255

    def __enter__(self) -> Self:
        self._entries = _entries(self._folder)
        self._next = 0
        self._look_at_first_sound_picture()
        return self

    def __exit__(
        self,
        exc_type: type[BaseException] | None,
        exc: BaseException | None,
        tb: TracebackType | None,
    ) -> None:
        self._entries = None

    def __len__(self) -> int:
        """Frames in the open folder."""
        return len(self._entries or ())

    def read(self, timeout_s: float) -> Frame:  # noqa: ARG002 (a file is there or is not)
        """The next picture; see `readout.capture.source.Source`."""
        if self._entries is None:
            raise SourceLost(f"{self._folder} is not open: open it first")
        if self._next >= len(self._entries):
            raise SourceEnded(f"{self._folder}: all {len(self._entries)} pictures have been read")
        seq, entry = self._next, self._entries[self._next]
        self._next += 1
        quality = Quality.OK
        try:
            pixels, full_scale = read_picture(entry.path)
        except BadInput:
            pixels, full_scale = blank(self._shape, self._full_scale), self._full_scale
            quality = Quality.DAMAGED
        return Frame(pixels, seq, entry.t_ns, entry.t_utc_ns, full_scale, entry.path.name, quality)

    def _look_at_first_sound_picture(self) -> None:
        first_error: BadInput | None = None
        for entry in self._entries or ():
            try:
                pixels, self._full_scale = read_picture(entry.path)
            except BadInput as error:
                first_error = first_error or error
            else:
                self._shape = pixels.shape
                return
        if first_error:
            raise first_error


def _entries(folder: Path) -> list[_Entry]:
    """The pictures of a folder with their times. Raises BadInput where there is none."""
    if not folder.exists():
        raise BadInput(f"{folder} does not exist: check the name")
    if not folder.is_dir():
        raise BadInput(f"{folder} is a file: give a folder of pictures")
    try:
        paths = sorted(
            p for p in folder.iterdir() if p.suffix.lower() in PICTURE_SUFFIXES and p.is_file()
        )
        changed_ns = [path.stat().st_mtime_ns for path in paths]
    except OSError as error:
        raise BadInput(
            f"{folder} cannot be read ({error.strerror}): check its permissions"
        ) from error
    if not paths:
        raise BadInput(f"{folder} holds no picture (PNG, TIFF, JPEG, BMP, PGM): choose another")
    t_ns = _times_from_table(folder, [path.name for path in paths])
    if t_ns is None:
        t_ns = [t - changed_ns[0] for t in changed_ns]
        t_ns = np.maximum.accumulate(t_ns).tolist()  # copies may carry times out of order
    return [_Entry(path, t, changed_ns[0] + t) for path, t in zip(paths, t_ns, strict=True)]


def _times_from_table(folder: Path, names: list[str]) -> list[int] | None:
    """Nanoseconds since the first picture, None if the folder has no table of times."""
    for table in (folder / name for name in TIME_TABLES):
        if not table.is_file():
            continue
        try:
            with table.open(encoding="utf-8-sig", newline="") as file:
                rows = csv.DictReader(file)
                if not {"file", "t_s"} <= set(rows.fieldnames or ()):
                    continue
                known = {row["file"]: row["t_s"] or "" for row in rows}
        except (OSError, UnicodeDecodeError, csv.Error) as error:
            raise BadInput(f"{table} cannot be read as CSV ({error}): correct it") from error
        t_ns = [_t_ns(known, name, table) for name in names]
        for before, after in pairwise(range(len(names))):
            if t_ns[after] < t_ns[before]:
                raise BadInput(
                    f"{table}: {names[after]} comes after {names[before]} by name, but before it "
                    "by t_s: name the pictures in the order of time"
                )
        return [t - t_ns[0] for t in t_ns]
    return None


def _t_ns(known: dict[str, str], name: str, table: Path) -> int:
    try:
        t_s = float(known[name])
    except KeyError:
        raise BadInput(f"{table} has no row for {name}: add it or remove the table") from None
    except ValueError:
        t_s = math.nan
    if not abs(t_s) < _LONGEST_S:  # NaN is not, either
        raise BadInput(f"{table}: t_s of {name} is no number of seconds: correct it")
    return round(t_s * 1e9)
