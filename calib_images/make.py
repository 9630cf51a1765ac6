"""Makes the sample sets: `python calib_images/make.py`. The same bytes each time."""

from __future__ import annotations

import csv
import json
import math
import shutil
from collections.abc import Callable, Iterable, Sequence
from pathlib import Path
from typing import Any

import numpy as np
import tomli_w

from readout.angle import Mounting
from readout.angle.wedge import deviation_arcsec, two_returns_arcsec
from readout.files.pictures import write_picture
from readout.simulation.autocollimator import Autocollimator
from readout.simulation.crosshair import Crosshair
from readout.simulation.graduation import Ruling, ruled_share
from readout.simulation.sensor import expose
from readout.simulation.stage import SteppedStage, frames_at
from readout.simulation.standards import (
    Lever,
    frames_of_returns,
    tilts_of_window,
    tilts_through_wedge,
)
from readout.simulation.wedge import GlassWedge
from readout.units import ARCSEC_PER_RAD

SEED = 20
NAME = "bench_stage"
NOTE = "Mirror on a two-axis stage, 0.4 m away; camera behind a beam splitter. Simulated."
ROUND_DEG = tuple(45.0 * k for k in range(8))
MADE_UTC = "2000-01-01T00:00:00.000Z"


def small_bench(*, contrast: float = 7000.0) -> Autocollimator:
    """A small camera behind a beam splitter, an objective that is not what is engraved on it."""
    return Autocollimator(
        focal_length_mm=203.17,
        pitch_um=5.86,
        width_px=320,
        height_px=240,
        rotation_deg=-2.3,
        mounting=Mounting.SWAPPED_SIDES,
        reticle=Crosshair(line_px=4.0, contrast=contrast),
    )


def make(folder: Path, stage: SteppedStage) -> None:
    """Write frames, tilts.csv, set.toml and the truth into ``folder``, replacing it."""
    shutil.rmtree(folder, ignore_errors=True)
    folder.mkdir(parents=True)
    calibration = stage.autocollimator.calibration()
    about = {
        "target": "crosshair",
        "note": NOTE,
        "camera": {"pixel_um": stage.autocollimator.pitch_um, "mounting": "swapped_sides"},
        "optics": {"focal_length_mm": 300.0},
    }
    (folder / "set.toml").write_bytes(tomli_w.dumps(about).encode())
    places = []
    with (folder / "tilts.csv").open("w", encoding="utf-8", newline="") as file:
        table = csv.writer(file, lineterminator="\n")
        table.writerow(["file", "x_arcsec", "y_arcsec", "sd_arcsec"])
        for k, (shown, (pixels, place)) in enumerate(
            zip(stage.shown_arcsec(), stage.frames(), strict=True)
        ):
            name = f"step_{k:02d}.png"
            write_picture(folder / name, pixels, full_scale=stage.autocollimator.sensor.full_scale)
            table.writerow([name, *shown.tolist(), stage.sd_arcsec])
            places.append({"file": name, "x_px": float(place[0]), "y_px": float(place[1])})
    truth = {
        "seed": stage.seed,
        "focal_length_px": calibration.focal_length_px,
        "focal_length_mm": calibration.focal_length_mm,
        "rotation_deg": calibration.rotation_deg,
        "mirrored": calibration.mirrored,
        "zero_arcsec": list(stage.zero_arcsec),
        "true_arcsec": stage.true_arcsec().tolist(),
        "frames": places,
    }
    _write_truth(folder, truth)


def make_generator(folder: Path, seed: int = 31) -> None:
    """A small-angle generator, one axis after the other; then one move of the machine itself."""
    bench, sd_arcsec, scale_rel_sd, turn_deg = small_bench(), 0.05, 5e-4, 1.4
    rng = np.random.default_rng((seed, 0))
    shown = np.array(
        [(x, np.nan) for x in np.linspace(-240, 240, 7)]
        + [(np.nan, y) for y in np.linspace(-180, 180, 7)]
    )
    factor = 1 + scale_rel_sd * rng.normal()
    true = np.nan_to_num(shown) * factor + (9.0, -14.0)
    true += np.where(np.isfinite(shown), rng.normal(0, sd_arcsec, shown.shape), 0.0)
    turn = math.radians(turn_deg)
    move = np.linspace(-150, 150, 4)[:, None] * [-math.sin(turn), math.cos(turn)] + (3.0, 5.0)
    names = [f"step_{k:02d}.png" for k in range(len(shown))]
    moved = [f"carriage_{k}.png" for k in range(len(move))]
    about = _about(
        bench,
        "Small-angle generator turned in X, then in Y; then a carriage that pitches. Simulated.",
        stage={"scale_rel_sd": scale_rel_sd},
        axes={"single_axis": "y", "files": moved},
    )
    rows = [["" if np.isnan(v) else float(v) for v in row] + [sd_arcsec] for row in shown]
    truth = {"seed": seed, "machine_turned_deg": turn_deg, "zero_arcsec": [9.0, -14.0]}
    _write_set(folder, about, ("x_arcsec", "y_arcsec", "sd_arcsec"), names, rows)
    _write_frames(folder, bench, [*names, *moved], np.vstack([true, move]), truth, seed)


def make_lever(folder: Path, seed: int = 32) -> None:
    """A lever raised by gauge blocks in both axes, and the tests that prove the signs."""
    bench, lever = small_bench(), Lever()
    heights = [0.0, 0.06, 0.12, 0.2, -0.06, -0.12, -0.2, 0.0, 0.06, 0.12, -0.06, -0.12]
    axes = [0] * 7 + [1] * 5
    rng = np.random.default_rng((seed, 0))
    true = lever.tilts(heights, axes, (-11.0, 6.0), rng)
    foil = {"thickness_mm": 0.05, "thickness_sd_mm": 0.002, "base_mm": 100.0, "base_sd_mm": 0.5}
    raised = math.degrees(math.asin(0.0507 / 100.2)) * 3600
    tests = {
        "rest.png": (2.0, 1.0),
        "right_pressed.png": (49.0, 3.0),
        "foil.png": (2.1, 1.0 + raised),
    }
    about = _about(
        bench,
        "Mirror on a lever of 200 mm, gauge blocks under either end; then an edge pressed and a "
        "foil under the far foot. Simulated.",
        stage={"lever_sd_mm": lever.sd_mm, "seating_sd_mm": lever.seating_sd_mm},
        nudge=[
            {
                "edge": "right",
                "before": "rest.png",
                "after": "right_pressed.png",
                "done_utc": MADE_UTC,
            }
        ],
        foil=[{**foil, "before": "rest.png", "after": "foil.png", "done_utc": MADE_UTC}],
    )
    names = [f"step_{k:02d}.png" for k in range(len(heights))]
    rows = [
        [lever.length_mm, height, lever.block_sd_mm if height else 0.0, "xy"[axis]]
        for height, axis in zip(heights, axes, strict=True)
    ]
    _write_set(folder, about, ("lever_mm", "height_mm", "height_sd_mm", "axis"), names, rows)
    shown = np.vstack([true, np.array(list(tests.values()))])
    _write_frames(folder, bench, [*names, *tests], shown, {"seed": seed}, seed)


def make_certified_wedge(folder: Path, seed: int = 33) -> None:
    """The two faces of a certified wedge, wrung on with its thick end at four sides."""
    bench = small_bench()
    angle_arcsec, certified_sd, wringing_sd = 150.0, 0.06, 0.05
    rng = np.random.default_rng((seed, 0))
    real = angle_arcsec + certified_sd * rng.normal()
    sides = [(0, 0), (1, 0), (-1, 0), (0, 1), (0, -1)] * 2
    shown = angle_arcsec * np.array(sides, dtype=np.float64)
    true = real * np.array(sides) + (4.0, 7.0) + rng.normal(0, wringing_sd, (len(sides), 2))
    about = _about(
        bench,
        "The lower and the upper face of a wedge certified to 150.00 ± 0.06 arcsec, its thick end "
        "to the right, left, top and bottom. Simulated.",
        stage={"scale_rel_sd": certified_sd / angle_arcsec},
    )
    names = [f"face_{k:02d}.png" for k in range(len(sides))]
    rows = [[*row.tolist(), wringing_sd] for row in shown]
    _write_set(folder, about, ("x_arcsec", "y_arcsec", "sd_arcsec"), names, rows)
    _write_frames(folder, bench, names, true, {"seed": seed, "angle_arcsec": real}, seed)


def make_wedge_in_transmission(folder: Path, seed: int = 34) -> None:
    """A wedge turned in the beam, and out of it."""
    bench, turn_sd_deg, mark_deg = small_bench(), 0.1, 0.3
    stated = {"angle_arcsec": 340.0, "angle_sd_arcsec": 0.3, "index": 1.5168, "index_sd": 2e-4}
    rng = np.random.default_rng((seed, 0))
    glass = GlassWedge(
        stated["angle_arcsec"] + stated["angle_sd_arcsec"] * rng.normal(),
        stated["index"] + stated["index_sd"] * rng.normal(),
        (240.0, 120.0),
    )
    turns = [None, *ROUND_DEG, None]
    real = [None if t is None else t + mark_deg + turn_sd_deg * rng.normal() for t in turns]
    true = tilts_through_wedge(glass, real, (8.0, -5.0))
    about = _about(
        bench,
        "A wedge of glass in front of a resting mirror, its thick edge turned round. Simulated.",
        wedge={"used": "in_transmission", **stated, "mark_sd_deg": 0.5},
    )
    names = [f"turn_{k:02d}.png" for k in range(len(turns))]
    rows = [["" if t is None else t, 0.0 if t is None else turn_sd_deg] for t in turns]
    truth = {
        "seed": seed,
        "wedge_reads_arcsec": deviation_arcsec(glass.angle_arcsec, glass.index),
        "mark_deg": mark_deg,
    }
    _write_set(folder, about, ("turn_deg", "turn_sd_deg"), names, rows)
    _write_frames(folder, bench, names, true, truth, seed)


def make_window(folder: Path, seed: int = 35) -> None:
    """Both returns of a window, turned in its plane."""
    bench, turn_sd_deg = small_bench(contrast=3500.0), 0.1
    stated = {"angle_arcsec": 110.0, "angle_sd_arcsec": 0.1, "index": 1.5168, "index_sd": 2e-4}
    rng = np.random.default_rng((seed, 0))
    window = GlassWedge(
        stated["angle_arcsec"] + stated["angle_sd_arcsec"] * rng.normal(),
        stated["index"] + stated["index_sd"] * rng.normal(),
        (20.0, -12.0),
    )
    turns = [30.0, 60.0, 120.0, 150.0, 210.0, 240.0, 300.0, 330.0]  # no two arms in one line
    true = tilts_of_window(window, [t + turn_sd_deg * rng.normal() for t in turns])
    about = _about(
        bench,
        "A window of 110 arcsec sends back two crosshairs; its thick edge turned round. Simulated.",
        wedge={"used": "two_returns", **stated, "mark_sd_deg": 0.5},
    )
    names = [f"turn_{k:02d}.png" for k in range(len(turns))]
    _write_set(folder, about, ("turn_deg", "turn_sd_deg"), names, [[t, turn_sd_deg] for t in turns])
    reads = two_returns_arcsec(window.angle_arcsec, window.index)
    _write_frames(folder, bench, names, true, {"seed": seed, "window_reads_arcsec": reads}, seed)


def make_graduation(folder: Path, seed: int = 36) -> None:
    """A graduated reticle in view, the crosshair across its marks; two lever steps to check it."""
    bench = small_bench(contrast=3500.0)
    calibration = bench.calibration()
    lever = Lever()
    heights = [0.0, 0.12]
    true = lever.tilts(heights, [0, 0], (31.0, -44.0), np.random.default_rng((seed, 0)))
    ruling = Ruling(division_slope=2 * 30.0 / ARCSEC_PER_RAD, line_px=2.0)
    dark = 1 - 0.6 * ruled_share(bench.shape, calibration, ruling)
    dark *= 1 - 0.6 * ruled_share(bench.shape, calibration, ruling, upright=True)
    names = ["step_00.png", "step_01.png"]
    about = _about(
        bench,
        "A reticle graduated in 30 arcsec of mirror tilt, the return across its marks; one lever "
        "step of 0.12 mm. Simulated.",
        fixed={"file": "covered.png"},
        graduation={
            "file": "step_00.png",
            "spacing_arcsec": 30.0,
            "marked_as": "mirror_tilt",
            "rel_sd": 5e-4,
        },
        stage={"lever_sd_mm": lever.sd_mm, "seating_sd_mm": lever.seating_sd_mm},
    )
    rows = [[lever.length_mm, h, lever.block_sd_mm if h else 0.0, "x"] for h in heights]
    _write_set(folder, about, ("lever_mm", "height_mm", "height_sd_mm", "axis"), names, rows)
    places = []
    for k, (name, tilt) in enumerate(zip(names, true, strict=True), start=1):
        x_px, y_px = (float(v) for v in calibration.position(*tilt))
        light = (bench.electrons(x_px, y_px) + 4000.0) * dark
        pixels = expose(light, bench.sensor, np.random.default_rng((seed, k)))
        write_picture(folder / name, pixels, full_scale=bench.sensor.full_scale)
        places.append({"file": name, "places_px": [[x_px, y_px]]})
    covered = expose(
        (bench.reticle.background + 4000.0) * dark, bench.sensor, np.random.default_rng((seed, 9))
    )
    write_picture(folder / "covered.png", covered, full_scale=bench.sensor.full_scale)
    truth = {"seed": seed, "true_arcsec": true.tolist()}
    _write_truth(folder, {**truth, **_true_scale(bench), "frames": places})


def _true_scale(bench: Autocollimator) -> dict[str, Any]:
    calibration = bench.calibration()
    return {
        "focal_length_px": calibration.focal_length_px,
        "focal_length_mm": calibration.focal_length_mm,
        "rotation_deg": calibration.rotation_deg,
        "mirrored": calibration.mirrored,
    }


SETS: dict[str, Callable[..., None]] = {
    NAME: lambda folder: make(folder, SteppedStage(seed=SEED)),
    "generator": make_generator,
    "lever_blocks": make_lever,
    "certified_wedge": make_certified_wedge,
    "wedge_in_transmission": make_wedge_in_transmission,
    "window_two_returns": make_window,
    "graduation": make_graduation,
}


def _about(bench: Autocollimator, note: str, **parts: Any) -> dict[str, Any]:
    return {
        "target": "crosshair",
        "note": note,
        "camera": {"pixel_um": bench.pitch_um, "mounting": bench.mounting.value},
        "optics": {"focal_length_mm": 200.0},
        **parts,
    }


def _write_set(
    folder: Path,
    about: dict[str, Any],
    columns: Sequence[str],
    names: Sequence[str],
    rows: Iterable[Sequence[Any]],
) -> None:
    """A fresh folder with set.toml and tilts.csv."""
    shutil.rmtree(folder, ignore_errors=True)
    folder.mkdir(parents=True)
    (folder / "set.toml").write_bytes(tomli_w.dumps(about).encode())
    with (folder / "tilts.csv").open("w", encoding="utf-8", newline="") as file:
        table = csv.writer(file, lineterminator="\n")
        table.writerow(["file", *columns])
        table.writerows([name, *row] for name, row in zip(names, rows, strict=True))


def _write_frames(
    folder: Path,
    bench: Autocollimator,
    names: Sequence[str],
    true_arcsec: np.ndarray,
    truth: dict[str, Any],
    seed: int,
) -> None:
    """The frames for tilts (n, 2), or (n, k, 2) with k returns each, and truth.json."""
    frames = (
        frames_at(bench, true_arcsec, seed=seed)
        if true_arcsec.ndim == 2
        else frames_of_returns(bench, true_arcsec, seed=seed)
    )
    places = []
    for name, (pixels, place) in zip(names, frames, strict=True):
        write_picture(folder / name, pixels, full_scale=bench.sensor.full_scale)
        places.append({"file": name, "places_px": np.atleast_2d(place).tolist()})
    seen = {"true_arcsec": true_arcsec.tolist(), "frames": places}
    _write_truth(folder, {**truth, **_true_scale(bench), **seen})


def _write_truth(folder: Path, truth: dict[str, Any]) -> None:
    text = json.dumps(truth, indent=1) + "\n"
    (folder / "truth.json").write_text(text, encoding="utf-8", newline="\n")


if __name__ == "__main__":
    for name, maker in SETS.items():
        maker(Path(__file__).parent / name)
