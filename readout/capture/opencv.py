"""Settings of OpenCV's video input, made before it is first used.

The library reads them from the environment, once; this module is imported before any camera,
stream or video is opened. A setting the user made stands.

On macOS the library asks for the permission to use the camera itself, which it can in the main
thread alone: a camera is opened in that of its own process (written from documents, untested).
"""

from __future__ import annotations

import os

_SETTINGS = {
    # The longest a V4L2 grab may hang, whole seconds; 10 without it. Shorter waits are polled.
    "OPENCV_VIDEOIO_V4L_SELECT_TIMEOUT": "3",
    # Opening a camera by MSMF takes up to 20 s with these transforms.
    "OPENCV_VIDEOIO_MSMF_ENABLE_HW_TRANSFORMS": "0",
    # The library beneath says nothing of its own: a person gets one line, ours.
    "OPENCV_FFMPEG_LOGLEVEL": "-8",
    # Streams over TCP: a lost datagram would be a torn frame.
    "OPENCV_FFMPEG_CAPTURE_OPTIONS": "rtsp_transport;tcp",
}
for _name, _value in _SETTINGS.items():
    os.environ.setdefault(_name, _value)

import cv2  # noqa: E402 (the settings come first: that is what this module is for)

cv2.utils.logging.setLogLevel(cv2.utils.logging.LOG_LEVEL_SILENT)

__all__ = ["cv2", "fourcc_text"]


def fourcc_text(code: float) -> str:
    """The four letters of a format code as OpenCV gives it, "" if it gives none."""
    if code <= 0:
        return ""
    return int(code).to_bytes(4, "little").decode("latin-1").rstrip("\0 ")
