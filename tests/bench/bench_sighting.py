"""Prints how well and how fast the crosshair is placed, beside what one would call otherwise.

    python -m tests.bench.bench_sighting [--frames N]

Every figure carries its own standard error or the number behind it; all seeds are printed.
"""

from __future__ import annotations

import argparse
import time
from collections.abc import Callable
from dataclasses import replace

import cv2
import numpy as np

from readout.model import F64, Pixels
from readout.sighting import locate
from readout.simulation.bound import crossing_bound_cov
from readout.simulation.crosshair import Crosshair
from readout.simulation.sensor import Sensor
from tests.sighting.frames import BRIGHT, DARK, SENSOR, frame

SHAPE = (480, 640)
FINE = Sensor(bits=12, gain_levels_per_electron=0.48, read_noise_electrons=6.0)
CASES: dict[str, tuple[Crosshair, Sensor]] = {
    "bright": (BRIGHT, SENSOR),
    "dark": (DARK, SENSOR),
    "turned 8 deg": (replace(BRIGHT, rotation_deg=8.0), SENSOR),
    "thin 1.5 px": (replace(BRIGHT, line_px=1.5, blur_px=1.1), SENSOR),
    "wide 12 px": (replace(BRIGHT, line_px=12.0, blur_px=2.0), SENSOR),
    "faint 10 levels": (replace(BRIGHT, contrast=330.0), SENSOR),
    "12 bit": (BRIGHT, FINE),
}


def accuracy(frames: int) -> None:
    """Spread against the Cramer-Rao bound, bias, honesty of the claimed sd."""
    print(
        f"{'case':16s} {'seed':>4s} {'rms/bound':>16s} {'bias px':>18s} {'within 1 sd':>12s} 2 sd"
    )
    for seed, (name, (crosshair, sensor)) in enumerate(CASES.items(), start=1):
        rng = np.random.default_rng(seed)
        bound = np.sqrt(np.diag(crossing_bound_cov(SHAPE, 320.5, 240.5, crosshair, sensor)))
        z, errors, lost = [], [], 0
        for k in range(frames):
            x, y = 320 + (k * 0.618034) % 1, 240 + k / frames
            pixels = frame(SHAPE, x, y, crosshair, rng=rng, sensor=sensor)
            found = locate(pixels, full_scale=sensor.full_scale)
            if not found.found:
                lost += 1
                continue
            errors.append((found.x_px - x, found.y_px - y))
            z.append((errors[-1][0] / found.x_sd_px, errors[-1][1] / found.y_sd_px))
        error, share = np.array(errors), np.abs(z)
        ratio = np.sqrt((error**2).mean(axis=0)) / bound
        bias = np.abs(error.mean(axis=0)).max()
        n = error.size
        print(
            f"{name:16s} {seed:4d} {ratio[0]:.3f} {ratio[1]:.3f} ±{1 / np.sqrt(n):.3f} "
            f"{bias:9.5f} ±{bound.max() / np.sqrt(len(error)):.5f} "
            f"{np.mean(share < 1):12.3f} {np.mean(share < 2):.3f}"
            + (f"  LOST {lost}" if lost else "")
        )


def systematic() -> None:
    """Error against the sub-pixel phase with the noise averaged away: 16 bit, 100 x the light."""
    sensor = Sensor(bits=16, gain_levels_per_electron=0.0768, read_noise_electrons=6.0)
    worst = 0.0
    rng = np.random.default_rng(100)
    for line in (1.5, 3.0, 5.0, 9.0):
        for turn in (0.0, 1.0, 9.0):
            crosshair = replace(
                BRIGHT, line_px=line, rotation_deg=turn, background=4e4, contrast=6e5
            )
            for phase in np.arange(0, 1, 0.125):
                pixels = frame(SHAPE, 320 + phase, 240 + phase, crosshair, rng=rng, sensor=sensor)
                found = locate(pixels, full_scale=65535)
                worst = max(worst, abs(found.x_px - 320 - phase), abs(found.y_px - 240 - phase))
    print(f"largest error at any phase, 4 widths, 3 turns, hardly any noise: {worst:.5f} px")


def centre_of_mass(pixels: Pixels) -> tuple[float, float]:
    """Column and row sums above a threshold: what is written in an afternoon."""
    light = np.maximum(pixels.astype(float) - np.median(pixels) - 10, 0)
    columns, rows = light.sum(axis=0), light.sum(axis=1)
    columns = np.maximum(columns - np.median(columns) * 1.5, 0)
    rows = np.maximum(rows - np.median(rows) * 1.5, 0)
    return (
        float((columns * np.arange(columns.size)).sum() / columns.sum()),
        float((rows * np.arange(rows.size)).sum() / rows.sum()),
    )


def rivals(frames: int) -> None:
    """The same frames through general-purpose functions; shifts against a first frame."""
    from skimage.registration import phase_cross_correlation

    rng = np.random.default_rng(200)
    x0, y0 = 320.0, 240.0
    reference = frame(SHAPE, x0, y0, rng=rng)
    window = cv2.createHanningWindow((SHAPE[1], SHAPE[0]), cv2.CV_64F)

    def registered(pixels: Pixels) -> tuple[float, float]:
        (down, right), _, _ = phase_cross_correlation(
            pixels.astype(float), reference.astype(float), upsample_factor=100, normalization=None
        )
        return x0 + float(right), y0 + float(down)

    def phase(pixels: Pixels) -> tuple[float, float]:
        (right, down), _ = cv2.phaseCorrelate(
            reference.astype(np.float64), pixels.astype(np.float64), window
        )
        return x0 + right, y0 + down

    def ours(pixels: Pixels) -> tuple[float, float]:
        found = locate(pixels, full_scale=255)
        return found.x_px, found.y_px

    methods: dict[str, Callable[[Pixels], tuple[float, float]]] = {
        "readout.sighting.locate": ours,
        "centre of mass of row and column sums": centre_of_mass,
        "skimage phase_cross_correlation, 1/100": registered,
        "cv2.phaseCorrelate, Hanning window": phase,
    }
    places = [(x0 + rng.uniform(-8, 8), y0 + rng.uniform(-8, 8)) for _ in range(frames)]
    pictures = [frame(SHAPE, x, y, rng=rng) for x, y in places]
    print(f"{'seed 200, ' + str(frames) + ' frames':42s} rms px   ms")
    for name, method in methods.items():
        method(pictures[0])
        began = time.perf_counter()
        found = np.array([method(pixels) for pixels in pictures])
        ms = (time.perf_counter() - began) / frames * 1e3
        rms = np.sqrt(np.mean((found - places) ** 2))
        print(f"{name:42s} {rms:7.4f} {ms:5.1f}")


def speed() -> None:
    """Median time of one frame on one core, with and without the sighting before it."""
    for shape in (SHAPE, (720, 1280)):
        rng = np.random.default_rng(300)
        pixels = frame(shape, shape[1] / 2 + 0.3, shape[0] / 2 + 0.2, rng=rng)
        found = locate(pixels, full_scale=255)

        def median_ms(call: Callable[[], object]) -> float:
            times: F64 = np.empty(40)
            for k in range(len(times)):
                began = time.perf_counter()
                call()
                times[k] = time.perf_counter() - began
            return float(np.median(times)) * 1e3

        alone = median_ms(lambda p=pixels: locate(p, full_scale=255))
        helped = median_ms(lambda p=pixels, f=found: locate(p, full_scale=255, prior=f))
        print(f"{shape[1]}x{shape[0]}: {helped:.2f} ms with a prior, {alone:.2f} ms without")


def main() -> None:
    parser = argparse.ArgumentParser(description=__doc__.splitlines()[0])
    parser.add_argument("--frames", type=int, default=200)
    frames = parser.parse_args().frames
    cv2.setNumThreads(1)
    accuracy(frames)
    systematic()
    rivals(min(frames, 50))
    speed()


if __name__ == "__main__":
    main()
