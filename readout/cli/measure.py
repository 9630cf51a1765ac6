"""``readout measure``."""

from __future__ import annotations

import math
import sys
from collections.abc import Callable, Iterator
from contextlib import ExitStack, contextmanager
from pathlib import Path
from typing import TYPE_CHECKING, Annotated

import typer

from readout.angle import Calibration
from readout.cli.ending import ended_by_signals
from readout.cli.options import (
    SOURCES,
    CalibrationOption,
    JsonOption,
    SettingsOption,
)
from readout.cli.preparing import (
    DarkOption,
    FixedOption,
    GammaOption,
    PreparationOption,
    preparing_from,
)
from readout.cli.results import OverwriteOption, ReadingsFile, refuse_loss
from readout.cli.say import note, print_json, print_line, progress, quality_words, warn
from readout.errors import BadInput
from readout.files.readings_file import ReadingsWriter
from readout.model import Reading, Target
from readout.rows import reading_row
from readout.units import decimals_for, signed

EXAMPLE = "Example: `readout measure frames --calibration frames/calibration.json --csv angles.csv`"

if TYPE_CHECKING:
    from readout.instrument import Optics

STDOUT = Path("-")
Write = Callable[[Reading], None]


def measure(
    source: Annotated[str, typer.Argument(metavar="SOURCE", help=f"{SOURCES}.")],
    calibration: CalibrationOption = None,
    target: Annotated[Target | None, typer.Option(help="Default: the calibration's.")] = None,
    fixed: FixedOption = None,
    dark: DarkOption = None,
    gamma: GammaOption = None,
    prepared: PreparationOption = None,
    csv: Annotated[
        Path | None, typer.Option(metavar="FILE", help="Write rows to this file; - for here.")
    ] = None,
    overwrite: OverwriteOption = False,
    json: JsonOption = False,
    frames: Annotated[
        int | None, typer.Option(min=1, metavar="N", help="End after N frames.")
    ] = None,
    seconds: Annotated[
        float | None, typer.Option(min=0.0, metavar="S", help="End after S seconds.")
    ] = None,
    give_up_after: Annotated[
        float,
        typer.Option(
            min=0.0, metavar="S", help="Wait so long for a stream that vanishes; inf: for ever."
        ),
    ] = 30.0,
    settings: SettingsOption = None,
) -> None:
    """Measure the mirror's angles in every frame of a folder, video or stream.

    A scale is needed: a calibration file, or focal length and pixel pitch in the settings (the
    simulator brings its own). An endless source is measured until Ctrl-C; every row is written
    when it is measured. A CSV file that is there already is replaced only with --overwrite, and
    not before the first row.
    """
    from readout.capture.compression import LOSSY, is_lossy
    from readout.instrument import Instrument
    from readout.instrument.measuring import Measuring
    from readout.instrument.opening import open_observer

    if json and csv == STDOUT:
        raise typer.BadParameter("--json and --csv - would both write here: give --csv a file")
    if csv is not None and csv != STDOUT:
        inputs = [Path(source), *([calibration] if calibration else [])]
        refuse_loss(csv, overwrite=overwrite, inputs=inputs)
    preparing = preparing_from(prepared, fixed, dark, gamma)
    scale = _scale(source, calibration, settings)
    if target is None:
        target = scale.target if isinstance(scale, Calibration) else Target.CROSSHAIR
    lossy = is_lossy(source)
    instrument = Instrument(
        scale=scale,
        observe=lambda s, t: open_observer(s, t, preparing=preparing),
        from_first_frame=True,
    )
    with (
        _writing(csv, json=json) as write,
        progress("frames", frames, show=csv is not None) as show,
    ):

        def write_and_show(reading: Reading) -> None:
            if lossy and measuring.n == 0:  # said of a source that can be read, and only then
                warn(LOSSY)
            write(reading)
            show(measuring.n)

        measuring = Measuring(
            instrument,
            write_and_show,
            warn=warn,
            most=frames,
            seconds=seconds,
            give_up_after_s=give_up_after,
        )
        with ended_by_signals(measuring.stop):
            measuring.run(source, target=target)
    if csv is not None and sys.stderr.isatty():
        note(f"{measuring.n} frames measured, {measuring.good} without a doubt: {csv}")


def _scale(
    source: str, calibration: Path | None, settings: Path | None
) -> Calibration | Optics | None:
    from readout.capture.open import describe_source

    if calibration is not None:
        from readout.files.calibration_file import load_calibration

        return load_calibration(calibration)
    return None if describe_source(source).simulated else _optics_of_settings(settings)


def _optics_of_settings(path: Path | None) -> Optics:
    from readout.service.settings import SettingsStore, default_settings_path

    optics = SettingsStore(path or default_settings_path()).current.optics.optics
    if optics is None:
        raise BadInput(
            "no scale: give --calibration FILE, or set focal length and pixel pitch "
            "(optics in the settings)"
        )
    warn("no calibration: the scale is nominal, from focal length and pitch in the settings")
    return optics


@contextmanager
def _writing(csv: Path | None, *, json: bool) -> Iterator[Write]:
    """Where the rows go: JSON lines and a CSV file together if both are asked for."""
    with ExitStack() as stack:
        writes: list[Write] = []
        if json:
            writes.append(lambda reading: print_json(reading_row(reading)))
        if csv is not None:
            if csv == STDOUT:
                writes.append(stack.enter_context(ReadingsWriter(sys.stdout)).write)
            else:
                writes.append(stack.enter_context(ReadingsFile(csv)).write)
        if not writes:
            writes.append(lambda reading: print_line(_words(reading)))

        def write(reading: Reading) -> None:
            for each in writes:
                each(reading)

        yield write


def _words(reading: Reading) -> str:
    """A reading as a person reads it, with the digits its noise allows."""
    name = reading.name or f"{reading.t_s:9.3f} s"
    quality = quality_words(reading.quality)
    angles = (
        f"{axis} {signed(value, decimals_for(sd)):>12}″ ± {sd:.{decimals_for(sd)}f}″"
        for axis, value, sd in (
            ("x", reading.x_arcsec, reading.x_sd_arcsec),
            ("y", reading.y_arcsec, reading.y_sd_arcsec),
        )
        if math.isfinite(value)
    )
    return "  ".join([name, *angles, quality])


command = measure
