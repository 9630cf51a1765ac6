"""`readout live` as a process of its own, over real sockets: begin, serve, end."""

from __future__ import annotations

import asyncio
import contextlib
import json
import os
import re
import signal
import socket
import subprocess
import sys
import threading
import time
import urllib.error
import urllib.request
from collections.abc import Iterator
from pathlib import Path
from typing import Any

import numpy as np
import pytest
from websockets.asyncio.client import connect

from readout.files.pictures import write_picture

ROOT = Path(__file__).parents[2]
BEGINS_WITHIN_S = 20.0
"""Generous: the figure that is promised is measured apart, on an idle machine."""


def command(folder: Path, *arguments: object) -> list[str]:
    kept = ["--settings", str(folder / "settings.json"), "--data", str(folder / "data")]
    return [sys.executable, "-m", "readout", "live", "--no-browser", *kept, *map(str, arguments)]


ENVIRONMENT = {**os.environ, "PYTHONPATH": str(ROOT)}


class Live:
    """A running service; ``address`` as it printed it."""

    def __init__(self, process: subprocess.Popen[str]) -> None:
        self.process = process
        assert process.stdout is not None
        self.lines = [process.stdout.readline() for _ in range(3)]
        found = re.search(r"http://127\.0\.0\.1:(\d+)/", self.lines[0])
        assert found is not None, self.lines
        self.port = int(found.group(1))
        self.address = found.group(0)

    def get(self, path: str) -> Any:
        with urllib.request.urlopen(self.address + path, timeout=5.0) as answer:
            return json.loads(answer.read())

    def reading(self) -> Any:
        """The newest reading, once there is one."""
        deadline_s = time.monotonic() + BEGINS_WITHIN_S
        while True:
            try:
                return self.get("api/reading")
            except urllib.error.HTTPError as error:
                error.close()
                if time.monotonic() > deadline_s:
                    raise
                time.sleep(0.02)

    def end(self, number: int = signal.SIGINT) -> tuple[int, float, str]:
        """Exit status, how long the end took, and standard error."""
        begin_s = time.monotonic()
        self.process.send_signal(number)
        _, err = self.process.communicate(timeout=20.0)
        return self.process.returncode, time.monotonic() - begin_s, err


@contextlib.contextmanager
def running(folder: Path, *arguments: object) -> Iterator[Live]:
    process = subprocess.Popen(
        command(folder, "--port", 0, *arguments),
        stdout=subprocess.PIPE,
        stderr=subprocess.PIPE,
        text=True,
        env=ENVIRONMENT,
    )
    try:
        yield Live(process)
    finally:
        if process.poll() is None:
            process.kill()
            process.communicate()


@pytest.mark.skipif(sys.platform == "win32", reason="ends by signals")
@pytest.mark.parametrize("number", [signal.SIGINT, signal.SIGTERM])
def test_the_simulator_live_from_the_first_line_to_a_clean_end(tmp_path: Path, number: int) -> None:
    with running(tmp_path) as live:
        assert str(tmp_path / "data") in live.lines[1]
        assert "SIMULATED" in live.lines[2]
        assert live.reading()["x_arcsec"] is not None
        status = live.get("api/status")
        assert (status["state"], status["simulated"]) == ("measuring", True)
        # one who reads on and one who logs do not hold up the end
        log = urllib.request.urlopen(live.address + "api/log?every_s=0", timeout=5.0)
        assert json.loads(log.readline())["x_arcsec"] is not None
        returncode, took_s, err = live.end(number)
        last = log.read().decode()
    assert (returncode, err) == (0, "")
    assert took_s < 2.0
    assert last == "" or last.endswith("\n")


SIGNALLED_EARLY = """
import os, sys
from readout.cli import main

module, number = sys.argv.pop(), int(sys.argv.pop())

class Signals:
    def find_spec(self, name, path=None, target=None):
        if name == module:
            os.kill(os.getpid(), number)

sys.meta_path.insert(0, Signals())  # asked first for each module that is imported
main()
"""


@pytest.mark.skipif(sys.platform == "win32", reason="ends by signals")
@pytest.mark.parametrize("number", [signal.SIGINT, signal.SIGTERM])
@pytest.mark.parametrize("module", ["numpy", "readout.service.live", "uvicorn"])
def test_a_signal_during_the_beginning_ends_it_cleanly(
    tmp_path: Path, number: int, module: str
) -> None:
    arguments = command(tmp_path, "--port", 0)[3:]
    done = subprocess.run(
        [sys.executable, "-c", SIGNALLED_EARLY, *arguments, str(int(number)), module],
        capture_output=True,
        text=True,
        env=ENVIRONMENT,
        timeout=30.0,
    )
    assert (done.returncode, done.stdout, done.stderr) == (0, "", "")


@pytest.mark.skipif(sys.platform == "win32", reason="ends by signals")
def test_a_viewer_that_never_reads_disturbs_nobody_and_does_not_hold_up_the_end(
    tmp_path: Path,
) -> None:
    with running(tmp_path) as live:
        live.reading()
        deaf = socket.socket()
        deaf.setsockopt(socket.SOL_SOCKET, socket.SO_RCVBUF, 1024)
        deaf.connect(("127.0.0.1", live.port))
        deaf.sendall(
            b"GET /api/stream HTTP/1.1\r\nHost: 127.0.0.1:%d\r\nUpgrade: websocket\r\n"
            b"Connection: Upgrade\r\nSec-WebSocket-Version: 13\r\n"
            b"Sec-WebSocket-Key: AAAAAAAAAAAAAAAAAAAAAA==\r\n\r\n" % live.port
        )
        assert deaf.recv(12) == b"HTTP/1.1 101"

        async def healthy() -> list[int]:
            async with connect(f"ws://127.0.0.1:{live.port}/api/stream") as viewer:
                seqs: list[int] = []
                async with asyncio.timeout(20.0):
                    while len(seqs) < 30:
                        message = json.loads(await viewer.recv())
                        if message["kind"] == "readings":
                            assert message["dropped"] == 0
                            seqs += message["seq"]
                return seqs

        seqs = asyncio.run(healthy())
        assert seqs == sorted(set(seqs))
        skipped = seqs[-1] - seqs[0] + 1 - len(seqs)  # by the simulator, on a busy machine
        assert skipped <= live.get("api/status")["missed"]
        returncode, took_s, _ = live.end()
        deaf.close()
    assert returncode == 0
    assert took_s < 2.0


def refused(folder: Path, *arguments: object) -> str:
    """Standard error of a `live` that cannot begin."""
    done = subprocess.run(
        command(folder, *arguments), capture_output=True, text=True, env=ENVIRONMENT, timeout=30.0
    )
    assert done.returncode == 1
    assert done.stdout == ""
    assert done.stderr.startswith("readout: ")
    assert done.stderr.count("\n") == 1
    return done.stderr


def test_what_cannot_be_measured_is_one_line(tmp_path: Path) -> None:
    (tmp_path / "empty").mkdir()
    assert "no picture" in refused(tmp_path, "--port", 0, "--source", tmp_path / "empty")
    assert "not connected" in refused(tmp_path, "--port", 0, "--source", "usb:93")


def test_a_calibration_of_another_size_ends_the_command(tmp_path: Path) -> None:
    from readout.angle import nominal_calibration
    from readout.files.calibration_file import save_calibration

    other = nominal_calibration(
        focal_length_mm=300.0, pitch_um=3.45, image_width_px=1280, image_height_px=720
    )
    save_calibration(tmp_path / "c.json", other)
    line = refused(
        tmp_path, "--port", 0, "--source", "simulated", "--calibration", tmp_path / "c.json"
    )
    assert "1280 × 720" in line
    assert "640 × 480" in line


@pytest.mark.skipif(sys.platform == "win32", reason="ends by signals")
def test_a_camera_of_the_settings_that_is_absent_is_waited_for_never_replaced(
    tmp_path: Path,
) -> None:
    settings = {"schema": "readout.settings/1", "source": "usb:93"}
    (tmp_path / "settings.json").write_text(json.dumps(settings), "utf-8")
    with running(tmp_path) as live:
        deadline_s = time.monotonic() + BEGINS_WITHIN_S
        while (status := live.get("api/status"))["state"] == "opening":
            assert time.monotonic() < deadline_s
            time.sleep(0.05)
        assert (status["state"], status["simulated"]) == ("lost", False)
        assert "not connected" in status["state_detail"]
        with pytest.raises(urllib.error.HTTPError) as health:
            live.get("api/health")
        assert health.value.code == 503
        health.value.close()
        returncode, took_s, err = live.end()
    assert (returncode, err) == (0, "")
    assert took_s < 2.0


@pytest.mark.skipif(sys.platform == "win32", reason="ends by signals")
def test_a_folder_is_played_to_its_end_and_its_last_reading_stays(tmp_path: Path) -> None:
    from readout.simulation import simulate_frames

    frames = tmp_path / "frames"
    frames.mkdir()
    for k, (pixels, _) in enumerate(simulate_frames(frames=3, width_px=320, height_px=240)):
        write_picture(frames / f"{k}.png", pixels)
    with running(tmp_path, "--source", frames) as live:
        deadline_s = time.monotonic() + BEGINS_WITHIN_S
        while live.get("api/status")["state"] != "ended":
            assert time.monotonic() < deadline_s
            time.sleep(0.05)
        assert live.reading()["seq"] == 2
        with urllib.request.urlopen(live.address + "api/frame.jpg", timeout=5.0) as picture:
            assert picture.headers["X-Seq"] == "2"
        assert live.end()[0] == 0


@pytest.mark.skipif(sys.platform == "win32", reason="ends by signals")
def test_measure_ends_by_a_signal_with_its_rows_written(tmp_path: Path) -> None:
    out = tmp_path / "angles.csv"
    process = subprocess.Popen(
        [sys.executable, "-m", "readout", "measure", "simulated", "--csv", str(out)],
        stderr=subprocess.PIPE,
        text=True,
        env=ENVIRONMENT,
    )
    watchdog = threading.Timer(30.0, process.kill)
    watchdog.start()
    while not out.exists() or out.read_text("utf-8").count("\n") < 4:
        time.sleep(0.02)
        assert process.poll() is None
    process.send_signal(signal.SIGINT)
    _, err = process.communicate()
    watchdog.cancel()
    assert (process.returncode, err) == (0, "")
    lines = out.read_text("utf-8").splitlines()
    assert len(lines) >= 4
    assert all(line.count(",") == lines[0].count(",") for line in lines)
    assert np.all([line.startswith("2") for line in lines[1:]])  # whole rows with a time
