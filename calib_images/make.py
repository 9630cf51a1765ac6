"""Makes the sample set: `python calib_images/make.py`. The same bytes each time."""

from __future__ import annotations

import csv
import json
import shutil
from pathlib import Path

import tomli_w

from readout.files.pictures import write_picture
from readout.simulation.stage import SteppedStage

SEED = 20
NAME = "bench_stage"
NOTE = "Mirror on a two-axis stage, 0.4 m away; camera behind a beam splitter. Simulated."


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
    text = json.dumps(truth, indent=1) + "\n"
    (folder / "truth.json").write_text(text, encoding="utf-8", newline="\n")


if __name__ == "__main__":
    make(Path(__file__).parent / NAME, SteppedStage(seed=SEED))
