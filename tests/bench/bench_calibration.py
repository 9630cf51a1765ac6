"""How often the claimed uncertainty of a calibration covers the truth, for each way.

`python -m tests.bench.bench_calibration [REPEATS]`: every repeat draws its own standard (scale,
lever, blocks, wedge, mark), its own settings and its own noise of the places, and asks whether the
focal length found lies within one claimed standard uncertainty of the true one, and within two.
68.3 % and 95.4 % are right; the standard error of the counts is beside them.

`--frames N`: also N repeats of each sample set, rendered and sighted as pictures.
"""

from __future__ import annotations

import argparse
import importlib.util
import json
import math
import tempfile
import time
from collections.abc import Callable
from pathlib import Path

import numpy as np

from readout.angle import (
    Calibration,
    Camera,
    Mounting,
    SharedInput,
    TiltSet,
    calibrate_known_tilts,
    nominal_calibration,
)
from readout.angle.lever import LeverRow, lever_tilts
from readout.angle.wedge import WedgeIs, wedge_of_glass, wedge_tilts
from readout.simulation.standards import Lever, tilts_of_window, tilts_through_wedge
from readout.simulation.wedge import GlassWedge

SEED = 1906
PLACE_SD_PX = 0.005
TRUE = nominal_calibration(
    focal_length_mm=203.17,
    pitch_um=5.86,
    image_width_px=640,
    image_height_px=480,
    rotation_deg=-2.3,
    mounting=Mounting.SWAPPED_SIDES,
)
CAMERA = Camera(640, 480, 5.86, Mounting.SWAPPED_SIDES)
ROUND_DEG = np.arange(0.0, 360.0, 45.0)


def seen(rng: np.random.Generator, true_arcsec: np.ndarray, planned: TiltSet) -> Calibration:
    """The calibration from places with noise."""
    places = np.stack(TRUE.position(true_arcsec[:, 0], true_arcsec[:, 1]), axis=1)
    places += rng.normal(0, PLACE_SD_PX, places.shape)
    n = len(places)
    cov = np.tile([PLACE_SD_PX**2, 0.0, PLACE_SD_PX**2], (n, 1))
    return calibrate_known_tilts(planned.seen(range(n), places, cov), CAMERA)


def plan(tilt: np.ndarray, sd: np.ndarray, **more: object) -> TiltSet:
    n = len(tilt)
    nothing = np.full((n, 2), np.nan)
    names = tuple(f"row {k}" for k in range(n))
    return TiltSet(names, nothing, np.full((n, 3), np.nan), tilt, sd, **more)  # type: ignore[arg-type]  # keywords of TiltSet handed on


def stage(rng: np.random.Generator) -> Calibration:
    """A two-axis stage, its scale known to 0.05 %, each setting to 0.05 arcsec."""
    x, y = np.meshgrid(np.linspace(-300, 300, 4), np.linspace(-200, 200, 3))
    shown = np.stack([x.ravel(), y.ravel()], axis=1)
    true = shown * (1 + 5e-4 * rng.normal()) + (9, -14) + rng.normal(0, 0.05, shown.shape)
    scale = SharedInput("scale", 5e-4 * shown)
    return seen(rng, true, plan(shown, np.full(len(shown), 0.05), shared=(scale,)))


def one_axis(rng: np.random.Generator) -> Calibration:
    """A small-angle generator in X alone: square pixels."""
    shown = np.stack([np.linspace(-240, 240, 7), np.full(7, np.nan)], axis=1)
    true = np.nan_to_num(shown) + np.array([9, -14])
    true[:, 0] += rng.normal(0, 0.05, 7)
    return seen(rng, true, plan(shown, np.full(7, 0.05)))


def faces(rng: np.random.Generator) -> Calibration:
    """The two faces of a wedge certified to 0.06 of 150 arcsec."""
    sides = np.array([(0, 0), (1, 0), (-1, 0), (0, 1), (0, -1)] * 2, dtype=np.float64)
    true = (150 + 0.06 * rng.normal()) * sides + (4, 7) + rng.normal(0, 0.05, sides.shape)
    scale = SharedInput("certificate", 0.06 * sides)
    return seen(rng, true, plan(150 * sides, np.full(len(sides), 0.05), shared=(scale,)))


def lever(rng: np.random.Generator) -> Calibration:
    """A lever raised by gauge blocks, one axis after the other."""
    heights = [0.0, 0.06, 0.12, 0.2, -0.06, -0.12, -0.2, 0.0, 0.06, 0.12, -0.06, -0.12]
    axes = [0] * 7 + [1] * 5
    real = Lever()
    true = real.tilts(heights, axes, (-11, 6), rng)
    made = lever_tilts(
        [
            LeverRow("", real.length_mm, h, real.block_sd_mm if h else 0.0, axis)
            for h, axis in zip(heights, axes, strict=True)
        ],
        lever_sd_mm=real.sd_mm,
        seating_sd_mm=real.seating_sd_mm,
    )
    return seen(rng, true, plan(made.tilt_arcsec, made.sd_arcsec, shared=made.shared))


def feeler(rng: np.random.Generator) -> Calibration:
    """The hobbyist's: one feeler gauge of 0.05 mm ± 4 %, under either end of 100 mm ± 0.5 mm."""
    heights = [0.0, 0.05, -0.05] * 3
    real = Lever(length_mm=100.0, sd_mm=0.5, block_sd_mm=0.002, seating_sd_mm=0.0005)
    true = real.tilts(heights, [1] * 9, (3, 5), rng)
    made = lever_tilts(
        [LeverRow("", 100.0, h, 0.002 if h else 0.0, 1) for h in heights],
        lever_sd_mm=0.5,
        seating_sd_mm=0.0005,
    )
    return seen(rng, true, plan(made.tilt_arcsec, made.sd_arcsec, shared=made.shared))


def wedge(rng: np.random.Generator) -> Calibration:
    """A wedge turned in the beam, traced."""
    glass = GlassWedge(720 + 0.4 * rng.normal(), 1.5168 + 2e-4 * rng.normal(), (200, 120))
    stated = wedge_of_glass(
        WedgeIs.IN_TRANSMISSION, angle_arcsec=720, angle_sd_arcsec=0.4, index=1.5168, index_sd=2e-4
    )
    mark = 0.5 * rng.normal()
    real = [None, *(ROUND_DEG + mark + 0.1 * rng.normal(size=8)), None]
    made = wedge_tilts(
        stated,
        np.array([np.nan, *ROUND_DEG, np.nan]),
        np.array([0.0, *[0.1] * 8, 0.0]),
        mark_sd_deg=0.5,
    )
    true = tilts_through_wedge(glass, real, (8, -5))
    across = made.across_sd_arcsec
    return seen(
        rng, true, plan(made.tilt_arcsec, np.zeros(10), across_sd_arcsec=across, shared=made.shared)
    )


def window(rng: np.random.Generator) -> Calibration:
    """Both returns of a window, turned in its plane."""
    glass = GlassWedge(110 + 0.1 * rng.normal(), 1.5168 + 2e-4 * rng.normal(), (20, -12))
    stated = wedge_of_glass(
        WedgeIs.TWO_RETURNS, angle_arcsec=110, angle_sd_arcsec=0.1, index=1.5168, index_sd=2e-4
    )
    made = wedge_tilts(stated, ROUND_DEG, np.full(8, 0.1), mark_sd_deg=0.5)
    turns = ROUND_DEG + 0.5 * rng.normal() + 0.1 * rng.normal(size=8)

    def paired(rear: np.ndarray) -> np.ndarray:
        return np.stack([np.zeros_like(rear), rear], axis=1).reshape(-1, *rear.shape[1:])

    planned = plan(
        paired(made.tilt_arcsec),
        np.zeros(16),
        across_sd_arcsec=paired(made.across_sd_arcsec),
        shared=tuple(SharedInput(s.name, paired(s.tilt_arcsec)) for s in made.shared),
        zero_of=np.repeat(np.arange(8), 2),
    )
    return seen(rng, tilts_of_window(glass, turns.tolist()).reshape(-1, 2), planned)


WAYS: dict[str, Callable[[np.random.Generator], Calibration]] = {
    "stage, both axes": stage,
    "generator, one axis": one_axis,
    "two faces of a wedge": faces,
    "lever, gauge blocks": lever,
    "lever, one feeler gauge": feeler,
    "wedge in transmission": wedge,
    "two returns of a window": window,
}


def coverage(way: Callable[[np.random.Generator], Calibration], repeats: int, seed: int) -> str:
    """One line: share within one and two, mean error in claimed sd, the claim, time a fit."""
    rng = np.random.default_rng(seed)
    z, claims = [], []
    begin_s = time.perf_counter()
    for _ in range(repeats):
        found = way(rng)
        z.append((found.focal_length_px - TRUE.focal_length_px) / found.focal_length_px_sd)
        claims.append(found.focal_length_px_sd / found.focal_length_px)
    each_ms = (time.perf_counter() - begin_s) / repeats * 1e3
    one, two = (float(np.mean(np.abs(z) < k)) for k in (1, 2))
    error = math.sqrt(one * (1 - one) / repeats)
    return (
        f"{100 * one:5.1f} ± {100 * error:3.1f} % within one, {100 * two:5.1f} % within two, "
        f"mean {np.mean(z):+.2f} ± {np.std(z) / math.sqrt(repeats):.2f} sd, "
        f"u(f)/f {100 * np.median(claims):.3f} %, {each_ms:.0f} ms"
    )


def from_frames(repeats: int) -> None:
    """Sample sets made anew with other seeds, sighted as pictures."""
    from readout.files.calibration_set import read_calibration_set
    from readout.instrument.calibrating import calibrate_set

    path = Path(__file__).parents[2] / "calib_images" / "make.py"
    spec = importlib.util.spec_from_file_location("make_sets", path)
    assert spec is not None
    assert spec.loader is not None
    module = importlib.util.module_from_spec(spec)
    spec.loader.exec_module(module)
    for number, (name, maker) in enumerate(module.SETS.items()):
        if name == module.NAME:
            continue
        z = []
        for k in range(repeats):
            with tempfile.TemporaryDirectory() as folder:
                maker(Path(folder) / name, seed=SEED + 1000 * number + k)  # no draw in two ways
                truth = json.loads((Path(folder) / name / "truth.json").read_text("utf-8"))
                found = calibrate_set(read_calibration_set(Path(folder) / name), created_utc="")
            z.append((found.focal_length_px - truth["focal_length_px"]) / found.focal_length_px_sd)
        one = float(np.mean(np.abs(z) < 1))
        error = math.sqrt(0.683 * 0.317 / repeats)
        print(
            f"{name:24} {100 * one:5.1f} ± {100 * error:.1f} % of {repeats} within one, "
            f"mean {np.mean(z):+.2f}, largest {np.max(np.abs(z)):.1f} sd"
        )


def main() -> None:
    parser = argparse.ArgumentParser(description=__doc__)
    parser.add_argument("repeats", nargs="?", type=int, default=1000)
    parser.add_argument("--frames", type=int, default=0, metavar="N")
    asked = parser.parse_args()
    print(f"places known to {PLACE_SD_PX} px; seeds from {SEED}; {asked.repeats} repeats each")
    for k, (name, way) in enumerate(WAYS.items()):
        print(f"{name:24} {coverage(way, asked.repeats, SEED + k)}", flush=True)
    if asked.frames:
        print(f"from pictures, {asked.frames} sets each, seeds from {SEED}, each way 1000 on")
        from_frames(asked.frames)


if __name__ == "__main__":
    main()
