"""Whether a source loses detail on its way: what JPEG and its like change is no noise of a sensor,
and no claimed uncertainty holds it.
"""

from __future__ import annotations

from pathlib import Path

from readout.capture.open import SourceKind, describe_source

LOSSY = (
    "the pictures are compressed with loss: readings may be off by more than the noise claimed; "
    "for precise work store PNG, TIFF or uncompressed video"
)

_WHOLE = ("", "Y800", "GREY", "Y16", "I420", "IYUV", "YUY2", "UYVY", "RAW", "FFV1", "HFYU", "FFVH")


def is_lossy(source: str) -> bool:
    """True if ``source`` is known to be compressed with loss; of a camera it is not known before.

    A video file is opened for it. Raises BadInput for a text that names no source.
    """
    described = describe_source(source)
    match described.kind:
        case SourceKind.MJPEG | SourceKind.STREAM:
            return True
        case SourceKind.VIDEO:
            return _coding(Path(described.where)).upper() not in _WHOLE
        case SourceKind.FOLDER:
            suffixes = (path.suffix.lower() for path in Path(described.where).iterdir())
            return any(suffix in (".jpg", ".jpeg") for suffix in suffixes)
        case _:
            return False


def _coding(path: Path) -> str:
    """Four letters for the coding of a video; none where it is raw or cannot be opened."""
    from readout.capture.opencv import cv2, fourcc_text

    capture = cv2.VideoCapture(str(path), cv2.CAP_FFMPEG)
    try:
        return fourcc_text(capture.get(cv2.CAP_PROP_FOURCC)) if capture.isOpened() else ""
    finally:
        capture.release()
