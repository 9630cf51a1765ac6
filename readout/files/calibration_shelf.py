"""A folder of calibration files to choose from, each named after the calibration in it."""

from __future__ import annotations

import re
from pathlib import Path

from readout.angle.calibration import Calibration
from readout.errors import BadInput
from readout.files.atomic import write_text_whole
from readout.files.calibration_file import load_calibration, parse_calibration

# Windows keeps these names for devices, whatever follows behind a dot ("Naming Files, Paths, and
# Namespaces", Microsoft Learn).
_DEVICE = re.compile(r"(con|prn|aux|nul|com[0-9]|lpt[0-9])(\..*)?", re.IGNORECASE)
_PLAIN = re.compile(r"[A-Za-z0-9][A-Za-z0-9_-]{0,99}(\.[A-Za-z0-9_-]+)*")


def kept_calibrations(folder: Path) -> list[tuple[Path, Calibration]]:
    """Files and what they hold, the youngest calibration first; a file that is none is left out."""
    kept = []
    for path in sorted(folder.glob("*.json")):
        try:
            kept.append((path, load_calibration(path)))
        except BadInput:  # somebody's, in our folder: not ours to mend, and nothing to choose
            continue
    return sorted(kept, key=lambda entry: entry[1].created_utc, reverse=True)


def keep_calibration(folder: Path, text: bytes) -> tuple[Path, Calibration]:
    """Keep what a calibration file holds; to keep the same again changes nothing.

    Raises BadInput if it is no calibration, or if another one of the same id is kept already:
    readings name their calibration by its id, so one id means one calibration.
    """
    calibration = parse_calibration(text, name="the file")
    if not _PLAIN.fullmatch(calibration.id) or _DEVICE.fullmatch(calibration.id):
        raise BadInput(
            f"the id {calibration.id!r} cannot name a file on every system: use letters, digits, "
            "- and _ in it, and no name of a device (con, nul, com1 and the like)"
        )
    path = folder / f"{calibration.id}.json"
    for kept in folder.glob("*.json"):
        if kept.name != path.name and kept.name.casefold() == path.name.casefold():
            raise BadInput(
                f"a calibration {kept.stem} is kept already, and on some systems {calibration.id} "
                "would be the same file: give this one an id of its own"
            )
    if not path.exists():
        write_text_whole(path, text.decode("utf-8"))
    elif load_calibration(path) != calibration:
        raise BadInput(
            f"another calibration with the id {calibration.id} is kept already: "
            "give this one an id of its own"
        )
    return path, calibration
