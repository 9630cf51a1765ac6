"""A video file as a source: files written by OpenCV's own writer."""

from __future__ import annotations

from pathlib import Path

import cv2
import numpy as np
import pytest

from readout.capture.video import VideoSource
from readout.errors import BadInput
from readout.model import Frame, Quality
from tests.capture.streams import SHAPE, scene, write_avi
from tests.contracts import one_line, read_to_end


def read_all(path: Path) -> list[Frame]:
    with VideoSource(path) as source:
        return read_to_end(source)


def write(path: Path, codec: str, pictures: list[np.ndarray], *, depth: int = cv2.CV_8U) -> None:
    height, width = pictures[0].shape
    options = [cv2.VIDEOWRITER_PROP_IS_COLOR, 0, cv2.VIDEOWRITER_PROP_DEPTH, depth]
    code = cv2.VideoWriter.fourcc(*codec)
    writer = cv2.VideoWriter(str(path), cv2.CAP_FFMPEG, code, 20.0, (width, height), options)
    assert writer.isOpened()
    for picture in pictures:
        writer.write(picture)
    writer.release()


def test_motion_jpeg_gives_each_frame_at_its_time(tmp_path: Path):
    write_avi(tmp_path / "a.avi", range(6), frames_per_s=25.0)
    frames = read_all(tmp_path / "a.avi")
    assert [f.t_mono_ns for f in frames] == [k * 40_000_000 for k in range(6)]
    assert {f.name for f in frames} == {"a.avi"}
    for number, frame in enumerate(frames):
        error = frame.pixels.astype(float) - scene(number)
        assert abs(error.mean()) < 0.5
        assert error.std() < 2.0  # JPEG of the writer's quality; a shifted order would be >= 10
        assert frame.quality is Quality.OK


@pytest.mark.parametrize(("factor", "kind"), [(1, np.uint8), (257, np.uint16)])
def test_lossless_grey_is_exact(tmp_path: Path, factor: int, kind: type):
    """FFV1 (RFC 9043) is lossless: what was written must come back to the last bit."""
    pictures = [scene(k).astype(kind) * kind(factor) for k in range(4)]
    depth = cv2.CV_8U if kind is np.uint8 else cv2.CV_16U
    write(tmp_path / "a.mkv", "FFV1", pictures, depth=depth)
    frames = read_all(tmp_path / "a.mkv")
    assert len(frames) == 4
    for frame, picture in zip(frames, pictures, strict=True):
        np.testing.assert_array_equal(frame.pixels, picture)
        assert frame.full_scale == np.iinfo(kind).max


def test_luminance_plane_of_a_coded_video(tmp_path: Path):
    write(tmp_path / "a.mp4", "mp4v", [scene(3)] * 4)
    for frame in read_all(tmp_path / "a.mp4"):
        assert frame.pixels.shape == SHAPE
        # limited range 16..235 is left as it is: 219/255 of the contrast, plus 16
        expected = 16 + scene(3) * (219 / 255)
        assert np.abs(frame.pixels - expected).mean() < 3


def test_a_torn_picture_is_flagged_not_filled_up(tmp_path: Path):
    write_avi(tmp_path / "a.avi", range(6))
    data = (tmp_path / "a.avi").read_bytes()
    starts = [k for k in range(len(data)) if data.startswith(b"\xff\xd8\xff", k)]
    assert len(starts) == 6
    torn = bytearray(data)
    half, end = (starts[2] + starts[3]) // 2, starts[3] - 8  # the next chunk's head has 8 bytes
    torn[half:end] = bytes(end - half)
    (tmp_path / "torn.avi").write_bytes(torn)
    (tmp_path / "short.avi").write_bytes(data[: starts[3] + 300])
    for name, bad in (("torn.avi", 2), ("short.avi", 3)):
        frames = read_all(tmp_path / name)
        flags = [frame.quality for frame in frames]
        assert [k for k, flag in enumerate(flags) if flag is Quality.DAMAGED] == [bad], name
        assert frames[bad].pixels.shape == SHAPE
        assert frames[bad].pixels.max() == 0


def test_refused_at_opening(tmp_path: Path):
    (tmp_path / "text.avi").write_text("this is no video")
    (tmp_path / "empty.mp4").write_bytes(b"")
    for name, message in (
        ("text.avi", "is no video readout can read"),
        ("empty.mp4", "is no video readout can read"),
        ("nothere.avi", "does not exist"),
    ):
        with pytest.raises(BadInput, match=message) as caught:
            VideoSource(tmp_path / name).__enter__()
        assert name in str(caught.value)
        one_line(caught.value)


def test_refusals_leave_standard_error_alone(tmp_path: Path, capfd: pytest.CaptureFixture[str]):
    (tmp_path / "text.mp4").write_bytes(b"\0\0\0\x20ftypisom" + bytes(40))
    with pytest.raises(BadInput):
        VideoSource(tmp_path / "text.mp4").__enter__()
    assert capfd.readouterr().err == ""
