"""``readout calibrate`` on the sample set and a fresh one, then ``readout measure`` with it."""

import csv
import importlib.util
import json
import shutil
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


@pytest.mark.parametrize("name", list(maker().SETS))
def test_a_sample_set_is_what_its_maker_makes(name, tmp_path):
    maker().SETS[name](tmp_path / name)
    kept = ROOT / "calib_images" / name
    names = sorted(path.name for path in kept.iterdir())
    assert names == sorted(path.name for path in (tmp_path / name).iterdir())
    for file in names:
        assert (tmp_path / name / file).read_bytes() == (kept / file).read_bytes(), file
    assert sum(path.stat().st_size for path in kept.iterdir()) < 3_000_000


WAYS = {
    "generator": ("known tilts, one axis after the other", 1.5e-3, 0.02),
    "lever_blocks": ("lever, one axis after the other", 2.5e-3, 0.1),
    "certified_wedge": ("known tilts, both axes", 8e-4, 0.05),
    "wedge_in_transmission": ("wedge in transmission, both axes", 1.5e-3, 1.0),
    "window_two_returns": ("two returns of a window, both axes", 2.5e-3, 1.0),
    "graduation": ("graduated scales, both axes", 1e-3, 0.4),
}
"""method, what the claimed u(f)/f may be at most (from what each standard is said to be worth), and
how near the camera's turn must come, in degrees: a wedge's mark is known to half a degree"""


@pytest.mark.parametrize("name", list(WAYS))
def test_each_way_finds_the_truth_within_its_claim(name):
    method, most, near_deg = WAYS[name]
    folder = ROOT / "calib_images" / name
    truth = json.loads((folder / "truth.json").read_text(encoding="utf-8"))
    found = json.loads(run("calibrate", folder, "--json").stdout)
    error = found["focal_length_px"] - truth["focal_length_px"]
    print(f"{name}: off by {error:+.1f} px, claimed {found['focal_length_px_sd']:.1f} px")
    assert found["method"] == method
    assert abs(error) < 3 * found["focal_length_px_sd"] < 3 * most * truth["focal_length_px"]
    turned_deg = truth.get("machine_turned_deg", 0.0)  # mirrored: the picture turns the other way
    assert found["rotation_deg"] == pytest.approx(truth["rotation_deg"] + turned_deg, abs=near_deg)
    assert found["mirrored"] is truth["mirrored"] is True
    assert not any("left out" in warning for warning in found["warnings"])
    assert not any("larger than their uncertainties" in warning for warning in found["warnings"])
    if name == "graduation":
        assert "for known tilts" in run("calibrate", folder, "--expect", ok=False).stderr
        return
    told = json.loads(run("calibrate", folder, "--expect", "--json").stdout)
    claimed = found["focal_length_px_sd"] / found["focal_length_px"]
    assert told["focal_length_rel_sd"] == pytest.approx(claimed, rel=0.15)


def test_the_lever_set_proves_its_signs():
    found = json.loads(run("calibrate", ROOT / "calib_images" / "lever_blocks", "--json").stdout)
    assert found["signs"] == "proven"
    nudge, foil = found["signs_shown"]
    assert nudge["how"] == "right edge pressed towards the instrument"
    assert foil["direction"] == nudge["direction"] == "right"
    assert foil["ratio"] == pytest.approx(1.0, abs=3 * foil["ratio_u"])
    assert foil["y_change_arcsec"] == pytest.approx(103.1 * 0.0507 / 0.05, rel=0.01)
    assert foil["done_utc"] == "2000-01-01T00:00:00.000Z"


def test_a_lever_is_told_its_worth_before_anything_is_taken(tmp_path):
    """0, +h, -h: u(f)/f = hypot(1/100, 0.5/100), by hand; no frame is there."""
    (tmp_path / "tilts.csv").write_text(
        "file,lever_mm,height_mm,height_sd_mm,axis\n"
        "a.png,100,0,0,y\nb.png,100,0.1,0.001,y\nc.png,100,-0.1,0.001,y\n"
    )
    (tmp_path / "set.toml").write_text("[stage]\nlever_sd_mm = 0.5\n")
    told = json.loads(run("calibrate", tmp_path, "--expect", "--json").stdout)
    assert told["focal_length_rel_sd"] == pytest.approx(0.01118, rel=0.01)
    assert told["largest"] == "height 0.1 mm, used 2 times"
    said = run("calibrate", tmp_path, "--expect").stdout
    assert said.startswith("u(f)/f         1.1 % expected, of 3 frames")
    assert "the same however many rows" in said


def test_a_lever_step_names_what_a_division_means(tmp_path):
    """The same marks, taken for beam angle: the step comes out half, and is refused for it."""
    folder = tmp_path / "copy"
    shutil.copytree(ROOT / "calib_images" / "graduation", folder)
    about = folder / "set.toml"
    right = about.read_text(encoding="utf-8").replace("focal_length_mm = 200.0", "")
    about.write_text(right, encoding="utf-8")
    found = json.loads(run("calibrate", folder, "--json").stdout)
    assert any("steps of the lever" in w and "they agree" in w for w in found["warnings"])
    wrong = right.replace("mirror_tilt", "beam_angle")
    about.write_text(wrong, encoding="utf-8")
    done = run("calibrate", folder, ok=False)
    assert "a factor of 0.5" in done.stderr
    assert "change marked_as" in done.stderr
    assert len(done.stderr.strip().splitlines()) == 1
    (folder / "tilts.csv").unlink()  # without a step the engraved focal length tells
    engraved = wrong.replace("[optics]", "[optics]\nfocal_length_mm = 200")
    about.write_text(engraved, encoding="utf-8")
    assert "nominal are 200 mm" in run("calibrate", folder, ok=False).stderr


def a_copy(folder, tmp_path, change):
    """The lever set with its table changed."""
    copy = tmp_path / "copy"
    shutil.copytree(folder, copy)
    table = copy / "tilts.csv"
    table.write_text(change(table.read_text(encoding="utf-8")), encoding="utf-8")
    return copy


@pytest.mark.parametrize(
    ("change", "words"),
    [
        (lambda t: "".join(t.splitlines(keepends=True)[:3]), "2 frames (step_00.png, step_01.png)"),
        (
            lambda t: t.replace("step_03.png,200.0,0.2,", "step_03.png,200.0,0.02,"),
            "step_03.png is",
        ),
        (lambda t: t.replace("200.0,0.06,", "0.05,0.06,", 1), "line 3: a lever of 0.05 mm"),
        (
            lambda t: "\n".join(
                line.replace("-0.", "0.").replace("0.12", "0.06").replace(",0.2,", ",0.06,")
                for line in t.splitlines()
                if ",0.0,0.0," not in line and not line.endswith("y")
            ),
            "say the same tilt",
        ),
    ],
    ids=["two points", "ten times off", "lever shorter than height", "all alike"],
)
def test_bad_tables_name_row_and_remedy(tmp_path, change, words):
    folder = a_copy(ROOT / "calib_images" / "lever_blocks", tmp_path, change)
    done = run("calibrate", folder, ok=False)
    assert words in done.stderr
    assert len(done.stderr.strip().splitlines()) == 1
    assert done.stdout == ""


def test_points_on_one_line_are_refused(tmp_path):
    lines = (SAMPLE / "tilts.csv").read_text(encoding="utf-8").splitlines(keepends=True)
    on_a_line = "".join([lines[0], lines[1], lines[8], lines[15]])  # corner, middle, corner
    folder = a_copy(SAMPLE, tmp_path, lambda _: on_a_line)
    done = run("calibrate", folder, ok=False)
    assert "the 3 points from step_00.png to step_14.png lie on one line" in done.stderr
    assert "beside that line" in done.stderr


def test_a_picture_without_a_target_is_named_with_its_row(tmp_path):
    folder = a_copy(ROOT / "calib_images" / "certified_wedge", tmp_path, lambda t: t)
    write_picture(folder / "face_03.png", np.full((240, 320), 9, np.uint8), full_scale=255)
    found = json.loads(run("calibrate", folder, "--json").stdout)
    assert found["n"] == 9
    assert any(
        warning.startswith("face_03.png (line 5 of tilts.csv) was left out: no image; take it")
        for warning in found["warnings"]
    )


def test_light_that_is_always_there_is_taken_away(tmp_path):
    """A dim crosshair of the beam splitter in every frame, and a frame with the mirror covered."""
    from readout.simulation.crosshair import Crosshair, crosshair_image
    from readout.simulation.sensor import expose

    bench = maker().small_bench(contrast=4000.0)
    ghost = crosshair_image(bench.shape, 148.3, 111.7, Crosshair(contrast=1500.0, background=300.0))
    calibration, n = bench.calibration(), 7
    shown = np.array([(0, 0), (150, 0), (-150, 0), (0, 150), (0, -150), (150, 150), (-150, 150)])
    rows = ["file,x_arcsec,y_arcsec,sd_arcsec"]
    for k, tilt in enumerate(shown):
        place = calibration.position(float(tilt[0]) + 60, float(tilt[1]) + 25)
        light = bench.electrons(*map(float, place)) + ghost
        pixels = expose(light, bench.sensor, np.random.default_rng((97, k)))
        write_picture(tmp_path / f"{k}.png", pixels, full_scale=255)
        rows.append(f"{k}.png,{tilt[0]},{tilt[1]},0.05")
    covered = expose(ghost + 800.0, bench.sensor, np.random.default_rng((97, n)))
    write_picture(tmp_path / "covered.png", covered, full_scale=255)
    (tmp_path / "tilts.csv").write_text("\n".join(rows) + "\n")
    (tmp_path / "set.toml").write_text('[fixed]\nfile = "covered.png"\n')
    found = json.loads(run("calibrate", tmp_path, "--json").stdout)
    error = found["focal_length_px"] - calibration.focal_length_px
    print(f"seed 97: off by {error:.1f} px, claimed {found['focal_length_px_sd']:.1f} px")
    assert found["n"] == n
    assert abs(error) < 4 * found["focal_length_px_sd"] < 40


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
