"""What OpenCV is told before it is imported."""

from __future__ import annotations

import os
import subprocess
import sys
from pathlib import Path

ROOT = Path(__file__).parents[2]


def environment_after_import(**given: str) -> dict[str, str]:
    """The settings of the library in a process of its own, from which those here are taken away."""
    script = (
        "import os, readout.capture.opencv\n"
        "for name, value in os.environ.items():\n"
        "    if name.startswith('OPENCV'): print(f'{name}={value}')"
    )
    clean = {name: value for name, value in os.environ.items() if not name.startswith("OPENCV")}
    done = subprocess.run(
        [sys.executable, "-c", script],
        capture_output=True,
        text=True,
        check=True,
        env=clean | {"PYTHONPATH": str(ROOT)} | given,
    )
    return dict(line.split("=", 1) for line in done.stdout.splitlines())


def test_the_library_asks_for_the_camera_itself_on_macos() -> None:
    """With OPENCV_AVFOUNDATION_SKIP_AUTH nobody would, and no camera would open."""
    settings = environment_after_import()
    assert "OPENCV_AVFOUNDATION_SKIP_AUTH" not in settings
    assert settings["OPENCV_VIDEOIO_V4L_SELECT_TIMEOUT"] == "3"


def test_a_setting_of_the_user_stands() -> None:
    settings = environment_after_import(OPENCV_VIDEOIO_V4L_SELECT_TIMEOUT="7")
    assert settings["OPENCV_VIDEOIO_V4L_SELECT_TIMEOUT"] == "7"
