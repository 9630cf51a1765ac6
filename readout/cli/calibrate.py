"""``readout calibrate``."""

from __future__ import annotations

import math
import sys
import time
from pathlib import Path
from typing import TYPE_CHECKING, Annotated, Any

import typer

from readout.cli.options import JsonOption
from readout.cli.results import OverwriteOption, refuse_loss
from readout.cli.say import note, print_json, print_line, progress
from readout.errors import BadInput
from readout.units import decimals_for, signed

EXAMPLE = "Example: `readout calibrate calib_images/bench_stage --out bench.json`"

ANY_SIZE_PX = (1280, 960)
"""the expected uncertainty does not depend on the size of the pictures"""

if TYPE_CHECKING:
    from readout.angle import Calibration


def calibrate(
    folder: Annotated[
        Path,
        typer.Argument(metavar="SET", help="Folder with frames, tilts.csv and set.toml."),
    ],
    out: Annotated[
        Path | None, typer.Option(metavar="FILE", help="Keep the calibration in this file.")
    ] = None,
    json: JsonOption = False,
    report: Annotated[
        Path | None, typer.Option(metavar="FILE.html", help="Write a page with figure and table.")
    ] = None,
    expect: Annotated[
        bool,
        typer.Option(
            "--expect",
            help="Say from tilts.csv and set.toml alone what the scale will be worth; "
            "no frame need be there yet.",
        ),
    ] = False,
    overwrite: OverwriteOption = False,
) -> None:
    """Calibrate from frames taken at known mirror tilts.

    The tilts may have a common unknown zero, which is fitted. They may come from a stage, a lever
    raised by blocks, or a wedge of glass; or the scale comes from a graduated reticle. The
    uncertainty printed is a standard uncertainty of the scale; what is left over is listed frame
    by frame.
    """
    from readout.files.calibration_file import save_calibration
    from readout.files.calibration_set import read_calibration_set
    from readout.instrument.calibrating import calibrate_set
    from readout.utc import utc_text

    for result in (out, report):
        if result is not None:
            refuse_loss(result, overwrite=overwrite, inputs=[folder], makes_folder=True)
    if expect:
        _say_expected(folder, json=json)
        return
    given = read_calibration_set(folder)
    with progress("frames", len(given.tilts)) as show:
        made = calibrate_set(given, created_utc=utc_text(time.time_ns()), on_frame=show)
    if out is not None:
        save_calibration(out, made)
    if report is not None:
        from readout.files.atomic import write_text_whole
        from readout.report.calibration_page import calibration_page

        write_text_whole(report, calibration_page(made))
    if json:
        print_json(_object(made))
        return
    for line in _lines(made, given.nominal_focal_length_mm):
        print_line(line)
    if out is None and sys.stderr.isatty():
        note("not kept: give --out FILE to keep it")


def _say_expected(folder: Path, *, json: bool) -> None:
    """What the planned tilts will be worth."""
    from readout.angle.expected import PLACE_SD_PX, expected_scale
    from readout.files.calibration_set import read_calibration_set

    given = read_calibration_set(folder, with_frames=False)
    if given.graduation is not None:
        raise BadInput(
            "--expect is for known tilts: a graduated scale is worth what its rel_sd says, and the "
            "places of its marks"
        )
    focal_mm, pitch_um = given.nominal_focal_length_mm, given.pitch_um
    known = (
        {}
        if focal_mm is None or pitch_um is None
        else {"focal_length_px": focal_mm / pitch_um * 1e3}
    )
    found = expected_scale(given.planned(), given.camera(*ANY_SIZE_PX), **known)
    if json:
        print_json(
            {
                "focal_length_rel_sd": found.rel_sd,
                "rows_rel_sd": found.rows_rel_sd,
                "shared": [{"name": name, "rel_sd": u} for name, u in found.shared_rel_sd],
                "largest": found.largest,
                "n": len(given.tilts),
                "method": given.way,
            }
        )
        return
    print_line(f"u(f)/f         {_percent(found.rel_sd)} expected, of {len(given.tilts)} frames")
    print_line(f"each row       {_percent(found.rows_rel_sd)}, less with more rows")
    for name, u in found.shared_rel_sd:
        print_line(f"shared         {_percent(u)} from {name}, the same however many rows")
    print_line(f"limited by     {found.largest}")
    print_line(f"places         taken as good to {PLACE_SD_PX:g} px")


def _percent(share: float) -> str:
    return f"{100 * share:.2g} %"


def _object(made: Calibration) -> dict[str, Any]:
    scale_x, scale_y = made.scale_arcsec_per_px
    return {
        "id": made.id,
        "focal_length_px": made.focal_length_px,
        "focal_length_px_sd": made.focal_length_px_sd,
        "focal_length_mm": made.focal_length_mm,
        "scale_x_arcsec_per_px": scale_x,
        "scale_y_arcsec_per_px": scale_y,
        "rotation_deg": made.rotation_deg,
        "mirrored": made.mirrored,
        "signs": made.signs,
        "signs_shown": list(made.signs_shown),
        "residual_rms_arcsec": made.residual_rms_arcsec,
        "n": made.n,
        "method": made.method,
        "warnings": list(made.warnings),
    }


def _counted(made: Calibration) -> str:
    """What the rows of a calibration are."""
    return "mark" if made.method.startswith("graduated") else "frame"


def _lines(made: Calibration, nominal_mm: float | None) -> list[str]:
    """What a person wants to know, the answer first."""
    focal, sd = made.focal_length_px, made.focal_length_px_sd
    scale_x, scale_y = made.scale_arcsec_per_px
    lines = [f"focal length   {focal:.{decimals_for(sd)}f} ± {sd:.{decimals_for(sd)}f} px"]
    if made.focal_length_mm is not None:
        sd_mm = sd / focal * made.focal_length_mm
        beside = "" if nominal_mm is None else f" (nominal {nominal_mm:g} mm)"
        value = f"{made.focal_length_mm:.{decimals_for(sd_mm)}f} ± {sd_mm:.{decimals_for(sd_mm)}f}"
        lines.append(f"               {value} mm{beside}")
    way = "mirrored" if made.mirrored else "not mirrored"
    lines += [
        f"scale          {scale_x:.6f}″ a pixel along X, {scale_y:.6f}″ along Y",
        f"growing X      {made.rotation_deg:.3f}° clockwise from the picture's right, {way}",
        f"left over      {made.residual_rms_arcsec or 0.0:.4f}″ rms, {made.n} {_counted(made)}s",
        f"method         {made.method}",
        f"signs          {made.signs}",
        *(f"shown by       {shown['how']}, {shown['direction']}" for shown in made.signs_shown),
        *(f"note           {warning}" for warning in made.warnings),
        "",
        f"{_counted(made):<24} {'x px':>10} {'y px':>10} {'left X ″':>10} {'left Y ″':>10}",
    ]
    for row in made.residuals:
        left = (
            signed(math.nan if row[key] is None else row[key], 4)
            for key in ("x_residual_arcsec", "y_residual_arcsec")
        )
        x_left, y_left = left
        mark = "  the others contradict it" if row.get("outlier") else ""
        lines.append(
            f"{row['file']:<24} {row['x_px']:10.3f} {row['y_px']:10.3f} "
            f"{x_left:>10} {y_left:>10}{mark}"
        )
    return lines


command = calibrate
