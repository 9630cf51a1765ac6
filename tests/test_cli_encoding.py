"""What the commands write is UTF-8, also where the system says otherwise."""

from __future__ import annotations

import os
import subprocess
import sys
from pathlib import Path

import numpy as np
import pytest

from readout.files.frameset import write_frameset
from readout.files.pictures import write_picture
from readout.simulation import simulate_frames

ROOT = Path(__file__).parents[1]


def readout(folder: Path, *arguments: object) -> subprocess.CompletedProcess[bytes]:
    """A command as on a Windows whose output is redirected: an old code page (Python, "-X utf8=0").

    ``PYTHONIOENCODING`` stands for the code page.
    """
    environment = os.environ | {
        "PYTHONIOENCODING": "cp1252",
        "PYTHONPATH": str(ROOT),
        "XDG_CONFIG_HOME": str(folder),
    }
    return subprocess.run(
        [sys.executable, "-m", "readout", *map(str, arguments)],
        capture_output=True,
        env=environment,
        cwd=folder,
        timeout=60.0,
    )


@pytest.fixture(scope="module")
def folder(tmp_path_factory: pytest.TempPathFactory) -> Path:
    folder = tmp_path_factory.mktemp("set")
    made = simulate_frames(frames=2, seed=4, width_px=320, height_px=240)
    write_frameset(folder / "fr", made, calibration=made.calibration, full_scale=made.full_scale)
    return folder


def test_angles_for_people(folder: Path) -> None:
    done = readout(folder, "measure", "fr", "--calibration", "fr/calibration.json")
    assert (done.returncode, done.stderr) == (0, b"")
    lines = done.stdout.decode("utf-8").splitlines()
    assert len(lines) == 2
    assert all("″ ± " in line for line in lines)


def test_help_and_refusals(folder: Path) -> None:
    assert "http://…" in readout(folder, "live", "--help").stdout.decode("utf-8")
    done = readout(folder, "measure", "nowhere", "--calibration", "fr/calibration.json")
    assert done.returncode == 1
    assert "http://…" in done.stderr.decode("utf-8")


@pytest.mark.skipif(sys.platform != "linux", reason="elsewhere names of files are text")
def test_a_name_that_is_no_text_is_spelt_out(folder: Path) -> None:
    odd = folder / os.fsdecode(b"odd\xff.png")
    write_picture(odd, np.zeros((48, 64), np.uint8))
    done = readout(folder, "locate", odd)
    assert (done.returncode, done.stderr) == (0, b"")
    assert b"odd\\udcff.png" in done.stdout
