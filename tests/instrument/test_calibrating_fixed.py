"""A set with a fixed crosshair in its frames: calibrated by its covered-mirror frame, or not."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pytest

from readout.angle import nominal_calibration
from readout.errors import BadInput
from readout.files.calibration_set import read_calibration_set
from readout.files.pictures import write_picture
from readout.instrument.calibrating import calibrate_set
from readout.simulation import Crosshair, Sensor, crosshair_image, expose

SHAPE = (240, 320)
NOW = "2026-05-04T03:02:01.000Z"
SENSOR = Sensor(8, gain_levels_per_electron=0.02, read_noise_electrons=6.0, black_levels=4.0)
LINES = Crosshair(line_px=4.0, blur_px=1.6, background=0.0, contrast=5000.0)
TRUE = nominal_calibration(
    focal_length_mm=300.0, pitch_um=3.45, image_width_px=SHAPE[1], image_height_px=SHAPE[0]
)


@pytest.fixture
def folder(tmp_path: Path) -> Path:
    """Nine tilts over a fixed crosshair in the picture's middle; the truth is the simulator's."""
    rng = np.random.default_rng(12)
    fixed = crosshair_image(SHAPE, 163.3, 117.6, LINES) + 300.0
    rows = ["file,x_arcsec,y_arcsec,sd_arcsec"]
    for k, (x, y) in enumerate((x, y) for x in (-90, -35, 70) for y in (-60, 25, 80)):
        x_px, y_px = (float(v) for v in TRUE.position(float(x), float(y)))
        electrons = fixed + crosshair_image(SHAPE, x_px, y_px, LINES)
        write_picture(tmp_path / f"{k}.png", expose(electrons, SENSOR, rng))
        rows.append(f"{k}.png,{x},{y},0.001")
    (tmp_path / "tilts.csv").write_text("\n".join(rows) + "\n", "utf-8")
    frames = [expose(fixed, SENSOR, rng) for _ in range(32)]
    mean = np.mean(frames, axis=0)
    write_picture(tmp_path / "covered.png", np.rint(mean).astype(np.uint8))
    return tmp_path


def test_the_covered_mirror_frame_makes_it_possible(folder: Path) -> None:
    (folder / "set.toml").write_text('[fixed]\nfile = "covered.png"\n', "utf-8")
    made = calibrate_set(read_calibration_set(folder), created_utc=NOW)
    assert made.n == 9
    assert made.made_from["fixed"] == "covered.png"
    error = made.focal_length_px - TRUE.focal_length_px
    assert abs(error) < 4 * made.focal_length_px_sd < 1e-3 * TRUE.focal_length_px


def test_without_it_the_frames_are_in_doubt(folder: Path) -> None:
    with pytest.raises(BadInput):
        calibrate_set(read_calibration_set(folder), created_utc=NOW)


def test_another_covered_frame_is_another_calibration(folder: Path) -> None:
    (folder / "set.toml").write_text('[fixed]\nfile = "covered.png"\n', "utf-8")
    given = read_calibration_set(folder)
    before = calibrate_set(given, created_utc=NOW)
    rng = np.random.default_rng(13)
    fixed = crosshair_image(SHAPE, 163.3, 117.6, LINES) + 300.0
    write_picture(folder / "covered.png", expose(fixed, SENSOR, rng))
    assert calibrate_set(given, created_utc=NOW).id != before.id


def test_one_of_another_size_is_refused_in_a_line(folder: Path) -> None:
    write_picture(folder / "covered.png", np.zeros((24, 32), np.uint8))
    (folder / "set.toml").write_text('[fixed]\nfile = "covered.png"\n', "utf-8")
    with pytest.raises(BadInput, match="fixed frame is 32x24 and the picture 320x240") as refused:
        calibrate_set(read_calibration_set(folder), created_utc=NOW)
    assert "\n" not in str(refused.value)
