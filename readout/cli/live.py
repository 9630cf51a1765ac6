"""``readout live``."""

from __future__ import annotations

from threading import Event
from typing import Annotated

import typer

from readout.cli.ending import ended_by_signals
from readout.cli.options import (
    SOURCES,
    CalibrationOption,
    DataOption,
    SettingsOption,
    TargetOption,
    data_folder,
)
from readout.cli.preparing import PreparationOption, preparing_from
from readout.cli.say import print_line, warn

EXAMPLE = (
    "Example: `readout live --source usb:0` measures with the first camera. "
    "Without a camera, `readout live` shows a simulated mirror."
)


def live(
    source: Annotated[
        str | None,
        typer.Option(
            metavar="SOURCE",
            help=f"{SOURCES}. Without it: the source of the settings, else simulated.",
        ),
    ] = None,
    target: TargetOption = None,
    calibration: CalibrationOption = None,
    prepared: PreparationOption = None,
    port: Annotated[int, typer.Option(min=0, max=65535, help="0: any free port.")] = 8470,
    data: DataOption = None,
    settings: SettingsOption = None,
    browser: Annotated[
        bool | None,
        typer.Option("--browser/--no-browser", help="Default: from a terminal with a display."),
    ] = None,
) -> None:
    """Measure without end, and serve the dashboard and the endpoints on this machine.

    Ctrl-C ends it.
    """
    ending = Event()
    with ended_by_signals(ending.set):  # before the imports: they take a second
        from readout.files.calibration_file import load_calibration
        from readout.service.control import Options
        from readout.service.live import Place, run_live
        from readout.service.settings import default_settings_path

        place = Place(
            port=port,
            data=data_folder(data),
            settings=settings or default_settings_path(),
        )
        options = Options(
            source,
            target,
            load_calibration(calibration) if calibration else None,
            preparing_from(prepared, None, None, None),
        )
        run_live(options, place, ending, browser=browser, say=print_line, warn=warn)


command = live
