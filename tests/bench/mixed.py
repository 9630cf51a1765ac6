"""Frames of every sort mixed, one in ten without a return: what must never be wrong unsaid."""

from __future__ import annotations

import math
from dataclasses import replace

import cv2
import numpy as np

from readout.model import F64
from readout.sighting.prepare import Preparation
from readout.sighting.targets import AS_THEY_COME
from readout.simulation import Crosshair, Sensor, crosshair_image, expose
from readout.simulation.bar import Bar
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
from tests.bench.kinds import BITS8, BITS12, SHAPE, Picture
from tests.bench.real import jpeg

HEIGHT, WIDTH = SHAPE
NO_TARGET = (
    "noise only",
    "bright blob",
    "one line",
    "page of text",
    "fixed reticle alone",
    "black",
    "steps and a disc",
    "clouds",
    "fixed reticle alone, prepared",
    "fixed crosshair alone, prepared",
)
PREPARED = "prepared"
COVERED_FRAMES = 16
"""of the covered mirror, for the sorts that end so: what is fixed is known"""
WITH_TARGET = "a return"


def sort_of(k: int) -> str:
    """What frame k shows."""
    return NO_TARGET[k // 10 % len(NO_TARGET)] if k % 10 == 9 else WITH_TARGET


def mixed_picture(seed: int, k: int) -> tuple[str, Picture]:
    """What is shown, and the frame; the truth of a frame without a return is NaN."""
    rng = np.random.default_rng((seed, 4, k))
    sort = sort_of(k)
    if sort != WITH_TARGET:
        electrons, sensor = without_target(sort, rng), BITS8
        pixels = expose(electrons, sensor, rng)
        known = AS_THEY_COME
        if sort.endswith(PREPARED):
            known = Preparation().with_fixed(
                expose(electrons, sensor, rng) for _ in range(COVERED_FRAMES)
            )
        return sort, Picture(pixels, sensor.full_scale, math.nan, math.nan, known)
    return WITH_TARGET, with_target(rng)


def random_crosshair(rng: np.random.Generator) -> Crosshair:
    """Any reticle that may be met: turned, skewed, thin or wide, short or gapped, dim, dark."""
    line_px = float(np.exp(rng.uniform(math.log(1.5), math.log(12.0))))
    strength = float(np.exp(rng.uniform(math.log(300.0), math.log(6500.0))))
    dark = rng.random() < 0.3
    half_length_px = float(rng.uniform(80, 250)) if rng.random() < 0.3 else math.inf
    return Crosshair(
        line_px=line_px,
        blur_px=float(rng.uniform(0.8, 3.0)),
        rotation_deg=float(rng.uniform(-45, 45) if rng.random() < 0.5 else rng.normal(0, 2)),
        background=7000.0 if dark else float(rng.uniform(50, 1000)),
        contrast=-strength if dark else strength,
        half_length_px=half_length_px,
        gap_px=float(line_px / 2 + rng.uniform(2, 20)) if rng.random() < 0.3 else 0.0,
        skew_deg=float(rng.uniform(-5, 5)) if rng.random() < 0.3 else 0.0,
    )


def with_target(rng: np.random.Generator) -> Picture:
    """A return with whatever may be wrong with a frame, each with some probability."""

    def happens(probability: float) -> bool:
        return bool(rng.random() < probability)

    crosshair = random_crosshair(rng)
    x, y = float(rng.uniform(15, WIDTH - 16)), float(rng.uniform(15, HEIGHT - 16))
    if happens(0.05):
        x, y = float(rng.uniform(-100, WIDTH + 100)), float(rng.uniform(-100, HEIGHT + 100))
    if happens(0.05):
        crosshair = replace(crosshair, contrast=3 * crosshair.contrast, background=1000.0)
    electrons = crosshair_image(SHAPE, x, y, crosshair)
    if happens(0.3):
        side = rng.choice([-1, 1], 2) * rng.uniform(5, 80, 2)
        electrons += second_return(
            SHAPE,
            x,
            y,
            crosshair,
            strength=float(rng.uniform(0.02, 0.5)),
            offset_px=(float(side[0]), float(side[1])),
        )
    if happens(0.2):
        electrons += slope(SHAPE, along_x=rng.uniform(-100, 100), along_y=rng.uniform(-100, 100))
    electrons = np.maximum(electrons, 10.0) * random_map(rng)
    if happens(0.3):
        electrons += hot_pixels(SHAPE, rng)
    return taken(electrons, x, y, rng)


def random_map(rng: np.random.Generator) -> F64:
    """Dust, shading, pixel response and an engraved scale, each with some probability."""
    through = np.ones(SHAPE)
    for probability, blemish in (
        (0.3, lambda: dust(SHAPE, rng)),
        (0.3, lambda: vignetting(SHAPE, corner=float(rng.uniform(0.4, 1.0)))),
        (0.3, lambda: uneven_light(SHAPE, direction_deg=float(rng.uniform(0, 360)))),
        (0.3, lambda: pixel_response(SHAPE, rng)),
        (0.15, lambda: 1 - random_scale(rng)),
    ):
        if rng.random() < probability:
            through *= blemish()
    return through


def random_scale(rng: np.random.Generator) -> F64:
    upright = bool(rng.random() < 0.5)
    size = WIDTH if upright else HEIGHT
    return graduated_scale(
        SHAPE, at_px=float(rng.uniform(0.2, 0.8) * size), upright=upright,
        pitch_px=float(rng.uniform(10, 40)),
    )  # fmt: skip


def taken(electrons: F64, x: float, y: float, rng: np.random.Generator) -> Picture:
    """The frame as one of several cameras gives it."""
    choice = rng.random()
    if choice < 0.2:
        sensor = replace(BITS12, black_levels=0.0)
        pixels = display_encoded(expose(electrons, sensor, rng), sensor.full_scale)
        return Picture(pixels, 255, x, y)
    sensor: Sensor = BITS12 if choice < 0.4 else BITS8
    pixels = expose(electrons, sensor, rng)
    if choice > 0.8:
        pixels = jpeg(int(rng.integers(60, 96)), pixels)
    return Picture(pixels, sensor.full_scale, x, y)


def without_target(sort: str, rng: np.random.Generator) -> F64:
    """Expected electrons of a frame in which there is no return."""
    ground = float(rng.uniform(50, 1500))
    rows, columns = np.mgrid[:HEIGHT, :WIDTH].astype(np.float64)
    x, y = float(rng.uniform(80, WIDTH - 80)), float(rng.uniform(80, HEIGHT - 80))
    light = float(rng.uniform(500, 6000))
    electrons = np.full(SHAPE, ground)
    if sort == "bright blob":
        wide, high = rng.uniform(4, 60, 2)
        electrons += light * np.exp(-(((columns - x) / wide) ** 2 + ((rows - y) / high) ** 2) / 2)
    elif sort == "one line":
        turn = float(rng.uniform(-np.pi / 2, np.pi / 2))
        line = Bar(float(rng.uniform(1, 5)), float(rng.uniform(0.8, 3)), turn)
        electrons += light * line.share_at(columns - x, rows - y)
    elif sort == "page of text":
        electrons = text_page(rng, ground, light)
    elif sort.startswith("fixed reticle alone"):
        cover = 1 - (1 - random_scale(rng)) * (
            1 - graduated_scale(SHAPE, at_px=y) * float(rng.random() < 0.7)
        )
        electrons += light * cover
    elif sort.startswith("fixed crosshair alone"):
        electrons = crosshair_image(SHAPE, x, y, random_crosshair(rng))
    elif sort == "black":
        electrons = np.full(SHAPE, 2.0)
    elif sort == "steps and a disc":
        electrons += light * ((columns > x + 0.05 * rows) * 0.6 + (rows > y) * 0.4)
        electrons += light * (np.hypot(columns - y, rows - x / 2) < 60)
    elif sort == "clouds":
        cloud = cv2.GaussianBlur(rng.standard_normal(SHAPE), (0, 0), float(rng.uniform(2, 20)))
        electrons += light * (cloud - cloud.min()) / np.ptp(cloud)
    return electrons


def text_page(rng: np.random.Generator, ground: float, light: float) -> F64:
    """Dark letters in lines on a bright page."""
    page = np.zeros(SHAPE, np.uint8)
    letters = np.array(list("abcdefghiklmnoprstuvwxyzEFHILT  ,.-+=|"))
    size = float(rng.uniform(0.5, 1.5))
    for row in range(int(30 * size), HEIGHT, int(34 * size)):
        line = "".join(rng.choice(letters, 60))
        cv2.putText(page, line, (10, row), cv2.FONT_HERSHEY_SIMPLEX, size, 255, 2, cv2.LINE_AA)
    return np.asarray(ground + light * (1 - page / 255.0))
