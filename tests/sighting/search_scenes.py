"""Random frames of every kind the search for the arms must cope with, each with its true lines.

The picture is that of ``readout.simulation``; its noise is normal with the variance of the photon
transfer law, which is quicker to draw than electrons and near enough for a search.
"""

from __future__ import annotations

import math
from collections.abc import Callable
from dataclasses import dataclass, replace

import cv2
import numpy as np

from readout.model import F64, Pixels
from readout.simulation.crosshair import Crosshair, crosshair_image
from readout.simulation.sensor import Sensor

SHAPES = ((480, 640), (720, 1280))
SENSOR = Sensor(bits=8, gain_levels_per_electron=0.03, read_noise_electrons=6.0)
GROUND = 600.0
"""electrons of a dark ground, and of the light in which dark lines stand: nine times that"""


@dataclass(frozen=True)
class TrueArm:
    """The ends (x, y) of an arm's visible middle line, pixels, its width and its polarity."""

    ends: tuple[tuple[float, float], tuple[float, float]]
    width_px: float
    polarity: int

    @property
    def length_px(self) -> float:
        (x0, y0), (x1, y1) = self.ends
        return math.hypot(x1 - x0, y1 - y0)


@dataclass(frozen=True)
class Scene:
    """A frame and the arms in it, those of the brighter return first.

    ``fainter``: contrast of a second return as a share of the first one's.
    """

    pixels: Pixels
    arms: list[TrueArm]
    fainter: float = 0.0


def exposed(electrons: F64, rng: np.random.Generator, sensor: Sensor = SENSOR) -> Pixels:
    """Levels of the expected electrons, with normal noise of the right variance."""
    sd = np.sqrt(sensor.noise_var_levels2(electrons))
    noise = rng.standard_normal(electrons.shape, dtype=np.float32)
    return sensor.quantise(sensor.mean_levels(electrons) + sd * noise)


def peak_share(crosshair: Crosshair) -> float:
    """Contrast on the middle of a blurred line as a share of the whole contrast."""
    return math.erf(crosshair.line_px / 2 / crosshair.blur_px / math.sqrt(2))


def at_contrast(crosshair: Crosshair, noises: float, *, dark: bool) -> Crosshair:
    """The crosshair with its peak ``noises`` times the noise of the ground high."""
    ground = 9 * GROUND if dark else GROUND
    sd = math.sqrt(ground + SENSOR.read_noise_electrons**2)
    contrast = min(noises * sd / peak_share(crosshair), 8 * GROUND)
    return replace(crosshair, background=ground, contrast=-contrast if dark else contrast)


def arms_of(
    shape: tuple[int, int], x_px: float, y_px: float, crosshair: Crosshair
) -> list[TrueArm]:
    """The visible arms of a crosshair: cut by the frame, and where they end by themselves."""
    height, width = shape
    arms = []
    for degrees in (
        crosshair.rotation_deg + 90,
        crosshair.rotation_deg + crosshair.skew_deg,
    ):
        dx, dy = math.cos(math.radians(degrees)), math.sin(math.radians(degrees))
        low, high = -crosshair.half_length_px, crosshair.half_length_px
        for start, step, last in ((x_px, dx, width - 1), (y_px, dy, height - 1)):
            if abs(step) < 1e-12:
                if not 0 <= start <= last:
                    high = low
                continue  # parallel to these two sides
            a, b = sorted(((0 - start) / step, (last - start) / step))
            low, high = max(low, a), min(high, b)
        if high > low:
            ends = ((x_px + low * dx, y_px + low * dy), (x_px + high * dx, y_px + high * dy))
            width_px = math.hypot(crosshair.line_px, 2.35 * crosshair.blur_px)
            arms.append(TrueArm(ends, width_px, 1 if crosshair.contrast > 0 else -1))
    return arms


def random_crosshair(
    rng: np.random.Generator,
    *,
    turn_deg: float = 10.0,
    noises: tuple[float, float] = (6.0, 200.0),
    lines: tuple[float, float] = (1.5, 20.0),
) -> Crosshair:
    """Any turn up to ``turn_deg``, any width, bright or dark, contrast evenly in its logarithm."""
    line = float(np.exp(rng.uniform(*np.log(lines))))
    crosshair = Crosshair(
        line_px=line,
        blur_px=float(rng.uniform(0.8, 1.5 + line / 8)),
        rotation_deg=float(rng.uniform(-turn_deg, turn_deg)),
        skew_deg=float(rng.uniform(-5, 5)),
    )
    contrast = float(np.exp(rng.uniform(*np.log(noises))))
    return at_contrast(crosshair, contrast, dark=bool(rng.random() < 0.5))


def place(
    shape: tuple[int, int], rng: np.random.Generator, margin: float = 0.15
) -> tuple[float, float]:
    """A crossing inside the frame, away from its border."""
    x, y = rng.uniform(margin, 1 - margin, 2)
    return float(x) * shape[1], float(y) * shape[0]


def any_shape(rng: np.random.Generator) -> tuple[int, int]:
    return SHAPES[int(rng.integers(len(SHAPES)))]


def _simple(crosshair: Crosshair, rng: np.random.Generator) -> Scene:
    shape = any_shape(rng)
    x, y = place(shape, rng)
    pixels = exposed(crosshair_image(shape, x, y, crosshair), rng)
    return Scene(pixels, arms_of(shape, x, y, crosshair))


def upright(rng: np.random.Generator) -> Scene:
    return _simple(random_crosshair(rng), rng)


def turned(rng: np.random.Generator) -> Scene:
    return _simple(random_crosshair(rng, turn_deg=45.0), rng)


def faint(rng: np.random.Generator) -> Scene:
    """Peak three pixel noises high, any turn."""
    return _simple(random_crosshair(rng, turn_deg=45.0, noises=(2.9, 3.1), lines=(2.0, 8.0)), rng)


def fainter(rng: np.random.Generator) -> Scene:
    """Peak as high as the pixel noise."""
    return _simple(random_crosshair(rng, turn_deg=10.0, noises=(0.9, 1.1), lines=(3.0, 8.0)), rng)


def faintest(rng: np.random.Generator) -> Scene:
    """Peak half as high as the pixel noise."""
    return _simple(random_crosshair(rng, turn_deg=10.0, noises=(0.5, 0.6), lines=(3.0, 8.0)), rng)


def short(rng: np.random.Generator) -> Scene:
    """Arms a fifth to a half of the frame's height long, with a gap."""
    crosshair = random_crosshair(rng, turn_deg=45.0, noises=(10.0, 200.0), lines=(1.5, 6.0))
    shape = any_shape(rng)
    reach = float(rng.uniform(0.1, 0.25)) * shape[0]
    gap = float(rng.uniform(0.0, 0.25)) * reach
    crosshair = replace(crosshair, half_length_px=reach, gap_px=gap)
    x, y = place(shape, rng, 0.25)
    pixels = exposed(crosshair_image(shape, x, y, crosshair), rng)
    return Scene(pixels, arms_of(shape, x, y, crosshair))


def uneven(rng: np.random.Generator) -> Scene:
    """Light falling off to the corners and to one side, by up to two thirds."""
    crosshair = random_crosshair(rng, turn_deg=20.0, noises=(10.0, 200.0))
    shape = any_shape(rng)
    x, y = place(shape, rng, 0.25)
    v, u = np.mgrid[: shape[0], : shape[1]]
    u, v = u / shape[1] - rng.uniform(0.3, 0.7), v / shape[0] - rng.uniform(0.3, 0.7)
    fall = rng.uniform(0, 2) * (u**2 + v**2) + rng.uniform(-0.4, 0.4) * u
    light = np.clip(1 - fall, 0.3, 1.5)
    pixels = exposed(light * crosshair_image(shape, x, y, crosshair), rng)
    return Scene(pixels, arms_of(shape, x, y, crosshair))


def round_field(rng: np.random.Generator) -> Scene:
    """Dark lines in a bright round field with a blurred edge."""
    crosshair = random_crosshair(rng, turn_deg=45.0, lines=(1.5, 6.0))
    crosshair = at_contrast(crosshair, float(rng.uniform(15, 40)), dark=True)
    shape = any_shape(rng)
    radius = float(rng.uniform(0.3, 0.48)) * shape[0]
    x, y = (
        shape[1] / 2 + rng.uniform(-0.3, 0.3) * radius,
        shape[0] / 2 + rng.uniform(-0.3, 0.3) * radius,
    )
    v, u = np.mgrid[: shape[0], : shape[1]]
    distance = np.hypot(u - shape[1] / 2, v - shape[0] / 2)
    field = 1 / (1 + np.exp(np.clip((distance - radius) / rng.uniform(1, 6), -50, 50)))
    pixels = exposed(50 + field * crosshair_image(shape, x, y, crosshair), rng)
    inside = replace(crosshair, half_length_px=0.6 * radius)
    return Scene(pixels, arms_of(shape, x, y, inside))


def border(rng: np.random.Generator) -> Scene:
    """An upright line half a width to two widths from the border, parallel to it."""
    crosshair = replace(
        random_crosshair(rng, turn_deg=0.2, noises=(10.0, 200.0), lines=(2.0, 12.0)), skew_deg=0.0
    )
    shape = any_shape(rng)
    near = float(rng.uniform(0.5, 2.0)) * math.hypot(crosshair.line_px, 2.35 * crosshair.blur_px)
    x = near if rng.random() < 0.5 else shape[1] - 1 - near
    y = float(rng.uniform(0.2, 0.8)) * shape[0]
    pixels = exposed(crosshair_image(shape, x, y, crosshair), rng)
    return Scene(pixels, arms_of(shape, x, y, crosshair))


def outside(rng: np.random.Generator) -> Scene:
    """The crossing beyond the frame: arms that pass one corner, or one arm alone."""
    crosshair = random_crosshair(rng, turn_deg=45.0, lines=(1.5, 12.0))
    shape = any_shape(rng)
    while True:
        x, y = place(shape, rng, -0.3)
        if 0 < x < shape[1] and 0 < y < shape[0]:
            continue
        arms = [arm for arm in arms_of(shape, x, y, crosshair) if arm.length_px > shape[0] / 3]
        if arms:
            break
    return Scene(exposed(crosshair_image(shape, x, y, crosshair), rng), arms)


def returns(rng: np.random.Generator) -> Scene:
    """A second return of 3 % to 100 %, three widths off in both directions and more."""
    crosshair = random_crosshair(rng, turn_deg=20.0, noises=(150.0, 200.0), lines=(1.5, 6.0))
    shape = any_shape(rng)
    x, y = place(shape, rng, 0.25)
    share = float(np.exp(rng.uniform(np.log(0.03), 0.0)))
    width = math.hypot(crosshair.line_px, 2.35 * crosshair.blur_px)
    offsets = rng.choice([-1, 1], 2) * np.exp(rng.uniform(np.log(3 * width), np.log(100.0), 2))
    dx, dy = float(offsets[0]), float(offsets[1])
    second = replace(crosshair, background=0.0, contrast=share * crosshair.contrast)
    electrons = crosshair_image(shape, x, y, crosshair)
    electrons += crosshair_image(shape, x + dx, y + dy, second)
    arms = arms_of(shape, x, y, crosshair) + arms_of(shape, x + dx, y + dy, second)
    return Scene(exposed(np.maximum(electrons, 0), rng), arms, share)


def fixed(rng: np.random.Generator) -> Scene:
    """A short-armed return over a fixed crosshair as large as the frame, of its polarity."""
    crosshair = random_crosshair(rng, turn_deg=15.0, noises=(30.0, 200.0), lines=(2.0, 6.0))
    shape = any_shape(rng)
    reach = float(rng.uniform(0.15, 0.3)) * shape[0]
    short_armed = replace(crosshair, half_length_px=reach, gap_px=0.1 * reach)
    x, y = place(shape, rng, 0.3)
    at = place(shape, rng, 0.3)
    reticle = replace(random_crosshair(rng, turn_deg=1.0, lines=(2.0, 5.0)), background=0.0)
    reticle = replace(reticle, contrast=float(rng.uniform(0.3, 1.0)) * crosshair.contrast)
    electrons = crosshair_image(shape, x, y, short_armed) + crosshair_image(shape, *at, reticle)
    arms = arms_of(shape, x, y, short_armed) + arms_of(shape, *at, reticle)
    return Scene(exposed(np.maximum(electrons, 0), rng), arms)


def scale(rng: np.random.Generator) -> Scene:
    """A fixed graduated scale of the same polarity across the picture."""
    crosshair = random_crosshair(rng, turn_deg=5.0, noises=(15.0, 200.0), lines=(2.0, 6.0))
    shape = any_shape(rng)
    x, y = place(shape, rng)
    mark = np.zeros(shape, dtype=np.float32)
    pitch = float(rng.uniform(8, 25))
    base = int(rng.uniform(0.2, 0.8) * shape[0])
    for k in range(int(shape[1] / pitch)):
        length = 30 if k % 10 == 0 else 22 if k % 5 == 0 else 14
        column = round((k + 0.5) * pitch)
        cv2.line(mark, (column, base), (column, base - length), 1.0, 2, cv2.LINE_AA)
    mark = cv2.GaussianBlur(mark, (0, 0), 1.0)
    strength = float(rng.uniform(0.3, 1.0)) * crosshair.contrast
    electrons = crosshair_image(shape, x, y, crosshair) + strength * mark
    return Scene(exposed(np.maximum(electrons, 0), rng), arms_of(shape, x, y, crosshair))


def dirty(rng: np.random.Generator) -> Scene:
    """Dust, hot pixels, one per cent fixed pattern, compressed with quality 70."""
    crosshair = random_crosshair(rng, turn_deg=30.0, noises=(10.0, 200.0), lines=(1.5, 8.0))
    shape = any_shape(rng)
    x, y = place(shape, rng, 0.25)
    electrons = crosshair_image(shape, x, y, crosshair)
    v, u = np.mgrid[: shape[0], : shape[1]]
    for _ in range(15):
        at, size = rng.random(2) * shape[::-1], rng.uniform(3, 15)
        electrons *= 1 - rng.uniform(0.1, 0.5) * (np.hypot(u - at[0], v - at[1]) < size)
    electrons *= 1 + 0.01 * rng.standard_normal(shape)
    electrons.ravel()[rng.integers(0, electrons.size, 100)] = 8000
    _, packed = cv2.imencode(
        ".jpg", exposed(np.maximum(electrons, 0), rng), [cv2.IMWRITE_JPEG_QUALITY, 70]
    )
    return Scene(
        np.asarray(cv2.imdecode(packed, cv2.IMREAD_GRAYSCALE), dtype=np.uint8),
        arms_of(shape, x, y, crosshair),
    )


KINDS: dict[str, Callable[[np.random.Generator], Scene]] = {
    kind.__name__: kind
    for kind in (
        upright, turned, faint, fainter, faintest, short, uneven, round_field, border, outside,
        returns, fixed, scale, dirty,
    )
}  # fmt: skip


def noise_only(rng: np.random.Generator) -> Pixels:
    shape = any_shape(rng)
    return exposed(np.full(shape, float(rng.uniform(20, 5000))), rng)


def blobs(rng: np.random.Generator) -> Pixels:
    """Bright round spots of any size."""
    shape = any_shape(rng)
    v, u = np.mgrid[: shape[0], : shape[1]]
    electrons = np.full(shape, GROUND)
    for _ in range(int(rng.integers(1, 6))):
        x, y = place(shape, rng, 0.0)
        size = float(rng.uniform(3, 60))
        electrons += rng.uniform(500, 5000) * np.exp(-((u - x) ** 2 + (v - y) ** 2) / 2 / size**2)
    return exposed(electrons, rng)


def texture(rng: np.random.Generator) -> Pixels:
    """Smoothed noise of any grain, stronger than the noise of the pixels."""
    shape = any_shape(rng)
    grain = cv2.GaussianBlur(rng.standard_normal(shape), (0, 0), float(rng.uniform(1, 12)))
    return exposed(np.maximum(3000 + rng.uniform(200, 1000) * grain / grain.std(), 0), rng)


def page(rng: np.random.Generator) -> Pixels:
    """Lines of dark letters on a bright ground."""
    shape = any_shape(rng)
    sheet = np.full(shape, 200, dtype=np.uint8)
    size = float(rng.uniform(0.4, 1.2))
    letters = "abcdefghiklmnoprstuvwxyz HILT1"
    for row in range(int(40 * size), shape[0], int(36 * size) + 4):
        words = "".join(letters[k] for k in rng.integers(0, len(letters), 120))
        cv2.putText(
            sheet, words, (10, row), cv2.FONT_HERSHEY_SIMPLEX, size, 40, 1 + int(size), cv2.LINE_AA
        )
    return exposed(sheet * 30.0, rng)


EMPTY: dict[str, Callable[[np.random.Generator], Pixels]] = {
    kind.__name__: kind for kind in (noise_only, blobs, texture, page)
}
