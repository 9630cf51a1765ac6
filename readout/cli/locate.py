"""``readout locate``."""

from __future__ import annotations

import math
import sys
from pathlib import Path
from typing import Annotated

import typer

from readout.cli.options import JsonOption
from readout.cli.preparing import (
    DarkOption,
    FixedOption,
    GammaOption,
    PreparationOption,
    preparing_from,
)
from readout.cli.say import print_json, print_line, quality_words, warn
from readout.errors import BadInput
from readout.model import Sighting, Target
from readout.rows import Cell, rounded
from readout.units import decimals_for

EXAMPLE = "Example: `readout locate frame_*.png --json`"


def locate(
    frames: Annotated[
        list[Path],
        typer.Argument(
            metavar="FRAME...", help="PNG, TIFF, JPEG, BMP or PGM, 8 or 16 bit.", show_default=False
        ),
    ],
    target: Annotated[Target, typer.Option(help="What is imaged.")] = Target.CROSSHAIR,
    fixed: FixedOption = None,
    dark: DarkOption = None,
    gamma: GammaOption = None,
    prepared: PreparationOption = None,
    json: JsonOption = False,
) -> None:
    """Find the return image in each picture.

    Positions are in pixels from the centre of the top-left one, x to the right, y down. A picture
    without a return image is no error; a file that is no picture is named and the others are done
    all the same.
    """
    from readout.files.pictures import read_picture
    from readout.sighting import locate as find
    from readout.sighting.targets import AS_THEY_COME

    preparing = preparing_from(prepared, fixed, dark, gamma)
    unread = 0
    widest = max(len(str(path)) for path in frames)
    for path in frames:
        try:
            pixels, full_scale = read_picture(path)
            size_px = pixels.shape[1], pixels.shape[0]
            known = preparing and preparing.known_for(size_px, full_scale)
        except BadInput as error:
            unread += 1
            warn(str(error) if str(path) in str(error) else f"{path}: {error}")
            continue
        sighting = find(
            pixels,
            full_scale=full_scale,
            target=target,
            preparation=known.preparation if known else AS_THEY_COME,
        )
        if json:
            print_json(_row(path, sighting))
        else:
            print_line(f"{path!s:<{widest}}  {_words(sighting)}")
    if unread:
        sys.exit(1)


def _row(path: Path, sighting: Sighting) -> dict[str, Cell]:
    return {
        "file": str(path),
        "x_px": rounded(sighting.x_px),
        "y_px": rounded(sighting.y_px),
        "x_sd_px": rounded(sighting.x_sd_px),
        "y_sd_px": rounded(sighting.y_sd_px),
        "xy_correlation": rounded(sighting.xy_correlation),
        "quality": sighting.quality.words(),
    }


def _words(sighting: Sighting) -> str:
    quality = quality_words(sighting.quality)
    places = (
        f"{name} {value:9.{decimals_for(sd)}f} ± {sd:.{decimals_for(sd)}f} px"
        for name, value, sd in (
            ("x", sighting.x_px, sighting.x_sd_px),
            ("y", sighting.y_px, sighting.y_sd_px),
        )
        if math.isfinite(value)
    )
    return "  ".join([*places, quality])


command = locate
