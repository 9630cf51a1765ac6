"""Time and error of the sighting beside general-purpose calls, on the same frames."""

from __future__ import annotations

import math
import time
from collections.abc import Callable, Iterator
from dataclasses import dataclass, replace

import cv2
import numpy as np

from readout.model import F64, Pixels
from readout.sighting import locate
from readout.simulation import crosshair_image
from readout.simulation.ground import UniformGround, expose_on
from tests.bench.kinds import BITS8, REFERENCE

SHAPE = (720, 1280)
SEED = 200
TURN_DEG = (0.0, 1.0)
WANDER_PX = 8.0
CORNER_HALF_WINDOW_PX = 15

Method = Callable[[Pixels], tuple[float, float]]


@dataclass(frozen=True)
class Timed:
    """A method's times per frame in ms, sorted, and its errors (n, 2) in px."""

    name: str
    ms: F64
    error_px: F64


def frames(count: int, turn_deg: float) -> tuple[list[Pixels], F64]:
    """Frames of a return that wanders by less than half a pixel a frame, and its places."""
    rng = np.random.default_rng((SEED, int(10 * turn_deg)))
    crosshair = replace(REFERENCE, rotation_deg=turn_deg)
    ground = UniformGround(crosshair.background, BITS8)
    turns = rng.random(2) + np.arange(count)[:, None] / np.array([97.3, 131.7])
    places = np.array([SHAPE[1] / 2, SHAPE[0] / 2]) + WANDER_PX * np.sin(2 * math.pi * turns)
    pictures = [expose_on(crosshair_image(SHAPE, x, y, crosshair), ground, rng) for x, y in places]
    return pictures, places


def timed(name: str, method: Method, pictures: list[Pixels], places: F64, rounds: int) -> Timed:
    """Each frame several times over, the shortest counting: others use the machine as well."""
    ms = np.full(len(pictures), np.inf)
    for _ in range(rounds):
        found = []
        for k, pixels in enumerate(pictures):
            began_s = time.perf_counter()
            found.append(method(pixels))
            ms[k] = min(ms[k], 1e3 * (time.perf_counter() - began_s))
    return Timed(name, np.sort(ms), np.array(found) - places)


def from_nothing(pixels: Pixels) -> tuple[float, float]:
    found = locate(pixels, full_scale=255)
    return found.x_px, found.y_px


class Tracked:
    """Each sighting is the prior of the next; the first one of a round comes from nothing."""

    def __init__(self) -> None:
        self._before = None

    def __call__(self, pixels: Pixels) -> tuple[float, float]:
        self._before = locate(pixels, full_scale=255, prior=self._before)
        return self._before.x_px, self._before.y_px


def sums(pixels: Pixels) -> tuple[float, float]:
    """cv2.reduce over both axes and the centre of what stands above the ground."""
    places = []
    for axis in (0, 1):
        profile = cv2.reduce(pixels, axis, cv2.REDUCE_SUM, dtype=cv2.CV_32S).ravel()
        light = profile - np.median(profile)
        light = np.where(light > 0.1 * light.max(), light, 0)
        places.append(float(light @ np.arange(light.size) / light.sum()))
    return places[0], places[1]


def only_reduced(pixels: Pixels) -> tuple[float, float]:
    """The two reductions by themselves: what reading every pixel once costs."""
    cv2.reduce(pixels, 0, cv2.REDUCE_SUM, dtype=cv2.CV_32S)
    cv2.reduce(pixels, 1, cv2.REDUCE_SUM, dtype=cv2.CV_32S)
    return math.nan, math.nan


def others(reference: Pixels, place: F64) -> Iterator[tuple[str, Method]]:
    """Calls that compare with a first frame whose place is given, and the corner's refinement."""
    from skimage.registration import phase_cross_correlation

    window = cv2.createHanningWindow((SHAPE[1], SHAPE[0]), cv2.CV_64F)
    as_float = reference.astype(np.float64)

    def phase(pixels: Pixels) -> tuple[float, float]:
        (right, down), _ = cv2.phaseCorrelate(as_float, pixels.astype(np.float64), window)
        return place[0] + right, place[1] + down

    def upsampled(pixels: Pixels) -> tuple[float, float]:
        (down, right), _, _ = phase_cross_correlation(
            as_float, pixels.astype(np.float64), upsample_factor=100, normalization=None
        )
        return place[0] - float(right), place[1] - float(down)

    def corner(pixels: Pixels) -> tuple[float, float]:
        start = np.array(sums(pixels), np.float32).reshape(1, 1, 2)
        half = (CORNER_HALF_WINDOW_PX, CORNER_HALF_WINDOW_PX)
        stop = (cv2.TERM_CRITERIA_EPS | cv2.TERM_CRITERIA_MAX_ITER, 50, 1e-4)
        found = cv2.cornerSubPix(pixels, start, half, (-1, -1), stop).ravel()
        return float(found[0]), float(found[1])

    yield "cv2.phaseCorrelate", phase
    yield "skimage phase_cross_correlation, 1/100 px", upsampled
    yield "cv2.cornerSubPix after the sums", corner


def compare(count: int, turn_deg: float) -> list[Timed]:
    """All methods on the same frames, this process on one thread."""
    cv2.setNumThreads(1)
    pictures, places = frames(count, turn_deg)
    rows = [
        timed("locate, tracked", Tracked(), pictures, places, 5),
        timed("locate, from nothing", from_nothing, pictures, places, 3),
        timed("cv2.reduce over both axes, no position", only_reduced, pictures, places, 3),
        timed("cv2.reduce, centre of the sums", sums, pictures, places, 3),
    ]
    rows += [
        timed(name, method, pictures, places, 1) for name, method in others(pictures[0], places[0])
    ]
    return rows
