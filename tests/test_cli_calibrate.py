"""``readout calibrate`` on the sample set and a fresh one, then ``readout measure`` with it."""

import csv
import importlib.util
import json
import subprocess
import sys
from pathlib import Path

import numpy as np
import pytest

from readout.files.pictures import write_picture
from readout.simulation.stage import SteppedStage, frames_at

ROOT = Path(__file__).parent.parent
SAMPLE = ROOT / "calib_images" / "bench_stage"


def run(*words, ok=True):
    done = subprocess.run(
        [sys.executable, "-m", "readout", *map(str, words)],
        capture_output=True,
        text=True,
        timeout=60,
        cwd=ROOT,
        check=False,
    )
    assert "Traceback" not in done.stderr
    assert (done.returncode == 0) == ok, done.stderr
    return done


def maker():
    spec = importlib.util.spec_from_file_location("make_sample", ROOT / "calib_images" / "make.py")
    module = importlib.util.module_from_spec(spec)
    spec.loader.exec_module(module)
    return module


def check(folder, stage, tmp_path):
    """Focal length, signs and held-out frames against the truth of the simulated bench."""
    kept, page = tmp_path / "kept.json", tmp_path / "page.html"
    done = run("calibrate", folder, "--json", "--out", kept, "--report", page)
    found = json.loads(done.stdout)
    true = stage.autocollimator.calibration()
    error = found["focal_length_px"] - true.focal_length_px
    assert abs(error) < 1e-4 * true.focal_length_px
    assert abs(error) < 3 * found["focal_length_px_sd"]
    assert found["focal_length_mm"] == pytest.approx(true.focal_length_mm, rel=1e-4)
    assert found["rotation_deg"] == pytest.approx(true.rotation_deg, abs=0.05)
    assert found["mirrored"] is true.mirrored is True
    assert found["scale_x_arcsec_per_px"] == pytest.approx(true.scale_arcsec_per_px[0], rel=2e-4)
    assert (found["n"], found["signs"]) == (15, "unproven")
    assert "<svg" in page.read_text(encoding="utf-8")
    names_only = page.read_text(encoding="utf-8").replace("http://www.w3.org/", "")
    assert "http" not in names_only  # nothing is loaded from outside
    held_out = tmp_path / "held_out"
    held_out.mkdir()
    tilts = np.random.default_rng(stage.seed + 1).uniform((-280, -180), (280, 180), (10, 2))
    for k, (pixels, _) in enumerate(frames_at(stage.autocollimator, tilts, seed=stage.seed + 2)):
        write_picture(held_out / f"{k:02d}.png", pixels, full_scale=255)
    angles = tmp_path / "angles.csv"
    run("measure", held_out, "--calibration", kept, "--csv", angles)
    with angles.open(encoding="utf-8") as file:
        rows = list(csv.DictReader(file))
    measured = np.array([(float(r["x_arcsec"]), float(r["y_arcsec"])) for r in rows])
    combined = np.array([(float(r["x_u_arcsec"]), float(r["y_u_arcsec"])) for r in rows])
    noise = np.array([(float(r["x_sd_arcsec"]), float(r["y_sd_arcsec"])) for r in rows])
    rms = np.sqrt(((measured - tilts) ** 2).mean())
    print(f"seed {stage.seed}: focal length off by {error:.2f} px, held-out rms {rms:.4f} arcsec")
    assert rms < 0.012
    assert np.all(combined >= noise)
    assert np.all(np.abs(measured - tilts) < 4 * combined)


def test_the_sample_set(tmp_path):
    check(SAMPLE, SteppedStage(seed=maker().SEED), tmp_path)


def test_the_sample_set_is_what_its_maker_makes(tmp_path):
    module = maker()
    module.make(tmp_path / "again", SteppedStage(seed=module.SEED))
    for path in sorted(SAMPLE.iterdir()):
        assert (tmp_path / "again" / path.name).read_bytes() == path.read_bytes(), path.name
    assert sum(path.stat().st_size for path in SAMPLE.iterdir()) < 3_000_000


def test_a_fresh_set(tmp_path):
    stage = SteppedStage(seed=4711)
    maker().make(tmp_path / "fresh", stage)
    check(tmp_path / "fresh", stage, tmp_path)


def test_what_a_person_reads(tmp_path):
    done = run("calibrate", SAMPLE)
    assert done.stdout.startswith("focal length")
    assert "step_14.png" in done.stdout
    assert "signs unproven" in done.stdout


def test_refusals_are_one_line(tmp_path):
    for words in ([tmp_path / "nowhere"], [tmp_path]):
        done = run("calibrate", *words, ok=False)
        assert done.returncode == 1
        assert done.stdout == ""
        assert len(done.stderr.strip().splitlines()) == 1


def test_a_set_without_a_target_is_refused(tmp_path):
    (tmp_path / "tilts.csv").write_text("file,x_arcsec,y_arcsec,sd_arcsec\na.png,1,2,0.1\n")
    write_picture(tmp_path / "a.png", np.full((100, 100), 9, np.uint8), full_scale=255)
    done = run("calibrate", tmp_path, ok=False)
    assert "no frame" in done.stderr
    assert len(done.stderr.strip().splitlines()) == 1
