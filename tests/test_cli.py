"""The commands as a person types them: results, one line for what went wrong, exit status."""

from __future__ import annotations

import csv
import json
import os
import socket
from collections.abc import Callable
from dataclasses import replace
from importlib import metadata
from pathlib import Path
from typing import Any

import numpy as np
import pytest

from readout.cli import app as command_line
from readout.cli.app import main
from readout.files.pictures import write_picture
from readout.model import F64, Pixels

REQUIRED = ["live", "cameras", "locate", "measure", "prepare", "simulate"]


class Run:
    """What a command left behind."""

    def __init__(self, status: int, out: str, err: str) -> None:
        self.status, self.out, self.err = status, out, err

    @property
    def rows(self) -> list[dict[str, Any]]:
        return [json.loads(line) for line in self.out.splitlines()]


Command = Callable[..., Run]


@pytest.fixture
def readout(
    capsys: pytest.CaptureFixture[str], monkeypatch: pytest.MonkeyPatch, tmp_path: Path
) -> Command:
    monkeypatch.setenv("XDG_CONFIG_HOME", str(tmp_path / "config"))  # not the settings of a person

    def run(*arguments: object) -> Run:
        monkeypatch.setattr("sys.argv", ["readout", *map(str, arguments)])
        with pytest.raises(SystemExit) as ended:
            main()
        status = ended.value.code
        out, err = capsys.readouterr()
        return Run(status if isinstance(status, int) else 0 if status is None else 1, out, err)

    return run


@pytest.fixture(scope="module")
def frames(tmp_path_factory: pytest.TempPathFactory) -> Path:
    """Twelve simulated frames with truth and calibration."""
    from readout.files.frameset import write_frameset
    from readout.simulation import simulate_frames

    folder = tmp_path_factory.mktemp("set") / "frames"
    made = simulate_frames(frames=12, seed=4, width_px=320, height_px=240)
    write_frameset(folder, made, calibration=made.calibration, full_scale=made.full_scale)
    return folder


def truth(folder: Path) -> list[dict[str, str]]:
    with (folder / "truth.csv").open(encoding="utf-8") as file:
        return list(csv.DictReader(file))


def fails_in_one_line(run: Run, *words: str) -> None:
    assert run.status == 1
    assert run.out == ""
    assert run.err.startswith("readout: ")
    assert run.err.count("\n") == 1
    for word in words:
        assert word in run.err


# -- help and usage -------------------------------------------------------------------------------


def test_help_names_every_command_and_each_has_an_example(readout: Command) -> None:
    top = readout("--help")
    assert top.status == 0
    for name in REQUIRED:
        assert name in top.out
        assert "Example" in readout(name, "--help").out


def test_version(readout: Command) -> None:
    from readout import __version__

    assert readout("--version").out.strip() == f"readout {__version__}"


@pytest.mark.parametrize(
    "arguments",
    [("unknown",), ("locate",), ("measure",), ("live", "--port", "high"), ("live", "--bogus")],
)
def test_wrong_usage_is_status_2(readout: Command, arguments: tuple[str, ...]) -> None:
    run = readout(*arguments)
    assert run.status == 2
    assert run.out == ""


def test_two_opencvs_are_refused(readout: Command, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(command_line.metadata, "version", lambda name: "5.0")
    fails_in_one_line(readout("cameras"), "opencv-python-headless", "uninstall")


def test_one_opencv_is_installed_here() -> None:
    installed = {d.metadata["Name"] for d in metadata.distributions()}
    assert len(installed & set(command_line.OPENCV)) == 1


# -- locate ---------------------------------------------------------------------------------------


def test_locate_as_json(readout: Command, frames: Path) -> None:
    files = sorted(frames.glob("*.png"))
    run = readout("locate", *files, "--json")
    assert (run.status, run.err) == (0, "")
    assert [row["file"] for row in run.rows] == [str(file) for file in files]
    for row, true in zip(run.rows, truth(frames), strict=True):
        assert list(row) == [
            *("file", "x_px", "y_px", "x_sd_px", "y_sd_px", "xy_correlation", "quality")
        ]
        # truth of the simulator; 6 claimed standard deviations
        assert row["x_px"] == pytest.approx(float(true["x_px"]), abs=6 * row["x_sd_px"])
        assert row["y_px"] == pytest.approx(float(true["y_px"]), abs=6 * row["y_sd_px"])
        assert row["quality"] == []


def test_locate_for_people(readout: Command, frames: Path) -> None:
    run = readout("locate", frames / "frame_000000.png")
    assert "±" in run.out
    assert "px" in run.out
    assert "good" in run.out


def test_a_picture_without_an_image_is_no_error(readout: Command, tmp_path: Path) -> None:
    noise = np.random.default_rng(1).normal(40, 3, (120, 160)).round().astype(np.uint8)
    write_picture(tmp_path / "dark.png", noise)
    run = readout("locate", tmp_path / "dark.png", "--json")
    assert run.status == 0
    assert run.rows[0]["x_px"] is None
    assert run.rows[0]["quality"]
    words = readout("locate", tmp_path / "dark.png").out
    assert "no image" in words
    assert "tilt the mirror" in words


@pytest.mark.skipif(not hasattr(os, "mkfifo"), reason="the system has no such pipes")
def test_a_pipe_or_device_is_refused_and_not_waited_for(readout: Command, tmp_path: Path) -> None:
    pipe = tmp_path / "pipe.png"
    os.mkfifo(pipe)
    for path in (pipe, Path(os.devnull)):
        fails_in_one_line(readout("locate", path), str(path), "no regular file")


def test_files_that_are_no_pictures_are_named_and_the_others_done(
    readout: Command, frames: Path, tmp_path: Path
) -> None:
    good, missing = frames / "frame_000001.png", tmp_path / "none.png"
    text = tmp_path / "notes.png"
    text.write_text("not a picture", "utf-8")
    run = readout("locate", missing, good, text, "--json")
    assert run.status == 1
    assert [row["file"] for row in run.rows] == [str(good)]
    lines = run.err.splitlines()
    assert len(lines) == 2
    assert str(missing) in lines[0]
    assert str(text) in lines[1]


# -- what is known of the camera ------------------------------------------------------------------


@pytest.fixture(scope="module")
def over_fixed(tmp_path_factory: pytest.TempPathFactory) -> Path:
    """A folder with a return over a fixed crosshair (``seen``), and of that crosshair alone, the
    mirror covered (``covered``, eight frames), from a camera of gamma 0.5.
    """
    from readout.simulation import Crosshair, Sensor, crosshair_image, expose
    from readout.simulation.response import display_encoded

    folder = tmp_path_factory.mktemp("fixed")
    rng = np.random.default_rng(11)
    sensor = Sensor(12, gain_levels_per_electron=0.3, read_noise_electrons=6.0)
    line = Crosshair(line_px=3.0, blur_px=1.4, background=400.0, contrast=3000.0)
    still = crosshair_image((240, 320), 170.3, 110.6, line)
    moved = crosshair_image((240, 320), RETURN_PX[0], RETURN_PX[1], replace(line, background=0.0))

    def shown(electrons: F64) -> Pixels:
        return display_encoded(expose(electrons, sensor, rng), sensor.full_scale, gamma=0.5)

    (folder / "covered").mkdir()
    (folder / "seen").mkdir()
    for k in range(8):
        write_picture(folder / "covered" / f"{k}.png", shown(still))
    for k in range(2):
        write_picture(folder / "seen" / f"{k}.png", shown(still + moved))
    return folder


RETURN_PX = 150.2, 125.8


def test_locate_takes_fixed_light_away(readout: Command, over_fixed: Path, tmp_path: Path) -> None:
    seen, alone = over_fixed / "seen" / "0.png", over_fixed / "covered" / "0.png"
    plain = readout("locate", seen, "--json").rows[0]
    assert "several_returns" in plain["quality"]
    assert "nudge the mirror" in readout("locate", seen).out
    covered = "--fixed", over_fixed / "covered"
    kept = tmp_path / "camera.npz"
    assert "mean of 8 frames" in readout("prepare", kept, *covered, "--gamma", 0.5).out
    for options in ((*covered, "--gamma", 0.5), ("--prepared", kept)):
        run = readout("locate", seen, alone, *options, "--json")
        assert (run.status, run.err) == (0, "")
        found, nothing = run.rows
        assert found["quality"] == []
        for axis, true in zip("xy", RETURN_PX, strict=True):
            # truth of the simulator; 6 claimed standard deviations
            assert abs(found[f"{axis}_px"] - true) < 6 * found[f"{axis}_sd_px"] < 0.03
        assert nothing["x_px"] is None
        assert nothing["quality"] == ["no_image"]


def test_measure_takes_fixed_light_away(readout: Command, over_fixed: Path, tmp_path: Path) -> None:
    settings = tmp_path / "settings.json"
    optics = {"focal_length_mm": 300, "pitch_um": 3.45}
    settings.write_text(json.dumps({"schema": "readout.settings/1", "optics": optics}), "utf-8")
    given = "--settings", settings, "--csv", "-"
    for options, words in (
        ((), {"several_returns"}),
        (("--fixed", over_fixed / "covered", "--gamma", 0.5), set()),
    ):
        run = readout("measure", over_fixed / "seen", *options, *given)
        rows = list(csv.DictReader(run.out.splitlines()))
        assert len(rows) == 2
        assert all(words <= set(row["quality"].split()) for row in rows)
    assert [row["quality"] for row in rows] == ["", ""]


def test_the_curve_alone_fits_any_depth(readout: Command, frames: Path, tmp_path: Path) -> None:
    deep = tmp_path / "deep.png"
    write_picture(deep, np.zeros((40, 60), np.uint16), full_scale=4095)
    run = readout("locate", frames / "frame_000000.png", deep, "--gamma", 0.9, "--json")
    assert [row["quality"] for row in run.rows] == [[], ["no_image"]]


def test_a_picture_of_another_size_is_named_and_the_others_done(
    readout: Command, frames: Path, over_fixed: Path, tmp_path: Path
) -> None:
    small = tmp_path / "small.png"
    write_picture(small, np.zeros((40, 60), np.uint8))
    seen = over_fixed / "seen" / "0.png"
    run = readout("locate", small, seen, "--fixed", over_fixed / "covered", "--json")
    assert run.status == 1
    assert [row["file"] for row in run.rows] == [str(seen)]
    assert run.err.count("\n") == 1
    for words in (str(small), "320 × 240", "60 × 40", "take the frames anew"):
        assert words in run.err
    measured = readout(
        *("measure", frames, "--calibration", frames / "calibration.json"),
        *("--fixed", small),
    )
    fails_in_one_line(measured, "60 × 40", "320 × 240")


def test_live_ends_in_one_line_where_it_does_not_fit(
    readout: Command, over_fixed: Path, tmp_path: Path
) -> None:
    kept = tmp_path / "camera.npz"
    readout("prepare", kept, "--fixed", over_fixed / "covered")
    run = readout(
        *("live", "--source", "simulated", "--prepared", kept, "--port", 0, "--no-browser"),
        *("--data", tmp_path / "data", "--settings", tmp_path / "settings.json"),
    )
    fails_in_one_line(run, "320 × 240", "take the frames anew")


def test_what_is_given_twice_or_not_there_is_refused(
    readout: Command, over_fixed: Path, tmp_path: Path
) -> None:
    seen, kept = over_fixed / "seen" / "0.png", tmp_path / "camera.npz"
    fails_in_one_line(readout("locate", seen, "--fixed", tmp_path / "none.png"), "none.png")
    fails_in_one_line(readout("locate", seen, "--prepared", kept), "camera.npz", "does not exist")
    fails_in_one_line(readout("locate", seen, "--gamma", 0), "gamma")
    fails_in_one_line(readout("prepare", kept, "--gamma", 0.45), "give a frame")
    assert readout("prepare", kept, "--gamma", 0.45, "--levels", 255).status == 0
    fails_in_one_line(readout("prepare", kept, "--gamma", 0.45, "--levels", 255), "--overwrite")
    both = readout("locate", seen, "--prepared", kept, "--gamma", 0.45)
    assert both.status == 2
    assert readout("prepare", tmp_path / "camera.json", "--gamma", 0.45).status == 2


# -- measure --------------------------------------------------------------------------------------


def test_measure_a_folder_against_its_truth(readout: Command, frames: Path, tmp_path: Path) -> None:
    out = tmp_path / "angles.csv"
    run = readout("measure", frames, "--calibration", frames / "calibration.json", "--csv", out)
    assert (run.status, run.out) == (0, "")
    with out.open(encoding="utf-8") as file:
        rows = list(csv.DictReader(file))
    assert list(rows[0]) == [
        *("file", "t_s", "x_arcsec", "y_arcsec", "x_sd_arcsec", "y_sd_arcsec"),
        *("x_u_arcsec", "y_u_arcsec", "quality", "x_px", "y_px", "signs"),
    ]
    for row, true in zip(rows, truth(frames), strict=True):
        assert row["file"] == true["file"]
        assert float(row["t_s"]) == pytest.approx(float(true["t_s"]), abs=1e-6)
        for axis in ("x", "y"):
            assert abs(float(row[f"{axis}_px"]) - float(true[f"{axis}_px"])) < 0.1
            error = float(row[f"{axis}_arcsec"]) - float(true[f"{axis}_arcsec"])
            assert abs(error) < 6 * float(row[f"{axis}_sd_arcsec"])


def test_measure_as_json_writes_nothing_else(readout: Command, frames: Path) -> None:
    run = readout("measure", frames, "--calibration", frames / "calibration.json", "--json")
    assert (run.status, run.err) == (0, "")
    assert [row["file"] for row in run.rows] == [f"frame_{k:06d}.png" for k in range(12)]


def test_measure_ends_after_so_many_frames(readout: Command, frames: Path) -> None:
    calibration = frames / "calibration.json"
    run = readout("measure", frames, "--calibration", calibration, "--frames", 3, "--json")
    assert len(run.rows) == 3


def test_measure_the_simulator_with_its_own_scale(readout: Command) -> None:
    run = readout("measure", "simulated", "--frames", 2, "--json")
    assert run.status == 0
    assert run.rows[1]["t_s"] > run.rows[0]["t_s"] == 0.0
    assert run.rows[0]["t_utc"].endswith("Z")
    assert run.rows[0]["x_arcsec"] is not None


def test_a_nominal_scale_from_the_settings_is_announced(
    readout: Command, frames: Path, tmp_path: Path
) -> None:
    settings = tmp_path / "settings.json"
    optics = {"focal_length_mm": 300, "pitch_um": 3.45}
    settings.write_text(json.dumps({"schema": "readout.settings/1", "optics": optics}), "utf-8")
    run = readout("measure", frames, "--settings", settings, "--frames", 1, "--json")
    assert run.status == 0
    assert "nominal" in run.err
    assert float(run.rows[0]["x_u_arcsec"]) > float(run.rows[0]["x_sd_arcsec"])


def test_measure_refuses_what_it_cannot_use_in_one_line(
    readout: Command, frames: Path, tmp_path: Path
) -> None:
    calibration = frames / "calibration.json"
    (tmp_path / "empty").mkdir()
    text = tmp_path / "notes.png"
    text.write_text("not a picture", "utf-8")
    other = tmp_path / "other.json"
    document = json.loads(calibration.read_text("utf-8"))
    other.write_text(json.dumps(document | {"image_width_px": 1280}), "utf-8")
    broken = tmp_path / "broken.json"
    broken.write_text("{", "utf-8")
    table: list[tuple[object, object, str]] = [
        (tmp_path / "none", calibration, "none"),
        (text, calibration, f"{text} holds no frame"),
        (tmp_path / "empty", calibration, "no picture"),
        ("nonsense:3", calibration, "nonsense:3"),
        ("usb:93", calibration, "not connected"),
        (frames, tmp_path / "none.json", "does not exist"),
        (frames, broken, "broken.json"),
        (frames, other, "1280"),
    ]
    for source, file, word in table:
        fails_in_one_line(readout("measure", source, "--calibration", file), word)
    fails_in_one_line(readout("measure", frames), "--calibration")
    fails_in_one_line(
        readout("measure", frames, "--calibration", calibration, "--csv", text / "x.csv"), "x.csv"
    )


def test_a_folder_with_frames_of_two_sizes_keeps_what_came_before(
    readout: Command, frames: Path, tmp_path: Path
) -> None:
    import shutil

    mixed, out = tmp_path / "mixed", tmp_path / "out.csv"
    shutil.copytree(frames, mixed)
    write_picture(mixed / "frame_000003.png", np.zeros((100, 80), np.uint8))
    calibration = frames / "calibration.json"
    run = readout("measure", mixed, "--calibration", calibration, "--csv", out)
    fails_in_one_line(run, "frame_000003.png", "80 × 100", "320 × 240")
    assert len(out.read_text("utf-8").splitlines()) == 1 + 3


# -- live, as far as it gets without beginning (the rest: tests/service/test_live.py) -------------


def test_live_refuses_to_begin_in_one_line(readout: Command, tmp_path: Path) -> None:
    broken = tmp_path / "broken.json"
    broken.write_text("{", "utf-8")
    kept = ("--settings", tmp_path / "settings.json", "--data", tmp_path / "data")
    fails_in_one_line(readout("live", *kept, "--source", "nonsense"), "nonsense")
    fails_in_one_line(readout("live", *kept, "--calibration", broken), "broken.json")
    fails_in_one_line(readout("live", "--settings", broken), "broken.json")
    assert broken.read_text("utf-8") == "{"
    line = readout("live", "--settings", tmp_path / "none.json", "--data", broken / "data")
    fails_in_one_line(line, "--data")
    with socket.socket() as other:
        other.bind(("127.0.0.1", 0))
        other.listen()
        port = other.getsockname()[1]
        fails_in_one_line(readout("live", *kept, "--port", port), str(port), "--port")


def test_live_says_who_named_a_calibration_that_is_missing(
    readout: Command, tmp_path: Path
) -> None:
    settings = tmp_path / "settings.json"
    gone = {"schema": "readout.settings/1", "calibration": str(tmp_path / "gone.json")}
    settings.write_text(json.dumps(gone), "utf-8")
    run = readout("live", "--settings", settings, "--data", tmp_path / "data", "--port", 0)
    fails_in_one_line(run, "gone.json", str(settings), "--calibration")


# -- simulate and cameras -------------------------------------------------------------------------


def test_simulate_writes_frames_with_their_truth(readout: Command, tmp_path: Path) -> None:
    folder = tmp_path / "practice"
    run = readout("simulate", folder, "--frames", 2, "--seed", 9, "--width-px", 320)
    assert run.status == 0
    assert len(list(folder.glob("*.png"))) == len(truth(folder)) == 2
    assert json.loads((folder / "calibration.json").read_text("utf-8"))["image_width_px"] == 320
    fails_in_one_line(readout("simulate", folder), str(folder))
    fails_in_one_line(readout("simulate", tmp_path / "b", "--bits", 99), "bits")


def test_a_simulation_that_is_interrupted_says_what_it_keeps(
    readout: Command, tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    from readout.files import frameset

    def interrupted(path: Path, pixels: Pixels, *, full_scale: int) -> None:
        if path.name == "frame_000003.png":
            raise KeyboardInterrupt
        write_picture(path, pixels, full_scale=full_scale)

    monkeypatch.setattr(frameset, "write_picture", interrupted)
    folder = tmp_path / "practice"
    run = readout("simulate", folder, "--frames", 9, "--width-px", 320)
    assert (run.status, run.out) == (130, "")
    assert run.err == f"readout: ended early: {folder} keeps 3 of 9 pictures with their truth\n"
    assert len(list(folder.glob("*.png"))) == len(truth(folder)) == 3


def test_cameras_lists_what_is_there(readout: Command, monkeypatch: pytest.MonkeyPatch) -> None:
    from readout.capture import cameras
    from readout.capture.cameras import Camera

    monkeypatch.setattr(
        cameras, "list_cameras", lambda: [Camera(2, "a camera", "port-1", "/dev/x")]
    )
    assert "usb:2" in readout("cameras").out
    (row,) = readout("cameras", "--json").rows
    assert row == {"index": 2, "name": "a camera", "identity": "port-1", "path": "/dev/x"}
    monkeypatch.setattr(cameras, "list_cameras", list)
    none = readout("cameras", "--json")
    assert (none.status, none.out) == (0, "")
