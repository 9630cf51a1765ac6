"""A camera plugged into this machine.

To be used in a process of its own: a driver that hangs can then be ended with its process, and
nothing but the reading thread may close a capture that is being read.

The picture is taken as close to the sensor as the camera lets us: 10 or 12 bits of a stated
depth, then 8 bits grey, then the luminance plane of a YUV format, then JPEG pictures decoded one
by one. A 16-bit format comes last of the raw ones, for nothing says how many of its bits are used
nor where they lie. Only where the system converts to colour whatever we ask (Windows, macOS), grey
is made from colour; that code is written from documents and not tested on those systems.
"""

from __future__ import annotations

import os
import time
from pathlib import Path
from typing import Self

import numpy as np

from readout.capture import v4l2
from readout.capture.cameras import Camera, find_camera
from readout.capture.damaged import blank
from readout.capture.held_capture import HeldCapture
from readout.capture.opencv import cv2, fourcc_text
from readout.capture.repeats import RepeatWatch
from readout.capture.timebase import Clock, TimeBase
from readout.capture.v4l2 import SYSTEM
from readout.errors import BadInput, Busy, SourceLost, SourceStalled
from readout.files.pictures import decode_jpeg, luminance
from readout.model import Frame, Pixels, Quality

PREFERRED = ("Y12", "Y10", "GREY", "YUYV", "UYVY", "NV12", "Y16", "MJPG")
_FULL_SCALE = {"Y10": 1023, "Y12": 4095, "Y16": 65535}
_ENOUGH_PER_S = 15.0
_BUFFERS = 3
_OLD_NS = 200_000_000
_STAMP_BELIEVED_NS = 60_000_000_000


def backend() -> int:
    """The one way of this system to open a camera: never left to chance."""
    if SYSTEM == "Linux":
        return int(cv2.CAP_V4L2)
    return int(cv2.CAP_DSHOW if SYSTEM == "Windows" else cv2.CAP_AVFOUNDATION)


def choose_mode(modes: list[v4l2.Mode]) -> v4l2.Mode | None:
    """The mode to measure with: the best format, then the largest picture at 15 frames a second.

    A slower mode only if no size of the format reaches 15; the same list gives the same mode, for
    another size is another calibration. None if no format is known.
    """
    for fourcc in PREFERRED:
        offered = [mode for mode in modes if mode.fourcc == fourcc]
        if offered:
            quick = [m for m in offered if m.frames_per_s >= _ENOUGH_PER_S] or offered
            return max(quick, key=lambda m: (m.width_px * m.height_px, m.frames_per_s))
    return None


class UsbCamera(HeldCapture):
    """Frames of one camera, in grey.

    The stamp is the driver's own where it has one on the same clock (V4L2: when the picture began
    to arrive), else that of the moment right after the grab. A reader slower than the camera
    would measure what waits in the driver's buffers, ever older: pictures older than 0.2 s are
    skipped as long as a newer one is there, and ``seq`` leaves a gap for each.

    Frames of the first second are marked ``settling``, a picture delivered twice ``duplicate``, a
    JPEG that came broken ``damaged``.
    """

    live = True

    def __init__(
        self,
        which: int | str,
        *,
        mode: v4l2.Mode | None = None,
        settle_s: float = 1.0,
        clock: Clock = time.monotonic_ns,
    ) -> None:
        """``which``: index, identity or device path. ``mode`` replaces our own choice."""
        self._which, self._mode, self._clock = str(which), mode, clock
        self._settle_ns = round(settle_s * 1e9)
        self._camera: Camera | None = None
        self._timebase = TimeBase(0, 0)
        self._repeats = RepeatWatch()
        self._seq = 0
        self._t_first_ns: int | None = None
        self._t_last_ns = 0
        self._format = ""
        self._shape = (0, 0)

    @property
    def camera(self) -> Camera | None:
        """What was opened."""
        return self._camera

    @property
    def mode(self) -> v4l2.Mode | None:
        """Format, size and nominal rate in use, as the driver reads them back."""
        if self._capture is None:
            return None
        height, width = self._shape
        return v4l2.Mode(self._format, width, height, self._capture.get(cv2.CAP_PROP_FPS))

    def __enter__(self) -> Self:
        self._camera = camera = find_camera(self._which)
        on_linux = SYSTEM == "Linux"
        if on_linux and not os.access(camera.path, os.R_OK | os.W_OK):
            raise BadInput(
                f"{camera.path}: no permission; add yourself to the group video, log in anew"
            )
        capture = cv2.VideoCapture(camera.path if on_linux else camera.index, backend())
        if not capture.isOpened():
            capture.release()
            raise Busy(f"{camera.name} cannot be opened: close other programs that use it")
        self._capture = capture
        self._negotiate(self._mode or (choose_mode(_modes(camera)) if on_linux else None))
        self._timebase = TimeBase.now(self._clock)
        self._repeats, self._seq = RepeatWatch(), 0
        self._t_first_ns, self._t_last_ns = None, 0
        return self

    def read(self, timeout_s: float) -> Frame:
        """The next frame; see `readout.capture.source.Source`."""
        capture = self._capture
        if capture is None:
            raise SourceLost(f"camera {self._which} is not open: open it first")
        if not self._ready(capture, timeout_s):
            raise self._silent(timeout_s)
        picture, t_mono_ns = self._take(capture)
        for _ in range(_BUFFERS):
            if self._clock() - t_mono_ns <= _OLD_NS or not self._ready(capture, 0.0):
                break
            picture, t_mono_ns = self._take(capture)
            self._seq += 1
        pixels, full_scale, quality = self._pixels(picture)
        self._t_last_ns = t_mono_ns
        if self._t_first_ns is None:
            self._t_first_ns = t_mono_ns
        if t_mono_ns - self._t_first_ns < self._settle_ns:
            quality |= Quality.SETTLING
        seq, self._seq = self._seq, self._seq + 1
        return Frame(
            pixels, seq, t_mono_ns, self._timebase.utc_ns(t_mono_ns), full_scale, quality=quality
        )

    def _negotiate(self, mode: v4l2.Mode | None) -> None:
        """Format, size, rate, no conversion, buffers: in this order, each undoes later ones."""
        capture = self._capture
        if capture is None:
            return
        if mode is not None:
            capture.set(cv2.CAP_PROP_FOURCC, cv2.VideoWriter.fourcc(*mode.fourcc.ljust(4)))
            capture.set(cv2.CAP_PROP_FRAME_WIDTH, mode.width_px)
            capture.set(cv2.CAP_PROP_FRAME_HEIGHT, mode.height_px)
            capture.set(cv2.CAP_PROP_FPS, mode.frames_per_s)
            capture.set(cv2.CAP_PROP_CONVERT_RGB, 0)
            capture.set(cv2.CAP_PROP_BUFFERSIZE, _BUFFERS)
            self._format = fourcc_text(capture.get(cv2.CAP_PROP_FOURCC))
        self._shape = (
            int(capture.get(cv2.CAP_PROP_FRAME_HEIGHT)),
            int(capture.get(cv2.CAP_PROP_FRAME_WIDTH)),
        )

    def _ready(self, capture: cv2.VideoCapture, timeout_s: float) -> bool:
        """True once a frame waits, where the system tells; elsewhere the grab itself is bounded."""
        if SYSTEM != "Linux":
            return timeout_s > 0
        try:
            ready, _ = cv2.VideoCapture.waitAny([capture], max(1, round(timeout_s * 1e9)))
        except cv2.error:
            raise self._lost() from None
        return bool(ready)

    def _take(self, capture: cv2.VideoCapture) -> tuple[np.ndarray, int]:
        """The next buffer and its time on the monotonic clock.

        Grab and retrieve always go together: a second grab would give the same buffer again.
        """
        grabbed = capture.grab()
        t_mono_ns = self._clock()
        retrieved, picture = capture.retrieve() if grabbed else (False, None)
        if not retrieved or picture is None:
            raise self._lost()
        if SYSTEM == "Linux":
            driver_ns = round(capture.get(cv2.CAP_PROP_POS_MSEC) * 1e6)
            if max(self._t_last_ns, t_mono_ns - _STAMP_BELIEVED_NS) < driver_ns <= t_mono_ns:
                t_mono_ns = driver_ns
        return picture, t_mono_ns

    def _silent(self, timeout_s: float) -> SourceStalled | SourceLost:
        if not Path(self._camera.path if self._camera else "").exists():
            return self._lost()
        return SourceStalled(f"camera {self._which}: no frame within {timeout_s:.3g} s")

    def _lost(self) -> SourceLost:
        """Close what has failed: it would go on giving old frames or none."""
        self._let_go()
        return SourceLost(f"camera {self._which} gives no more frames: check plug and cable")

    def _pixels(self, picture: np.ndarray) -> tuple[Pixels, int, Quality]:
        try:
            pixels, full_scale = luminance_of(picture, self._format, self._shape)
        except BadInput:
            return blank(self._shape, 255), 255, Quality.DAMAGED
        return pixels, full_scale, self._repeats.quality_of(pixels)


def luminance_of(picture: np.ndarray, fourcc: str, shape: tuple[int, int]) -> tuple[Pixels, int]:
    """Luminance and full scale of a buffer as the driver gave it.

    ``shape``: (height, width). ``fourcc`` "" or unknown: blue-green-red. Raises BadInput for a
    buffer of another size and for a damaged JPEG.
    """
    height, width = shape
    if fourcc == "MJPG":
        return decode_jpeg(picture.tobytes())
    if fourcc not in PREFERRED:
        return luminance(picture), 255
    kind = np.uint16 if fourcc in _FULL_SCALE else np.uint8
    samples = picture.reshape(-1).view(kind)
    per_pixel = {"YUYV": 2.0, "UYVY": 2.0, "NV12": 1.5}.get(fourcc, 1.0)
    if samples.size != int(height * width * per_pixel):
        raise BadInput(f"a {fourcc} frame of {samples.size} samples is not {width}x{height}")
    first = 1 if fourcc == "UYVY" else 0
    step = 2 if per_pixel == 2.0 else 1
    plane = samples[first::step][: height * width].reshape(height, width)
    return np.ascontiguousarray(plane), _FULL_SCALE.get(fourcc, 255)


def _modes(camera: Camera) -> list[v4l2.Mode]:
    try:
        return v4l2.modes(Path(camera.path))
    except OSError:
        return []
