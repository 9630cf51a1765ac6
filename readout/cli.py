"""The commands: thin, each importing what it needs, so that help comes at once."""

from __future__ import annotations

import os
import sys
from importlib import metadata
from pathlib import Path
from typing import Annotated, NoReturn

import typer

from readout.errors import BadInput, ReadoutError
from readout.model import Target

app = typer.Typer(
    name="readout",
    help="The electronic readout of an autocollimator.",
    no_args_is_help=True,
    add_completion=False,
    pretty_exceptions_enable=False,
    rich_markup_mode="markdown",
)

OPENCV = (
    "opencv-python",
    "opencv-contrib-python",
    "opencv-python-headless",
    "opencv-contrib-python-headless",
)

TargetOption = Annotated[Target | None, typer.Option(help="What is imaged on the sensor.")]
CalibrationOption = Annotated[
    Path | None, typer.Option(metavar="FILE", help="Calibration file (JSON).")
]
SettingsOption = Annotated[
    Path | None, typer.Option("--settings", metavar="FILE", help="Settings file to use.")
]


def main() -> None:
    """Run the command line; a failure is one line on standard error and exit status 1."""
    try:
        refuse_two_opencvs()
        app()
    except ReadoutError as error:
        fail(str(error))
    except BrokenPipeError:  # whoever read our output has left: nothing to tell
        os.dup2(os.open(os.devnull, os.O_WRONLY), sys.stdout.fileno())
        sys.exit(1)
    except OSError as error:
        fail(f"{error}: check the name and the permissions")


def fail(line: str) -> NoReturn:
    """Say what is wrong and leave with status 1."""
    sys.stderr.write(f"readout: {line}\n")
    sys.exit(1)


def refuse_two_opencvs() -> None:
    """Two OpenCV distributions fill the same folder, and which one works is chance."""
    found = []
    for name in OPENCV:
        try:
            found.append(f"{name} {metadata.version(name)}")
        except metadata.PackageNotFoundError:
            continue
    if len(found) > 1:
        raise BadInput(
            f"two OpenCV packages are installed ({', '.join(found)}): uninstall all of them, "
            "then install opencv-python-headless alone"
        )


@app.callback()
def readout() -> None:
    """The electronic readout of an autocollimator."""


@app.command(
    epilog="Example: `readout live --source usb:0` measures with the first camera; "
    "without a camera `readout live` shows a simulated mirror."
)
def live(
    source: Annotated[
        str | None,
        typer.Option(
            metavar="SOURCE",
            help="simulated, usb:N, usb:IDENTITY, a video file, a folder of frames, "
            "http://… (MJPEG) or rtsp://…. Without it: the camera of the settings, else simulated.",
        ),
    ] = None,
    target: TargetOption = None,
    calibration: CalibrationOption = None,
    port: Annotated[int, typer.Option(min=0, max=65535, help="0: any free port.")] = 8470,
    data: Annotated[
        Path | None, typer.Option(metavar="DIR", help="Folder for what is recorded.")
    ] = None,
    settings: SettingsOption = None,
    browser: Annotated[
        bool | None,
        typer.Option("--browser/--no-browser", help="Default: from a terminal with a display."),
    ] = None,
) -> None:
    """Measure without end and serve the dashboard and the endpoints on this machine."""
    from platformdirs import user_data_path

    from readout.service.control import Options
    from readout.service.live import Place, run_live
    from readout.service.settings import default_settings_path

    def say(line: str) -> None:
        typer.echo(line)
        sys.stdout.flush()

    place = Place(
        port=port,
        data=data or user_data_path("readout", appauthor=False),
        settings=settings or default_settings_path(),
    )
    run_live(Options(source, target, calibration), place, browser=browser, say=say)
