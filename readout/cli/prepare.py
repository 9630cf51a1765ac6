"""``readout prepare``."""

from __future__ import annotations

import time
from pathlib import Path
from typing import Annotated

import typer

from readout.cli.preparing import DarkOption, FixedOption, GammaOption
from readout.cli.results import OverwriteOption, refuse_loss
from readout.cli.say import print_line
from readout.sighting.raw import Colour, Mosaic

EXAMPLE = "Example: `readout prepare camera.npz --fixed covered --dark dark --gamma 0.45`"


def prepare(
    out: Annotated[Path, typer.Argument(metavar="FILE", help="Where it is kept, a .npz file.")],
    fixed: FixedOption = None,
    dark: DarkOption = None,
    gamma: GammaOption = None,
    mosaic: Annotated[
        Mosaic | None,
        typer.Option(help="The frames are raw: the colours of their top-left four pixels."),
    ] = None,
    colour: Annotated[Colour, typer.Option(help="The colour to measure in.")] = Colour.GREEN,
    saturation: Annotated[
        int | None,
        typer.Option(min=1, metavar="LEVEL", help="Where the camera clips, if below full scale."),
    ] = None,
    levels: Annotated[
        int | None,
        typer.Option(
            min=1, max=65535, metavar="TOP", help="The largest level, if no frame is given: 255."
        ),
    ] = None,
    overwrite: OverwriteOption = False,
) -> None:
    """Keep what is known of a camera in a file, for `--prepared` of locate, measure and live.

    Cover the mirror, leave the lamp on, and take some frames: what they show comes from the
    instrument itself. With the lamp off they show the dark level and bad pixels.
    """
    from readout.files.camera_frames import knowledge_from
    from readout.files.preparation_file import SUFFIX, save_knowledge
    from readout.sighting.raw import Plane
    from readout.utc import utc_text

    if out.suffix != SUFFIX:
        raise typer.BadParameter(f"name the file {SUFFIX}: {out.with_suffix(SUFFIX)}")
    refuse_loss(out, overwrite=overwrite, inputs=[*(fixed or ()), *(dark or ())])
    known = knowledge_from(
        fixed=fixed or (),
        dark=dark or (),
        gamma=gamma,
        plane=None if mosaic is None else Plane(mosaic, colour),
        saturation=saturation,
        made_utc=utc_text(time.time_ns()),
        full_scale=levels,
    )
    save_knowledge(out, known)
    made = known.preparation
    size = "any size" if known.size_px is None else "{} × {} px".format(*known.size_px)
    print_line(f"pictures       {size}, levels up to {known.full_scale}")
    if known.fixed_frames:
        print_line(f"fixed light    mean of {known.fixed_frames} frames")
    if known.dark_frames:
        print_line(f"dark level     mean of {known.dark_frames} frames")
    if made.defective is not None:
        print_line(f"bad pixels     {int(made.defective.sum())}")
    if gamma is not None:
        print_line(f"tone curve     light^{gamma:g}, undone")
    if mosaic is not None:
        print_line(f"measured in    {colour.name.lower()} of {mosaic.value}")
    if saturation is not None:
        print_line(f"saturated at   {saturation}")


command = prepare
