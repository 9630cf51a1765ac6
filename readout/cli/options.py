"""Options several commands share."""

from __future__ import annotations

from pathlib import Path
from typing import Annotated

import typer

from readout.model import Target

SOURCES = (
    "simulated, usb:N, usb:IDENTITY, a video file, a folder of frames (sorted by name), "
    "http://… (MJPEG) or rtsp://…"
)

TargetOption = Annotated[Target | None, typer.Option(help="What is imaged on the sensor.")]
CalibrationOption = Annotated[
    Path | None, typer.Option(metavar="FILE", help="Calibration file (JSON).")
]
SettingsOption = Annotated[
    Path | None,
    typer.Option(metavar="FILE", help="Settings file; without it, the one of this user."),
]
DataOption = Annotated[
    Path | None,
    typer.Option(metavar="DIR", help="Folder of what is recorded; without it, this user's."),
]
JsonOption = Annotated[
    bool, typer.Option("--json", help="One JSON object a line, nothing else on standard output.")
]


def data_folder(given: Path | None) -> Path:
    """Where runs are kept: as given, else the folder the platform has for a user's data."""
    from platformdirs import user_data_path

    return given or user_data_path("readout", appauthor=False)
