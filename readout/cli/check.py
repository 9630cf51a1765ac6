"""``readout check``: is the set-up sound? Distance, range, floor and linearity."""

from __future__ import annotations

import sys
import time
from pathlib import Path
from typing import Annotated

import typer

from readout.cli.options import JsonOption
from readout.cli.results import OverwriteOption, refuse_loss
from readout.cli.say import note, print_json, print_line, progress
from readout.units import decimals_for, signed

EXAMPLE = "Example: `readout check range 500 2000 --objective-mm 40 --mirror-mm 25`"

app = typer.Typer(no_args_is_help=True)

Diameter = Annotated[float | None, typer.Option(min=0.0, metavar="D", help="Free diameter.")]


@app.command(
    epilog="Example: `readout check distance rows.csv --focal-length-mm 300 --objective-mm 40 "
    "--mirror-mm 25`"
)
def distance(
    file: Annotated[
        Path,
        typer.Argument(
            metavar="ROWS.csv", help="distance_mm, step, x_arcsec, y_arcsec and sd_arcsec."
        ),
    ],
    focal_length_mm: Annotated[float, typer.Option(metavar="F", help="Of the objective.")],
    focal_length_sd_mm: Annotated[
        float, typer.Option(min=0.0, metavar="U", help="Its standard uncertainty.")
    ] = 0.0,
    step_sd_arcsec: Annotated[
        float, typer.Option(min=0.0, metavar="S", help="How well the step repeats, if known.")
    ] = 0.0,
    objective_mm: Diameter = None,
    mirror_mm: Diameter = None,
    json: JsonOption = False,
) -> None:
    """Find the sensor's defocus from two tilts, read at several distances of the mirror.

    One row a reading: the distance, which of the two tilts (a name of your own in `step`), and the
    angle in one axis or both. How the way itself tilts the mirror is told apart from it. With both
    diameters, readings that the objective clipped are refused: they hide a defocus.
    """
    from readout.angle.distance_fit import check_distance
    from readout.angle.distance_rows import distance_rows
    from readout.files.csv_table import table_of

    found = check_distance(
        distance_rows(table_of(file, needs=("distance_mm", "step"))),
        focal_length_mm=focal_length_mm,
        focal_length_sd_mm=focal_length_sd_mm,
        step_sd_arcsec=step_sd_arcsec,
        objective_mm=objective_mm,
        mirror_mm=mirror_mm,
    )
    if json:
        print_json(found.document())
        return
    decimals = decimals_for(found.defocus_u_mm)
    value, u = signed(found.defocus_mm, decimals), f"{found.defocus_u_mm:.{decimals}f}"
    print_line(f"defocus {value} ± {u} mm (standard uncertainty)")
    for line in (*found.words(), *(f"note: {warning}" for warning in found.warnings)):
        print_line(line)


@app.command("range", epilog=EXAMPLE)
def clear(
    distance_mm: Annotated[
        list[float], typer.Argument(metavar="DISTANCE_MM...", help="Of the mirror.")
    ],
    objective_mm: Annotated[float, typer.Option(metavar="D", help="Its free diameter.")],
    mirror_mm: Annotated[float, typer.Option(metavar="M", help="Its free diameter.")],
    json: JsonOption = False,
) -> None:
    """Say up to which tilt the return comes back whole, and where it is gone.

    Both from the optical axis, for a mirror centred on it.
    """
    from readout.angle.distance import clear_range

    found = [
        clear_range(one, objective_mm=objective_mm, mirror_mm=mirror_mm) for one in distance_mm
    ]
    for limits in found:
        if json:
            print_json(limits.document())
        else:
            print_line(limits.words())


@app.command(epilog="Example: `readout check floor clamped.csv --out floor.json`")
def floor(
    file: Annotated[
        Path,
        typer.Argument(metavar="READINGS.csv", help="Readings, as `measure --csv` writes them."),
    ],
    out: Annotated[
        Path | None, typer.Option(metavar="FILE", help="Keep the floor in this file.")
    ] = None,
    overwrite: OverwriteOption = False,
    json: JsonOption = False,
) -> None:
    """Make the instrument's floor from a null test, the mirror clamped to its objective.

    What drifts and scatters then is the instrument itself. `readout drift --floor` claims no
    smaller drift of anything else.
    """
    from readout.files.floor_file import save_floor
    from readout.files.tilt_series_file import read_tilt_series
    from readout.stability import floor_document, floor_of_null_test
    from readout.utc import utc_text

    if out is not None:
        refuse_loss(out, overwrite=overwrite, inputs=[file], makes_folder=True)
    with progress("rows") as tell:
        series = read_tilt_series(file, tell)
    made = floor_of_null_test(
        series.t_s, series.x_arcsec, series.y_arcsec, created_utc=utc_text(time.time_ns())
    )
    if out is not None:
        save_floor(out, made)
    if json:
        print_json(floor_document(made))
        return
    for line in made.words():
        print_line(line)
    if out is None and sys.stderr.isatty():
        note("not kept: give --out FILE to keep it")


@app.command(epilog="Example: `readout check linearity bench.json --period-arcsec 360`")
def linearity(
    calibration: Annotated[
        Path, typer.Argument(metavar="CALIBRATION.json", help="With residuals at ten angles.")
    ],
    period_arcsec: Annotated[
        list[float] | None,
        typer.Option(metavar="P", help="A period suspected in the stage; may be given again."),
    ] = None,
    json: JsonOption = False,
) -> None:
    """Look through a calibration's residuals for a curve or a periodic error.

    Against the angle, and within the pixel; what is found comes with its size and with how likely
    chance alone would show as much.
    """
    from readout.angle.linearity import examine_calibration
    from readout.files.calibration_file import load_calibration

    found = examine_calibration(
        load_calibration(calibration), angle_periods_arcsec=period_arcsec or ()
    )
    for axis in found:
        if json:
            print_json(axis.document())
            continue
        for line in axis.words():
            print_line(line)
