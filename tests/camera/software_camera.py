"""A USB camera made of software, showing frames whose truth is known.

``uvcsim`` (from the folder VMCAM, not part of this repository) speaks the USB Video Class; this
gives it pictures. The kernel's own driver sees a camera.
"""

from __future__ import annotations

import time
from pathlib import Path

import numpy as np
import uvcsim

FORMATS = {"GREY": uvcsim.GREY, "YUYV": uvcsim.YUY2}


class SoftwareCamera:
    """Shows one position at a time, a variant of its noise after the other."""

    def __init__(self, frames: np.ndarray, fourcc: str) -> None:
        """``frames``: (position, variant, row, column), uint8."""
        self._frames, self._fourcc = frames, fourcc
        self.position = 0
        self._plugged: uvcsim.UvcSim | None = None
        height, width = frames.shape[2:]
        self._chroma = np.full((height, width, 2), 128, np.uint8)

    def plug(self) -> None:
        height, width = self._frames.shape[2:]
        self._plugged = uvcsim.UvcSim(
            self._render, formats=[(FORMATS[self._fourcc], width, height)], fps=(30,)
        )
        self._plugged.plug()
        until(lambda: bool(nodes()), 10.0, "a video device after plugging in")

    def unplug(self) -> None:
        if self._plugged:
            self._plugged.unplug()

    def stall(self) -> None:
        """Go on answering as a device, but send no picture."""
        if self._plugged:
            self._plugged.faults.add("stall")

    def go_on(self) -> None:
        if self._plugged:
            self._plugged.faults.discard("stall")

    def _render(self, _camera: object, _kind: bytes, _width: int, _height: int, seq: int) -> bytes:
        picture = self._frames[self.position, seq % self._frames.shape[1]]
        # A few levels in a corner, far from the crosshair, so that no two frames are alike.
        picture[0, :4] = [seq >> shift & 7 for shift in (0, 3, 6, 9)]
        if self._fourcc == "GREY":
            return picture.tobytes()
        self._chroma[..., 0] = picture
        return self._chroma.tobytes()


def nodes() -> list[str]:
    return sorted(str(node) for node in Path("/dev").glob("video*"))


def until(true, within_s: float, what: str) -> float:
    """Seconds until ``true()``; an error naming ``what`` if it takes longer than ``within_s``."""
    began = time.monotonic()
    while not true():
        if time.monotonic() - began > within_s:
            raise TimeoutError(f"no {what} within {within_s:g} s; devices: {nodes()}")
        time.sleep(0.02)
    return time.monotonic() - began


def load(folder: Path, fourcc: str) -> SoftwareCamera:
    return SoftwareCamera(np.load(folder / "frames.npy"), fourcc)
