"""A folder of frames with their truth: what a fit can be tried on.

``frame_000000.png`` and so on, 8 or 16 bit; ``truth.csv`` with a row a frame; and
``calibration.json``, the calibration the frames belong to.
"""

from __future__ import annotations

import csv
from collections.abc import Callable, Iterable
from pathlib import Path

from readout.angle import Calibration
from readout.errors import BadInput, cannot_write
from readout.files.calibration_file import save_calibration
from readout.files.pictures import write_picture
from readout.model import Pixels
from readout.simulation import Truth

TRUTH_COLUMNS = ("file", "t_s", "x_px", "y_px", "x_arcsec", "y_arcsec")


def write_frameset(
    folder: Path,
    frames: Iterable[tuple[Pixels, Truth]],
    *,
    calibration: Calibration,
    full_scale: int,
    on_frame: Callable[[int], None] | None = None,
) -> int:
    """Write frames, truth and calibration into a new or empty folder; the number of frames.

    ``frames`` are written as they come, each picture before its row, so that an interrupted set
    holds a row for no picture that is not there. ``full_scale``: the sensor's largest level, kept
    in each picture. ``on_frame`` is told the number written so far, for a progress display.
    Raises BadInput if the folder holds anything or cannot be written to.
    """
    folder = Path(folder)
    _make_empty(folder)
    save_calibration(folder / "calibration.json", calibration)
    n = 0
    try:
        with (folder / "truth.csv").open("w", encoding="utf-8", newline="") as file:
            table = csv.writer(file, lineterminator="\n")
            table.writerow(TRUTH_COLUMNS)
            for pixels, truth in frames:
                name = f"frame_{n:06d}.png"
                write_picture(folder / name, pixels, full_scale=full_scale)
                table.writerow([name, *(getattr(truth, column) for column in TRUTH_COLUMNS[1:])])
                n += 1
                if on_frame is not None:
                    on_frame(n)
    except OSError as error:
        raise cannot_write(folder, error) from error
    return n


def _make_empty(folder: Path) -> None:
    """Make the folder, with those above it. Raises BadInput unless it is empty then."""
    try:
        folder.mkdir(parents=True, exist_ok=True)
        occupied = any(folder.iterdir())
    except FileExistsError:
        raise BadInput(f"{folder} is a file: name a new or empty folder") from None
    except OSError as error:
        raise BadInput(
            f"cannot make {folder} ({error.strerror or error}): choose another place"
        ) from error
    if occupied:
        raise BadInput(f"{folder} is not empty: name a new folder, nothing was written")
