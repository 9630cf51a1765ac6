"""``readout simulate``."""

from __future__ import annotations

import sys
from pathlib import Path
from typing import Annotated

import typer

from readout.angle import Mounting
from readout.cli.say import print_line, progress, warn

INTERRUPTED = 130  # as shells say that SIGINT (2) has ended a program: 128 + 2

EXAMPLE = "Example: `readout simulate practice --frames 100 --seed 7`"


def simulate(
    folder: Annotated[Path, typer.Argument(metavar="FOLDER", help="New or empty.")],
    frames: Annotated[int, typer.Option(help="How many pictures.")] = 100,
    seed: Annotated[int, typer.Option(help="The same seed gives the same pictures.")] = 0,
    frames_per_s: Annotated[float, typer.Option(help="How fast they follow each other.")] = 30.0,
    width_px: int = 640,
    height_px: int = 480,
    bits: Annotated[int, typer.Option(help="8 to 16.")] = 8,
    line_px: Annotated[float, typer.Option(help="Width of a line before the blur.")] = 5.0,
    blur_px: Annotated[float, typer.Option(help="Standard deviation of the blur.")] = 1.2,
    rotation_deg: Annotated[
        float, typer.Option(help="Turn of the camera, clockwise in the picture.")
    ] = 0.4,
    mounting: Annotated[Mounting, typer.Option(help="How the picture stands.")] = Mounting.STRAIGHT,
    dark: Annotated[bool, typer.Option("--dark", help="Dark lines on bright ground.")] = False,
    background: Annotated[
        float, typer.Option(help="Level of the darker part, of the full scale.")
    ] = 0.08,
    contrast: Annotated[
        float, typer.Option(help="What the brighter part has more, of the full scale.")
    ] = 0.7,
    noise: Annotated[bool, typer.Option(help="Photon and read noise.")] = True,
    focal_length_mm: float = 300.0,
    pitch_um: float = 3.45,
    still: Annotated[bool, typer.Option("--still", help="The mirror does not move.")] = False,
    x_arcsec: Annotated[float, typer.Option(help="The tilt that motion goes around.")] = 24.0,
    y_arcsec: float = -13.0,
) -> None:
    """Make pictures of a simulated return, with the truth beside them.

    Writes the pictures, truth.csv and calibration.json.
    """
    from readout.files.frameset import write_frameset
    from readout.simulation import simulate_frames

    made = simulate_frames(
        frames=frames,
        seed=seed,
        frames_per_s=frames_per_s,
        width_px=width_px,
        height_px=height_px,
        bits=bits,
        line_px=line_px,
        blur_px=blur_px,
        rotation_deg=rotation_deg,
        mounting=mounting,
        dark=dark,
        background=background,
        contrast=contrast,
        noise=noise,
        focal_length_mm=focal_length_mm,
        pitch_um=pitch_um,
        still=still,
        x_arcsec=x_arcsec,
        y_arcsec=y_arcsec,
    )
    n = 0
    with progress("pictures", frames) as show:

        def count_and_show(written: int) -> None:
            nonlocal n
            n = written
            show(n)

        try:
            write_frameset(
                folder,
                made,
                calibration=made.calibration,
                full_scale=made.full_scale,
                on_frame=count_and_show,
            )
        except KeyboardInterrupt:
            warn(f"ended early: {folder} keeps {n} of {frames} pictures with their truth")
            sys.exit(INTERRUPTED)
    print_line(f"{n} pictures, truth.csv and calibration.json in {folder}")


command = simulate
