"""A stream read by the video library: RTSP and whatever else it knows.

Not for precise work: such streams are coded from frame to frame, and a lost piece is filled
from the frame before without a word. An MJPEG stream has a reader of its own.
"""

from __future__ import annotations

import time
from typing import Self

from readout.capture.held_capture import HeldCapture
from readout.capture.opencv import cv2
from readout.capture.repeats import RepeatWatch
from readout.capture.source_name import source_name
from readout.capture.timebase import Clock, TimeBase
from readout.errors import SourceLost
from readout.files.pictures import luminance
from readout.model import Frame


class StreamSource(HeldCapture):
    """Frames of a network stream, stamped on arrival.

    The video library bounds each wait by the time set at opening; ``timeout_s`` of a read cannot
    shorten it, and after one failure it gives no more frames.
    """

    live = True

    def __init__(
        self,
        url: str,
        *,
        open_timeout_s: float = 5.0,
        read_timeout_s: float = 3.0,
        clock: Clock = time.monotonic_ns,
    ) -> None:
        """Nothing is opened yet."""
        self._url, self._name, self._clock = url, source_name(url), clock
        self._timeouts_ms = round(open_timeout_s * 1e3), round(read_timeout_s * 1e3)
        self._timebase = TimeBase(0, 0)
        self._repeats = RepeatWatch()
        self._seq = 0

    def __enter__(self) -> Self:
        open_ms, read_ms = self._timeouts_ms
        bounds = [cv2.CAP_PROP_OPEN_TIMEOUT_MSEC, open_ms, cv2.CAP_PROP_READ_TIMEOUT_MSEC, read_ms]
        capture = cv2.VideoCapture(self._url, cv2.CAP_FFMPEG, bounds)
        if not capture.isOpened():
            capture.release()
            raise SourceLost(f"{self._name} cannot be opened: check address and camera")
        self._capture = capture
        self._timebase = TimeBase.now(self._clock)
        self._repeats, self._seq = RepeatWatch(), 0
        return self

    def read(self, timeout_s: float) -> Frame:  # noqa: ARG002 (see the class)
        """The next frame; see `readout.capture.source.Source`."""
        if self._capture is None:
            raise SourceLost(f"{self._name} is not open: open it first")
        grabbed = self._capture.grab()
        t_mono_ns = self._clock()
        retrieved, picture = self._capture.retrieve() if grabbed else (False, None)
        if not retrieved or picture is None:
            self._let_go()
            raise SourceLost(f"{self._name} gives no more frames: check the camera")
        pixels = luminance(picture)
        frame = Frame(
            pixels,
            self._seq,
            t_mono_ns,
            self._timebase.utc_ns(t_mono_ns),
            full_scale=255,
            quality=self._repeats.quality_of(pixels),
        )
        self._seq += 1
        return frame
