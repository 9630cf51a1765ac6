"""Which sources are known to lose detail."""

from __future__ import annotations

from pathlib import Path

import cv2
import pytest

from readout.capture.compression import is_lossy
from readout.errors import BadInput
from readout.files.pictures import write_picture
from tests.capture.streams import SHAPE, scene, write_avi


def test_streams_are_and_the_simulator_is_not() -> None:
    assert is_lossy("http://camera.test/video")
    assert is_lossy("rtsp://camera.test/video")
    assert not is_lossy("simulated")
    assert not is_lossy("usb:0")
    with pytest.raises(BadInput):
        is_lossy("nowhere at all")


@pytest.mark.parametrize("code", ["FFV1", "HFYU", "I420", "mp4v"])
def test_a_video_by_its_coding(tmp_path: Path, code: str) -> None:
    path = tmp_path / ("film.mp4" if code == "mp4v" else "film.avi")
    height, width = SHAPE
    writer = cv2.VideoWriter(
        str(path), cv2.CAP_FFMPEG, cv2.VideoWriter.fourcc(*code), 25.0, (width, height), True
    )
    assert writer.isOpened()
    writer.write(cv2.cvtColor(scene(0), cv2.COLOR_GRAY2BGR))
    writer.release()
    assert is_lossy(str(path)) is (code == "mp4v")


def test_motion_jpeg_is_lossy_and_what_is_no_video_is_not(tmp_path: Path) -> None:
    write_avi(tmp_path / "film.avi", range(2))
    assert is_lossy(str(tmp_path / "film.avi"))
    (tmp_path / "notes.txt").write_text("no video", "utf-8")
    assert not is_lossy(str(tmp_path / "notes.txt"))


def test_a_folder_by_its_pictures(tmp_path: Path) -> None:
    write_picture(tmp_path / "a.png", scene(0))
    assert not is_lossy(str(tmp_path))
    write_picture(tmp_path / "b.jpg", scene(1))
    assert is_lossy(str(tmp_path))
