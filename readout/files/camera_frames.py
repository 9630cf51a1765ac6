"""What is known of a camera, from pictures that show it: mirror covered, lamp off."""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from dataclasses import replace
from pathlib import Path

from readout.errors import BadInput
from readout.files.pictures import PICTURE_SUFFIXES, read_picture
from readout.files.preparation_file import CameraKnowledge
from readout.model import Pixels
from readout.sighting.dark import Mask, defective_pixels
from readout.sighting.prepare import Preparation
from readout.sighting.raw import Plane
from readout.sighting.response import power_response

MOST_DEFECTIVE = 0.01
"""with a larger share of bad pixels the picture is not dark, or the camera is not sound"""


def knowledge_from(
    *,
    fixed: Sequence[Path] = (),
    dark: Sequence[Path] = (),
    gamma: float | None = None,
    plane: Plane | None = None,
    saturation: int | None = None,
    made_utc: str,
    full_scale: int | None = None,
) -> CameraKnowledge:
    """What the pictures ``fixed`` (lamp on, mirror covered) and ``dark`` (lamp off) tell, each
    path a file or a folder of files.

    ``gamma``: the camera's levels go with the light to this power. ``full_scale`` is needed where
    there are no pictures. Dark frames also tell which pixels are defective. Raises BadInput for
    pictures that cannot be read, are of two sizes or depths, or not dark.
    """
    fixed_paths, dark_paths = _pictures_in(fixed), _pictures_in(dark)
    for path in (fixed_paths + dark_paths)[:1]:
        full_scale = read_picture(path)[1]
    if full_scale is None:
        raise BadInput("how many levels the camera has is not known: give a frame of it")
    if saturation is not None and saturation > full_scale:
        raise BadInput(f"a saturation level of {saturation} is beyond {full_scale}: check it")
    made = Preparation(
        plane=plane,
        response=None if gamma is None else power_response(gamma, full_scale),
        saturation=saturation,
    )
    if dark_paths:
        made = made.with_dark(_read(dark_paths, full_scale))
        made = replace(made, defective=_bad_pixels(dark_paths, full_scale))
    if fixed_paths:
        made = made.with_fixed(_read(fixed_paths, full_scale))
    if made.fixed is not None and made.dark is not None and made.fixed.shape != made.dark.shape:
        raise BadInput(f"{fixed_paths[0]} and {dark_paths[0]} are of different size: take one size")
    return CameraKnowledge(made, full_scale, made_utc, len(fixed_paths), len(dark_paths))


def _pictures_in(paths: Sequence[Path]) -> list[Path]:
    """The files, and those of folders in the order of their names."""
    found: list[Path] = []
    for path in paths:
        if not path.is_dir():
            found.append(path)
            continue
        inside = sorted(p for p in path.iterdir() if p.suffix.lower() in PICTURE_SUFFIXES)
        if not inside:
            raise BadInput(f"{path} holds no picture: choose another folder")
        found += inside
    return found


def _read(paths: Sequence[Path], full_scale: int) -> Iterator[Pixels]:
    """One after the other, so that a hundred frames take no more memory than one."""
    shape: tuple[int, ...] | None = None
    for path in paths:
        pixels, its_scale = read_picture(path)
        shape = shape or pixels.shape
        if pixels.shape != shape or its_scale != full_scale:
            raise BadInput(f"{path} is of another size or depth than {paths[0]}: take one format")
        yield pixels


def _bad_pixels(paths: Sequence[Path], full_scale: int) -> Mask:
    bad = defective_pixels(_read(paths, full_scale))
    share = float(bad.mean())
    if share > MOST_DEFECTIVE:
        raise BadInput(
            f"{paths[0]}: {100 * share:.0f} % of the pixels stand out, so it is not dark: take it "
            "with the lamp off and the objective covered"
        )
    return bad
