"""A stream over HTTP and a video file, through `readout measure` and `readout live`, to the truth.

The frames are simulated; what is real is the way they take: JPEG, a socket or a file, decoding,
sighting, calibration, and the rows or messages that come out.
"""

from __future__ import annotations

import csv
import json
import subprocess
import sys
import time
from collections.abc import Iterator
from pathlib import Path

import cv2
import numpy as np
import pytest

from readout.angle import Calibration
from readout.capture.compression import LOSSY
from readout.files.calibration_file import save_calibration
from readout.model import Pixels
from readout.simulation import SimulatedFrames, simulate_frames
from tests.capture.streams import Client, part, serving
from tests.service.test_live import ENVIRONMENT, running

TOLD_LOSSY = f"readout: {LOSSY}\n"

FRAMES = 20
JPEG_QUALITY = 95
WITHIN_PX = 0.01
"""JPEG of quality 95 costs about 0.0016 px at random and 0.0003 px at most otherwise per line
(measured for a line of 256 rows); 0.01 px is six times that."""


@pytest.fixture(scope="module")
def made() -> SimulatedFrames:
    return simulate_frames(frames=FRAMES, seed=21, frames_per_s=25.0, rotation_deg=1.2)


@pytest.fixture
def calibration(made: SimulatedFrames, tmp_path: Path) -> Path:
    path = tmp_path / "calibration.json"
    save_calibration(path, made.calibration)
    return path


def pictures(made: SimulatedFrames) -> Iterator[Pixels]:
    for pixels, _ in made:
        yield pixels


def tolerance_arcsec(calibration: Calibration) -> float:
    return WITHIN_PX * max(calibration.scale_arcsec_per_px)


def test_a_video_file_is_measured_frame_by_frame(
    made: SimulatedFrames, calibration: Path, tmp_path: Path
) -> None:
    video, out = tmp_path / "mirror.avi", tmp_path / "angles.csv"
    code = cv2.VideoWriter.fourcc(*"MJPG")
    writer = cv2.VideoWriter(
        str(video),
        cv2.CAP_OPENCV_MJPEG,
        code,
        25.0,
        (640, 480),
        [cv2.VIDEOWRITER_PROP_QUALITY, JPEG_QUALITY],
    )
    assert writer.isOpened()
    for pixels in pictures(made):
        writer.write(cv2.cvtColor(pixels, cv2.COLOR_GRAY2BGR))
    writer.release()
    done = subprocess.run(
        [
            *(sys.executable, "-m", "readout", "measure", str(video)),
            *("--calibration", str(calibration), "--csv", str(out)),
        ],
        capture_output=True,
        text=True,
        env=ENVIRONMENT,
        timeout=60.0,
    )
    assert (done.returncode, done.stdout, done.stderr) == (0, "", TOLD_LOSSY)
    with out.open(encoding="utf-8") as file:
        rows = list(csv.DictReader(file))
    assert len(rows) == FRAMES
    for row, (_, truth) in zip(rows, made, strict=True):
        assert float(row["t_s"]) == pytest.approx(truth.t_s, abs=1e-3)
        assert float(row["x_arcsec"]) == pytest.approx(
            truth.x_arcsec, abs=tolerance_arcsec(made.calibration)
        )
        assert float(row["y_arcsec"]) == pytest.approx(
            truth.y_arcsec, abs=tolerance_arcsec(made.calibration)
        )


def test_a_stream_over_http_is_measured_and_served_live(
    made: SimulatedFrames, calibration: Path, tmp_path: Path
) -> None:
    """The server shows one frame after the other, for ever; each reading must be one of them."""
    options = [cv2.IMWRITE_JPEG_QUALITY, JPEG_QUALITY]
    parts = [part(cv2.imencode(".jpg", p, options)[1].tobytes()) for p in pictures(made)]
    truths = np.array([(t.x_arcsec, t.y_arcsec) for _, t in made])
    asked: list[int] = []

    def play(client: Client) -> None:
        asked.append(1)
        client.begin()
        while True:  # until the client leaves: writing then fails
            for data in parts:
                client.send(data)
                time.sleep(0.04)

    with serving(play) as url:
        done = subprocess.run(
            [
                *(sys.executable, "-m", "readout", "measure", url, "--json"),
                *("--calibration", str(calibration), "--frames", "8"),
            ],
            capture_output=True,
            text=True,
            env=ENVIRONMENT,
            timeout=60.0,
        )
        assert (done.returncode, done.stderr) == (0, TOLD_LOSSY)
        measured = [json.loads(line) for line in done.stdout.splitlines()]
        assert len(measured) == 8
        with running(tmp_path, "--source", url, "--calibration", calibration) as live:
            measured.append(live.reading())
            assert live.get("api/status")["source_name"].endswith("/camera")
            returncode, _, err = live.end()
            assert (returncode, err) == (0, TOLD_LOSSY)
    assert len(asked) == 2
    for row in measured:
        error = truths - np.array([row["x_arcsec"], row["y_arcsec"]])
        nearest = np.abs(error).max(axis=1).min()
        assert nearest < tolerance_arcsec(made.calibration)
