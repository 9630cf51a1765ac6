"""What a Linux video device says about itself: its kind, its formats, sizes and frame rates.

Questions only, nothing is set: they may be asked while another program uses the camera. Layouts
of the structures: Linux Media Infrastructure userspace API, "Function Reference".
"""

from __future__ import annotations

import os
import platform
import struct
import sys
from collections.abc import Iterator
from contextlib import contextmanager
from dataclasses import dataclass
from pathlib import Path

SYSTEM = platform.system()

_CAPTURE = 1  # buffer type, and capability bit, of single-planar video capture
_DISCRETE = 1
_QUERYCAP = 0x80685600  # _IOR('V', 0, 104 bytes)
_ENUM_FMT = 0xC0405602  # _IOWR('V', 2, 64 bytes)
_ENUM_FRAMESIZES = 0xC02C564A  # _IOWR('V', 74, 44 bytes)
_ENUM_FRAMEINTERVALS = 0xC034564B  # _IOWR('V', 75, 52 bytes)


@dataclass(frozen=True, slots=True)
class Mode:
    """One way a camera can run. ``fourcc``: its pixel format in four letters."""

    fourcc: str
    width_px: int
    height_px: int
    frames_per_s: float


def captures_video(device: Path) -> bool:
    """True for a device that gives pictures (a camera also has one for notes about them).

    Raises OSError if the device cannot be opened.
    """
    with _opened(device) as handle:
        answer = _ask(handle, _QUERYCAP, bytearray(104))
    if answer is None:
        return False
    (device_caps,) = struct.unpack_from("<I", answer, 88)
    return bool(device_caps & _CAPTURE)


def modes(device: Path) -> list[Mode]:
    """Every format, size and fastest frame rate a camera offers, in its own order.

    A size given as a range counts with its largest. Raises OSError if the device cannot be
    opened.
    """
    with _opened(device) as handle:
        return [
            Mode(fourcc, width, height, _fastest(handle, code, width, height))
            for code, fourcc in _formats(handle)
            for width, height in _sizes(handle, code)
        ]


def _formats(handle: int) -> Iterator[tuple[int, str]]:
    for answer in _each(handle, _ENUM_FMT, struct.pack("<II56x", 0, _CAPTURE)):
        (code,) = struct.unpack_from("<I", answer, 44)
        yield code, code.to_bytes(4, "little").decode("latin-1").rstrip()


def _sizes(handle: int, code: int) -> Iterator[tuple[int, int]]:
    for answer in _each(handle, _ENUM_FRAMESIZES, struct.pack("<II36x", 0, code)):
        kind, *numbers = struct.unpack_from("<I6I", answer, 8)
        yield (numbers[0], numbers[1]) if kind == _DISCRETE else (numbers[1], numbers[4])


def _fastest(handle: int, code: int, width: int, height: int) -> float:
    question = struct.pack("<IIII36x", 0, code, width, height)
    rates = [0.0]
    for answer in _each(handle, _ENUM_FRAMEINTERVALS, question):
        numerator, denominator = struct.unpack_from("<II", answer, 20)
        rates.append(denominator / numerator if numerator else 0.0)
    return max(rates)


def _each(handle: int, request: int, question: bytes) -> Iterator[bytearray]:
    """The answers to one question with index 0, 1, ... until the device says there is no more."""
    for index in range(256):
        answer = _ask(handle, request, bytearray(struct.pack("<I", index) + question[4:]))
        if answer is None:
            return
        yield answer


def _ask(handle: int, request: int, block: bytearray) -> bytearray | None:
    answer = None
    if sys.platform == "linux":
        import fcntl

        try:
            fcntl.ioctl(handle, request, block)
            answer = block
        except OSError:
            answer = None
    return answer


@contextmanager
def _opened(device: Path) -> Iterator[int]:
    handle = os.open(device, os.O_RDWR | getattr(os, "O_NONBLOCK", 0))
    try:
        yield handle
    finally:
        os.close(handle)
