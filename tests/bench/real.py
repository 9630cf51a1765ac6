"""Kinds of frames as real cameras and instruments give them."""

from __future__ import annotations

from dataclasses import replace
from functools import lru_cache

import numpy as np

from readout.files.pictures import decode_jpeg, encode_jpeg
from readout.model import F64, Pixels
from readout.simulation.blemishes import (
    dust,
    graduated_scale,
    hot_pixels,
    pixel_response,
    second_return,
    slope,
    uneven_light,
    vignetting,
)
from readout.simulation.response import display_encoded
from tests.bench.kinds import BITS8, BITS12, REFERENCE, SHAPE, Kind

GAMMA = 0.45
BEFORE_GAMMA = replace(BITS12, black_levels=0.0)
"""a display-encoding camera takes its black level off first"""


def jpeg(quality: int, pixels: Pixels) -> Pixels:
    """Through a JPEG and back."""
    return decode_jpeg(encode_jpeg(pixels, quality=quality))[0]


def jpeg_90(pixels: Pixels) -> Pixels:
    return jpeg(90, pixels)


def jpeg_70(pixels: Pixels) -> Pixels:
    return jpeg(70, pixels)


def gamma_encoded(pixels: Pixels) -> Pixels:
    return display_encoded(pixels, BEFORE_GAMMA.full_scale, gamma=GAMMA)


@lru_cache(maxsize=4)
def fixed_dirt(seed: int) -> tuple[F64, F64]:
    """Map and electrons of one instrument's dirt: dust, vignetting, pixel response, hot pixels."""
    rng = np.random.default_rng((seed, 1))
    dirt = dust(SHAPE, rng) * vignetting(SHAPE) * pixel_response(SHAPE, rng)
    return dirt, hot_pixels(SHAPE, rng)


def dirty(electrons: F64, x: float, y: float, seed: int) -> F64:
    """Dust, hot pixels, a ghost of 5 %, vignetting and a fixed pattern of 1 % together."""
    dirt, hot = fixed_dirt(seed)
    again = second_return(SHAPE, x, y, REFERENCE, strength=0.05, offset_px=(43.0, -31.0))
    return (electrons + again) * dirt + hot


@lru_cache(maxsize=8)
def scale_cover(seed: int, crossed: bool = False) -> F64:
    """A level scale over the whole picture: the upright arm crosses it, and its graduations.

    ``crossed``: its long line lies where the level arm wanders, else 50 to 90 px off.
    """
    rng = np.random.default_rng((seed, 2))
    off_px = rng.uniform(-6, 6) if crossed else rng.uniform(50, 90) * rng.choice([-1, 1])
    return graduated_scale(SHAPE, at_px=SHAPE[0] / 2 + float(off_px))


def behind_scale(electrons: F64, _x: float, _y: float, seed: int) -> F64:
    """An engraved scale: opaque lines."""
    return electrons * (1 - scale_cover(seed))


def with_lit_scale(electrons: F64, _x: float, _y: float, seed: int) -> F64:
    """A scale lit from the side, a third as bright as the return."""
    return electrons + 2000.0 * scale_cover(seed)


def crossing_a_line(electrons: F64, _x: float, _y: float, seed: int) -> F64:
    """An arm wanders over a fixed line along it."""
    return electrons + 2000.0 * scale_cover(seed, crossed=True)


def near_ghost(electrons: F64, x: float, y: float, _seed: int) -> F64:
    """A ghost of 5 % at 17 px in both directions."""
    return electrons + second_return(SHAPE, x, y, REFERENCE, strength=0.05, offset_px=(17.0, 17.0))


def comatic(electrons: F64, x: float, y: float, _seed: int) -> F64:
    """A side lobe of 10 % on one side of both lines."""
    return electrons + second_return(SHAPE, x, y, REFERENCE, strength=0.1, offset_px=(6.0, 6.0))


def unevenly_lit(electrons: F64, _x: float, _y: float, _seed: int) -> F64:
    return electrons * _uneven()


@lru_cache(maxsize=1)
def _uneven() -> F64:
    return uneven_light(SHAPE)


def sloping(electrons: F64, _x: float, _y: float, _seed: int) -> F64:
    """A ground that rises from 100 to 700 electrons across the picture."""
    return electrons + slope(SHAPE, along_x=150.0, along_y=-150.0)


REAL: dict[str, Kind] = {
    kind.name: kind
    for kind in (
        Kind("dust hot ghost vignetting pattern", light=dirty, rms_px=0.003),
        Kind("engraved scale across", light=behind_scale, rms_px=0.003),
        Kind("lit scale across", light=with_lit_scale, rms_px=0.003),
        Kind("over a fixed line", light=crossing_a_line),
        Kind("gamma 0.45", sensor=BEFORE_GAMMA, finish=gamma_encoded, rms_px=0.003),
        Kind("JPEG q90", finish=jpeg_90, rms_px=0.003),
        Kind("JPEG q70", finish=jpeg_70, rms_px=0.005),
        Kind(
            "JPEG q70, turned 0.5°",
            replace(REFERENCE, rotation_deg=0.5),
            finish=jpeg_70,
            rms_px=0.005,
        ),
        Kind("ghost 5 % at 17 px", light=near_ghost, rms_px=0.005),
        Kind("side lobe 10 %", light=comatic),
        Kind("uneven light ±30 %", light=unevenly_lit, rms_px=0.003),
        Kind("sloping ground", light=sloping, rms_px=0.003),
        Kind("bent mirror", replace(REFERENCE, level_blur_px=2.8), BITS8, ratio=1.15),
    )
}
