"""Options that say what is known of the camera, and what they give."""

from __future__ import annotations

import time
from pathlib import Path
from typing import TYPE_CHECKING, Annotated

import typer

if TYPE_CHECKING:
    from readout.instrument.preparing import Preparing

FixedOption = Annotated[
    list[Path] | None,
    typer.Option(
        metavar="FRAME",
        help="Taken with the lamp on and the mirror covered: what it shows is fixed, and is taken "
        "away. A picture or a folder of them, to be averaged; may be given again.",
    ),
]
DarkOption = Annotated[
    list[Path] | None,
    typer.Option(
        metavar="FRAME",
        help="Taken with the lamp off: dark level and bad pixels. A picture or a folder; may be "
        "given again.",
    ),
]
GammaOption = Annotated[
    float | None,
    typer.Option(
        metavar="G",
        help="The camera's levels go as the light to the power G, 0.45 for many webcams.",
    ),
]
PreparationOption = Annotated[
    Path | None,
    typer.Option(
        "--prepared",
        metavar="FILE",
        help="What is known of the camera, in a file from `readout prepare`.",
    ),
]


def preparing_from(
    file: Path | None, fixed: list[Path] | None, dark: list[Path] | None, gamma: float | None
) -> Preparing | None:
    """What the options give, None for none. Raises BadInput for files that cannot be used."""
    direct = bool(fixed or dark or gamma is not None)
    if file is not None and direct:
        raise typer.BadParameter("--prepared holds all of it: leave out --fixed, --dark, --gamma")
    if file is None and not direct:
        return None
    from readout.files.camera_frames import knowledge_from
    from readout.files.preparation_file import load_knowledge
    from readout.instrument.preparing import Always
    from readout.sighting.response import power_response
    from readout.utc import utc_text

    if file is not None:
        return Always(load_knowledge(file))
    if not (fixed or dark):
        power_response(gamma or 0.0, 255)  # a number that makes no curve is refused now
        return Always(gamma=gamma)
    return Always(
        knowledge_from(
            fixed=fixed or (), dark=dark or (), gamma=gamma, made_utc=utc_text(time.time_ns())
        )
    )
