"""Questions to a video device, answered by a stand-in for the kernel.

The layouts of its answers are written with ctypes from the Linux Media userspace API ("Function
Reference": VIDIOC_QUERYCAP, VIDIOC_ENUM_FMT, VIDIOC_ENUM_FRAMESIZES, VIDIOC_ENUM_FRAMEINTERVALS),
apart from the code under test; request numbers follow asm-generic/ioctl.h.
"""

from __future__ import annotations

import ctypes as c
import sys
from pathlib import Path

import pytest

from readout.capture import v4l2
from readout.capture.v4l2 import Mode

pytestmark = pytest.mark.skipif(sys.platform != "linux", reason="a Linux interface")


class Capability(c.Structure):
    _fields_ = [
        ("driver", c.c_char * 16),
        ("card", c.c_char * 32),
        ("bus_info", c.c_char * 32),
        ("version", c.c_uint32),
        ("capabilities", c.c_uint32),
        ("device_caps", c.c_uint32),
        ("reserved", c.c_uint32 * 3),
    ]


class Format(c.Structure):
    _fields_ = [
        ("index", c.c_uint32),
        ("type", c.c_uint32),
        ("flags", c.c_uint32),
        ("description", c.c_char * 32),
        ("pixelformat", c.c_char * 4),
        ("mbus_code", c.c_uint32),
        ("reserved", c.c_uint32 * 3),
    ]


class FrameSize(c.Structure):
    _fields_ = [
        ("index", c.c_uint32),
        ("pixel_format", c.c_char * 4),
        ("type", c.c_uint32),
        ("numbers", c.c_uint32 * 6),
        ("reserved", c.c_uint32 * 2),
    ]


class FrameInterval(c.Structure):
    _fields_ = [
        ("index", c.c_uint32),
        ("pixel_format", c.c_char * 4),
        ("width", c.c_uint32),
        ("height", c.c_uint32),
        ("type", c.c_uint32),
        ("numbers", c.c_uint32 * 6),
        ("reserved", c.c_uint32 * 2),
    ]


def request(number: int, block: type[c.Structure], *, writes: bool) -> int:
    return (3 if writes else 2) << 30 | c.sizeof(block) << 16 | ord("V") << 8 | number


class Kernel:
    """One camera: GREY at two sizes and a format whose size is a range."""

    def __init__(self) -> None:
        self.device_caps = 0x04200001  # capture, extended pixel format, streaming
        self.formats = [b"GREY", b"Y16 "]
        self.sizes = {b"GREY": [(640, 480), (1280, 720)], b"Y16 ": [(16, 1920, 16, 16, 1080, 8)]}
        self.intervals = {
            (640, 480): [(1, 30), (1, 60)],
            (1280, 720): [(1, 10)],
            (1920, 1080): [(0, 0)],
        }

    def ioctl(self, handle: int, asked: int, block: bytearray) -> int:
        table = {
            request(0, Capability, writes=False): (Capability, self.capability),
            request(2, Format, writes=True): (Format, self.format),
            request(74, FrameSize, writes=True): (FrameSize, self.size),
            request(75, FrameInterval, writes=True): (FrameInterval, self.interval),
        }
        if asked not in table:
            raise OSError(25, "Inappropriate ioctl for device")
        kind, answer = table[asked]
        assert len(block) == c.sizeof(kind)
        answer(kind.from_buffer(block))
        return 0

    def capability(self, block: Capability) -> None:
        block.capabilities, block.device_caps = 0x84A00001, self.device_caps

    def format(self, block: Format) -> None:
        assert block.type == 1
        block.pixelformat = self._nth(self.formats, block.index)

    def size(self, block: FrameSize) -> None:
        numbers = self._nth(self.sizes[block.pixel_format], block.index)
        block.type = 1 if len(numbers) == 2 else 3
        block.numbers[: len(numbers)] = numbers

    def interval(self, block: FrameInterval) -> None:
        pair = self._nth(self.intervals[block.width, block.height], block.index)
        block.type, block.numbers[:2] = 1, pair

    @staticmethod
    def _nth(items: list, index: int) -> object:
        if index >= len(items):
            raise OSError(22, "Invalid argument")
        return items[index]


@pytest.fixture
def kernel(monkeypatch: pytest.MonkeyPatch) -> Kernel:
    import fcntl

    made = Kernel()
    monkeypatch.setattr(fcntl, "ioctl", made.ioctl)
    return made


def test_formats_sizes_and_rates(kernel: Kernel, tmp_path: Path):
    (tmp_path / "video0").touch()
    assert v4l2.modes(tmp_path / "video0") == [
        Mode("GREY", 640, 480, 60.0),
        Mode("GREY", 1280, 720, 10.0),
        Mode("Y16", 1920, 1080, 0.0),
    ]


def test_a_node_for_notes_gives_no_pictures(kernel: Kernel, tmp_path: Path):
    (tmp_path / "video0").touch()
    assert v4l2.captures_video(tmp_path / "video0")
    kernel.device_caps = 0x04A00000  # metadata capture
    assert not v4l2.captures_video(tmp_path / "video0")


def test_a_plain_file_is_no_camera(tmp_path: Path):
    (tmp_path / "video0").touch()
    assert not v4l2.captures_video(tmp_path / "video0")
    assert v4l2.modes(tmp_path / "video0") == []
    with pytest.raises(OSError, match="No such file"):
        v4l2.modes(tmp_path / "video1")
