"""A video file, frame by frame, with the times the file gives."""

from __future__ import annotations

from pathlib import Path
from typing import Self

import numpy as np

from readout.capture.damaged import blank
from readout.capture.held_capture import HeldCapture
from readout.capture.opencv import cv2, fourcc_text
from readout.errors import BadInput, SourceEnded, SourceLost
from readout.files.pictures import decode_jpeg, luminance
from readout.model import Frame, Pixels, Quality

_MOTION_JPEG = "MJPG"
# Formats whose first plane is the luminance and comes out whole when nothing is converted.
_LUMINANCE_FIRST = ("Y800", "I420", "Y42B", "444P", "NV12", "Y1\0\x10")


class VideoSource(HeldCapture):
    """Every frame of a video file once, at the reader's pace; none is skipped.

    Luminance is taken as it is stored: from motion JPEG by decoding each picture alone (a damaged
    one is then seen: the video library would fill it up from the frame before), from other
    formats as the first plane; only formats without one go through colour. Limited range (16 to
    235) is not stretched.

    Times count from the first frame; UTC is the file's modification time, counted on.
    """

    live = False

    def __init__(self, path: Path | str) -> None:
        """Nothing is opened yet."""
        self._path = Path(path)
        self._packets = False
        self._seq = 0
        self._t_first_ns: int | None = None
        self._t_last_ns = 0
        self._utc_ns = 0

    def __enter__(self) -> Self:
        if not self._path.exists():
            raise BadInput(f"{self._path} does not exist: check the name")
        self._utc_ns = self._path.stat().st_mtime_ns
        self._capture = self._open()
        self._packets = fourcc_text(self._capture.get(cv2.CAP_PROP_FOURCC)) == _MOTION_JPEG
        if self._packets:
            self._capture.set(cv2.CAP_PROP_FORMAT, -1)  # the packets as they are
        elif _pixel_format(self._capture) in _LUMINANCE_FIRST:
            self._capture.set(cv2.CAP_PROP_CONVERT_RGB, 0)
        self._seq, self._t_first_ns, self._t_last_ns = 0, None, 0
        return self

    def read(self, timeout_s: float) -> Frame:  # noqa: ARG002 (a frame is there or is not)
        """The next frame; see `readout.capture.source.Source`."""
        if self._capture is None:
            raise SourceLost(f"{self._path} is not open: open it first")
        if not self._capture.grab():
            if self._seq == 0:
                raise BadInput(
                    f"{self._path} holds no frame that can be read: give a video (AVI, MKV or MP4) "
                    "or a folder of pictures"
                )
            raise SourceEnded(f"{self._path}: all {self._seq} frames have been read")
        t_ns = self._time_ns()
        found, picture = self._capture.retrieve()
        pixels, full_scale, quality = self._pixels(picture if found else None)
        frame = Frame(
            pixels, self._seq, t_ns, self._utc_ns + t_ns, full_scale, self._path.name, quality
        )
        self._seq += 1
        return frame

    def _open(self) -> cv2.VideoCapture:
        capture = cv2.VideoCapture(str(self._path), cv2.CAP_FFMPEG)
        if not capture.isOpened():
            capture.release()
            raise BadInput(f"{self._path} is no video readout can read: give AVI, MKV or MP4")
        capture.set(cv2.CAP_PROP_ORIENTATION_AUTO, 0)
        return capture

    def _time_ns(self) -> int:
        """Time of the frame just grabbed since the first one, never falling."""
        t_ns = round(self._capture.get(cv2.CAP_PROP_POS_MSEC) * 1e6) if self._capture else 0
        if self._t_first_ns is None:
            self._t_first_ns = t_ns
        self._t_last_ns = max(self._t_last_ns, t_ns - self._t_first_ns)
        return self._t_last_ns

    def _pixels(self, picture: np.ndarray | None) -> tuple[Pixels, int, Quality]:
        if picture is not None and self._packets:
            try:
                return *decode_jpeg(picture.tobytes()), Quality.OK
            except BadInput:
                picture = None
        if picture is None:
            return blank(self._shape(), 255), 255, Quality.DAMAGED
        pixels = luminance(picture)
        return pixels, 65535 if pixels.dtype == np.uint16 else 255, Quality.OK

    def _shape(self) -> tuple[int, int]:
        if self._capture is None:
            return 0, 0
        get = self._capture.get
        return int(get(cv2.CAP_PROP_FRAME_HEIGHT)), int(get(cv2.CAP_PROP_FRAME_WIDTH))


def _pixel_format(capture: cv2.VideoCapture) -> str:
    code = capture.get(cv2.CAP_PROP_CODEC_PIXEL_FORMAT)
    return int(code).to_bytes(4, "little").decode("latin-1") if code > 0 else ""
