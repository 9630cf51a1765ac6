"""Which cameras are there, and what tells one from another.

An index is not an identity: it changes with the order of plugging in. On Linux the identity is
the name below /dev/v4l/by-id if the camera carries a serial number no other one has, else the
one below /dev/v4l/by-path, which names the socket it is plugged into. On Windows and macOS it is
the device path (written from documents, not tested on those systems).
"""

from __future__ import annotations

from collections import Counter
from collections.abc import Callable
from dataclasses import dataclass
from pathlib import Path

from readout.capture import v4l2
from readout.capture.v4l2 import SYSTEM
from readout.errors import SourceLost


@dataclass(frozen=True, slots=True)
class Camera:
    """A camera that can be opened now.

    ``index``: as in ``usb:N``, valid until something is plugged. ``identity``: as in
    ``usb:IDENTITY``, the same tomorrow. ``path``: what the system calls the device.
    """

    index: int
    name: str
    identity: str
    path: str


def list_cameras() -> list[Camera]:
    """The cameras connected now, by index."""
    if SYSTEM == "Linux":
        return list_linux_cameras()
    return _list_other_cameras()


def find_camera(which: str) -> Camera:
    """The camera with this index, identity or device path; never another one in its place.

    Raises SourceLost, saying which cameras there are, if it is not connected.
    """
    cameras = list_cameras()
    for camera in cameras:
        if which in (str(camera.index), camera.identity, camera.path):
            return camera
    present = ", ".join(f"usb:{c.index} ({c.name}, usb:{c.identity})" for c in cameras) or "none"
    raise SourceLost(
        f"camera {which} is not connected: plug it in or choose another; found: {present}"
    )


def list_linux_cameras(
    dev: Path = Path("/dev"),
    sysfs: Path = Path("/sys/class/video4linux"),
    captures_video: Callable[[Path], bool] = v4l2.captures_video,
) -> list[Camera]:
    """The video devices below ``dev`` that give pictures; the arguments are for tests."""
    nodes = sorted(
        (int(node.name.removeprefix("video")), node)
        for node in dev.glob("video*")
        if node.name.removeprefix("video").isdigit()
    )
    found = [
        (index, node, sysfs / node.name)
        for index, node in nodes
        if _gives_pictures(node, sysfs / node.name, captures_video)
    ]
    serials = [_serial(entry) for _, _, entry in found]
    count = Counter(serials)
    return [
        Camera(
            index,
            _text(entry / "name") or node.name,
            _identity(dev, node, entry, by_id=bool(serial) and count[serial] == 1),
            str(node),
        )
        for (index, node, entry), serial in zip(found, serials, strict=True)
    ]


def _gives_pictures(node: Path, entry: Path, captures_video: Callable[[Path], bool]) -> bool:
    try:
        return captures_video(node)
    except PermissionError:  # list it: opening it will say what is missing
        return _text(entry / "index") in ("", "0")
    except OSError:
        return False


def _serial(entry: Path) -> str:
    """Vendor, product and serial number of the USB device, "" where one has no serial."""
    device = (entry / "device").resolve().parent
    serial = _text(device / "serial")
    return f"{_text(device / 'idVendor')}:{_text(device / 'idProduct')}:{serial}" if serial else ""


def _identity(dev: Path, node: Path, entry: Path, *, by_id: bool) -> str:
    for folder in ("by-id", "by-path") if by_id else ("by-path",):
        for link in sorted((dev / "v4l" / folder).glob("*")):
            if link.resolve() == node.resolve():
                return link.name
    return f"port-{(entry / 'device').resolve().name}"  # no udev on this machine


def _text(file: Path) -> str:
    try:
        return file.read_text(encoding="utf-8", errors="replace").strip()
    except OSError:
        return ""


def _list_other_cameras() -> list[Camera]:
    """Windows and macOS; untested there."""
    from cv2_enumerate_cameras import enumerate_cameras

    from readout.capture.usb import backend

    return [
        Camera(
            found.index,
            found.name,
            found.path or f"{found.vid or 0:04x}:{found.pid or 0:04x}:{found.name}",
            found.path or str(found.index),
        )
        for found in enumerate_cameras(backend())
    ]
