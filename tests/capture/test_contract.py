"""Every source against the one contract."""

from __future__ import annotations

import contextlib
from collections.abc import Callable
from pathlib import Path

import cv2
import numpy as np
import pytest

from readout.capture import usb
from readout.capture.cameras import Camera
from readout.capture.folder import FolderSource
from readout.capture.mjpeg import MjpegSource
from readout.capture.paced import PacedSource
from readout.capture.simulated import SimulatedSource
from readout.capture.source import Source
from readout.capture.stream import StreamSource
from readout.capture.usb import UsbCamera
from readout.capture.v4l2 import Mode
from readout.capture.video import VideoSource
from readout.files.pictures import decode_picture, write_picture
from tests.capture.fakes import FakeCapture, FakeClock, ticking, video_capture
from tests.capture.streams import SHAPE, Client, jpeg, part, scene, serving, write_avi
from tests.contracts import source_contract


class Workbench:
    """Makes one source of each kind and keeps up what it needs while the test runs."""

    def __init__(
        self, folder: Path, patch: pytest.MonkeyPatch, stack: contextlib.ExitStack
    ) -> None:
        self.folder, self.patch, self.stack = folder, patch, stack

    def pictures(self) -> Source:
        for number in range(4):
            write_picture(self.folder / f"{number}.png", scene(number))
        return FolderSource(self.folder)

    def video(self) -> Source:
        write_avi(self.folder / "a.avi", range(4))
        return VideoSource(self.folder / "a.avi")

    def paced(self) -> Source:
        clock = FakeClock()
        return PacedSource(self.video(), clock=clock, sleep=clock.sleep)

    def mjpeg(self) -> Source:
        def script(client: Client) -> None:
            client.begin()
            client.send(b"".join(part(jpeg(number)) for number in range(4)))
            client.hang()

        return MjpegSource(self.stack.enter_context(serving(script)))

    def stream(self) -> Source:
        self.video()
        data = (self.folder / "a.avi").read_bytes()

        def script(client: Client) -> None:
            client.begin("video/x-msvideo")
            client.send(data)

        return StreamSource(self.stack.enter_context(serving(script)))

    def camera(self) -> Source:
        (self.folder / "video0").touch()
        camera = Camera(0, "Bench", "bench", str(self.folder / "video0"))
        fake = FakeCapture([scene(number) for number in range(4)])
        self.patch.setattr(cv2, "VideoCapture", video_capture(fake))
        self.patch.setattr(usb, "SYSTEM", "Linux")
        self.patch.setattr(usb, "find_camera", lambda which: camera)
        mode = Mode("GREY", SHAPE[1], SHAPE[0], 30.0)
        return UsbCamera(0, mode=mode, clock=ticking())

    def simulated(self) -> Source:
        clock = FakeClock()
        return SimulatedSource(5, clock=clock, utc=lambda: clock() + 10**18, sleep=clock.sleep)


KINDS: dict[str, tuple[Callable[[Workbench], Source], bool, float]] = {
    # maker, live, greatest mean error of a pixel against the scene that was put in
    "folder": (Workbench.pictures, False, 0.0),
    "video": (Workbench.video, False, 2.0),
    "paced": (Workbench.paced, False, 2.0),
    "mjpeg": (Workbench.mjpeg, True, 2.0),
    "stream": (Workbench.stream, True, 3.0),
    "camera": (Workbench.camera, True, 0.0),
}


@pytest.fixture
def workbench(tmp_path: Path, monkeypatch: pytest.MonkeyPatch):
    with contextlib.ExitStack() as stack:
        yield Workbench(tmp_path, monkeypatch, stack)


@pytest.mark.parametrize("kind", KINDS)
def test_every_source_keeps_the_contract(workbench: Workbench, kind: str):
    make, live, greatest_error = KINDS[kind]
    source = make(workbench)
    assert source.live == live
    frames = source_contract(source, frames=4)
    assert len(frames) == 4
    for number, frame in enumerate(frames):
        error = np.abs(frame.pixels - scene(number).astype(float)).mean()
        assert error <= greatest_error, number


def test_the_simulator_keeps_it_too(workbench: Workbench):
    frames = source_contract(workbench.simulated(), frames=4)
    assert len({frame.pixels.tobytes() for frame in frames}) == 4


def test_the_pictures_of_this_test_are_told_apart():
    """The error allowed above would show two frames exchanged: neighbours differ by far more."""
    for number in range(3):
        apart = np.abs(scene(number + 1).astype(float) - scene(number)).mean()
        assert apart > 9
        coded = decode_picture(jpeg(number))[0].astype(float)
        assert np.abs(coded - scene(number)).mean() < 2
