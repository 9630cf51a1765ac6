"""A source from what a person writes."""

from __future__ import annotations

import re
from dataclasses import dataclass
from enum import StrEnum
from pathlib import Path

from readout.capture.source import Source
from readout.capture.source_name import encodable, source_name
from readout.errors import BadInput

ALLOWED = (
    "simulated, usb:N or usb:IDENTITY, a video file, a folder of pictures, "
    "http://… (MJPEG) or rtsp://…"
)


class SourceKind(StrEnum):
    """Where frames come from."""

    SIMULATED = "simulated"
    USB = "usb"
    VIDEO = "video"
    FOLDER = "folder"
    MJPEG = "mjpeg"
    STREAM = "stream"


_AT_THEIR_OWN_TIME = (
    SourceKind.SIMULATED,
    SourceKind.USB,
    SourceKind.MJPEG,
    SourceKind.STREAM,
)
_SCHEMES = {
    "http": SourceKind.MJPEG,
    "https": SourceKind.MJPEG,
    "rtsp": SourceKind.STREAM,
    "rtsps": SourceKind.STREAM,
}


@dataclass(frozen=True, slots=True)
class SourceDescription:
    """What can be said about a source before it is opened.

    ``where``: the part of the text that says which one. ``title``: a name for people, as
    `readout.capture.source_name` makes it.
    """

    kind: SourceKind
    where: str
    title: str

    @property
    def live(self) -> bool:
        """True if frames come at their own time and a lost source may come back."""
        return self.kind in _AT_THEIR_OWN_TIME

    @property
    def simulated(self) -> bool:
        return self.kind is SourceKind.SIMULATED


def describe_source(text: str) -> SourceDescription:
    """Kind and name of the source ``text`` asks for; nothing is opened.

    Raises BadInput, with the list of what may be given, for anything else.
    """
    text = text.strip()
    scheme = re.match(r"[a-zA-Z][a-zA-Z0-9+.-]+(?=://)", text)
    if text == "simulated":
        return SourceDescription(SourceKind.SIMULATED, "", "simulated")
    if text.startswith("usb:") and text != "usb:":
        return SourceDescription(SourceKind.USB, text[4:], f"camera {encodable(text[4:])}")
    if scheme and (kind := _SCHEMES.get(scheme.group().lower())):
        return SourceDescription(kind, text, f"stream {source_name(text)}")
    path = Path(text).expanduser()
    if text and path.is_dir():
        title = f"folder {encodable(path.resolve().name)}"
        return SourceDescription(SourceKind.FOLDER, str(path), title)
    if text and path.is_file():
        return SourceDescription(SourceKind.VIDEO, str(path), f"video {encodable(path.name)}")
    raise BadInput(f"there is no file or source {source_name(text)!r}; give {ALLOWED}")


def open_source(
    text: str, *, paced: bool = False, seed: int = 0, frames_per_s: float = 30.0
) -> Source:
    """The source ``text`` asks for, to be entered with ``with``.

    ``paced``: a folder or video comes at its own speed instead of the reader's. ``seed`` and
    ``frames_per_s``: of the simulator. A camera is meant to be opened in a process of its own.
    Raises BadInput as `describe_source` does; what is missing shows when the source is entered.
    """
    described = describe_source(text)
    source = _made(described, seed, frames_per_s)
    if paced and not described.live:
        from readout.capture.paced import PacedSource

        return PacedSource(source)
    return source


def _made(described: SourceDescription, seed: int, frames_per_s: float) -> Source:
    """Each kind imports what it needs: the video library takes a third of a second."""
    match described.kind:
        case SourceKind.SIMULATED:
            from readout.capture.simulated import SimulatedSource

            return SimulatedSource(seed, frames_per_s)
        case SourceKind.USB:
            from readout.capture.usb import UsbCamera

            return UsbCamera(described.where)
        case SourceKind.VIDEO:
            from readout.capture.video import VideoSource

            return VideoSource(described.where)
        case SourceKind.FOLDER:
            from readout.capture.folder import FolderSource

            return FolderSource(described.where)
        case SourceKind.MJPEG:
            from readout.capture.mjpeg import MjpegSource

            return MjpegSource(described.where)
        case SourceKind.STREAM:
            from readout.capture.stream import StreamSource

            return StreamSource(described.where)
