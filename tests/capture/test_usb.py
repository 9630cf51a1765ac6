"""A USB camera behind OpenCV, with a stand-in for the driver; the real one: tests/camera."""

from __future__ import annotations

from collections.abc import Iterator
from pathlib import Path

import cv2
import numpy as np
import pytest

from readout.capture import usb
from readout.capture.cameras import Camera
from readout.capture.usb import UsbCamera, choose_mode, luminance_of
from readout.capture.v4l2 import Mode
from readout.errors import BadInput, Busy, SourceLost, SourceStalled
from readout.model import Frame, Quality
from tests.capture.fakes import FakeCapture, FakeClock, ticking, video_capture
from tests.capture.streams import SHAPE, jpeg, scene
from tests.contracts import one_line

HEIGHT, WIDTH = SHAPE


@pytest.fixture
def device(tmp_path: Path) -> Path:
    path = tmp_path / "video0"
    path.touch()
    return path


class Bench:
    """A camera on the bench: what it will deliver, and the source made for it."""

    def __init__(self, monkeypatch: pytest.MonkeyPatch, device: Path) -> None:
        self.monkeypatch, self.device = monkeypatch, device
        self.camera = Camera(0, "Bench camera", "bench-1", str(device))

    def source(self, script: list, *, fourcc: str = "GREY", **options: object) -> UsbCamera:
        self.fake = FakeCapture(script, opens=options.pop("opens", True))
        self.opened = video_capture(self.fake)
        self.monkeypatch.setattr(cv2, "VideoCapture", self.opened)
        self.monkeypatch.setattr(usb, "SYSTEM", "Linux")
        self.monkeypatch.setattr(usb, "find_camera", lambda which: self.camera)
        options.setdefault("clock", ticking())
        return UsbCamera(0, mode=Mode(fourcc, WIDTH, HEIGHT, 30.0), **options)


@pytest.fixture
def bench(monkeypatch: pytest.MonkeyPatch, device: Path) -> Iterator[Bench]:
    return Bench(monkeypatch, device)


def read(source: UsbCamera, count: int) -> list[Frame]:
    with source:
        return [source.read(1.0) for _ in range(count)]


def test_opened_by_path_with_a_stated_backend_and_set_in_order(bench: Bench):
    read(bench.source([scene(0)]), 1)
    assert bench.opened.asked == (str(bench.device), cv2.CAP_V4L2)
    assert [what for what, _ in bench.fake.set_calls] == [
        cv2.CAP_PROP_FOURCC,
        cv2.CAP_PROP_FRAME_WIDTH,
        cv2.CAP_PROP_FRAME_HEIGHT,
        cv2.CAP_PROP_FPS,
        cv2.CAP_PROP_CONVERT_RGB,
        cv2.CAP_PROP_BUFFERSIZE,
    ]
    assert bench.fake.values[cv2.CAP_PROP_CONVERT_RGB] == 0
    assert bench.fake.released == 1


def test_pixels_come_through_untouched(bench: Bench):
    frames = read(bench.source([scene(k) for k in range(3)]), 3)
    for number, frame in enumerate(frames):
        np.testing.assert_array_equal(frame.pixels, scene(number))


def test_a_failed_grab_is_lost_and_never_the_frame_before(bench: Bench):
    source = bench.source([scene(0), "fails", scene(1)])
    with source:
        source.read(1.0)
        for _ in range(3):
            with pytest.raises(SourceLost) as caught:
                source.read(1.0)
            one_line(caught.value)
    assert bench.fake.released == 1
    assert bench.fake.script  # nothing was asked of it any more


def test_a_grab_without_a_picture_is_lost(bench: Bench):
    with bench.source([scene(0), "torn"]) as source:
        source.read(1.0)
        with pytest.raises(SourceLost):
            source.read(1.0)


def test_silence_is_a_stall_and_ends(bench: Bench):
    with bench.source([scene(0), "silent", "silent", scene(1)]) as source:
        source.read(1.0)
        for _ in range(2):
            with pytest.raises(SourceStalled, match=r"no frame within 0\.5 s"):
                source.read(0.5)
        assert source.read(0.5).seq == 1


def test_silence_of_a_camera_that_is_gone_is_lost(bench: Bench):
    with bench.source([scene(0), "silent"]) as source:
        source.read(1.0)
        bench.device.unlink()
        with pytest.raises(SourceLost):
            source.read(0.5)


def test_the_stamp_is_the_drivers_where_it_can_be_believed(bench: Bench):
    clock = FakeClock(10_000_000_000)
    source = bench.source([scene(k) for k in range(5)], clock=clock)
    #              sound,  no stamp, falls,  far off, in the future
    bench.fake.stamps_ms = [9990.5, -1.0, 9000.0, 1.0, 99999.0]
    with source:
        stamps = [source.read(1.0).t_mono_ns for _ in range(5)]
    assert stamps == [9_990_500_000, *[10_000_000_000] * 4]


def test_a_slow_reader_skips_what_grew_old_in_the_buffers(bench: Bench):
    clock = FakeClock(10_000_000_000)
    source = bench.source([scene(k) for k in range(5)], clock=clock)
    bench.fake.stamps_ms = [9700.0, 9750.0, 9850.0, 9900.0, 9950.0]
    with source:
        frames = [source.read(1.0) for _ in range(3)]
    # 0.3 s and 0.25 s old: skipped; 0.15 s: the first one young enough; then none is lost
    assert [frame.seq for frame in frames] == [2, 3, 4]
    np.testing.assert_array_equal(frames[0].pixels, scene(2))
    assert frames[0].t_mono_ns == 9_850_000_000


def test_an_old_picture_is_better_than_none(bench: Bench):
    source = bench.source([scene(0)], clock=FakeClock(10_000_000_000))
    bench.fake.stamps_ms = [9000.0]
    with source:
        frame = source.read(1.0)
    assert (frame.seq, frame.t_mono_ns) == (0, 9_000_000_000)


def test_the_first_second_is_settling(bench: Bench):
    clock = FakeClock()
    frames = []
    with bench.source([scene(k % 9) for k in range(30)], clock=clock) as source:
        for _ in range(30):
            clock.now_ns += 100_000_000
            frames.append(source.read(1.0))
    flags = [frame.quality for frame in frames]
    assert flags == [Quality.SETTLING] * 10 + [Quality.OK] * 20


def test_repeats_are_flagged_but_not_a_dark_picture(bench: Bench):
    dark = np.zeros(SHAPE, np.uint8)
    script = [scene(0), scene(0), scene(1), dark, dark]
    flags = [f.quality for f in read(bench.source(script, settle_s=0.0), 5)]
    ok, repeated = Quality.OK, Quality.DUPLICATE
    assert flags == [ok, repeated, ok, ok, ok]


def test_motion_jpeg_is_decoded_one_by_one_and_damage_is_seen(bench: Bench):
    def packet(data: bytes) -> np.ndarray:
        return np.frombuffer(data, np.uint8)[None, :]

    script = [packet(jpeg(0)), packet(jpeg(1)[:-300]), packet(jpeg(2) + bytes(64))]
    frames = read(bench.source(script, fourcc="MJPG", settle_s=0.0), 3)
    assert [f.quality for f in frames] == [Quality.OK, Quality.DAMAGED, Quality.OK]
    assert frames[1].pixels.shape == SHAPE
    assert np.abs(frames[2].pixels.astype(int) - scene(2)).mean() < 2


def test_refusals(bench: Bench):
    with pytest.raises(Busy, match="close other programs") as caught:
        bench.source([], opens=False).__enter__()
    one_line(caught.value)
    assert bench.fake.released == 1
    source = bench.source([])
    bench.monkeypatch.setattr(usb.os, "access", lambda *_: False)
    with pytest.raises(BadInput, match="no permission") as caught:
        source.__enter__()
    one_line(caught.value)


def interleaved(luma: np.ndarray, *, first: bool) -> np.ndarray:
    """Y and constant chroma in turn, as YUYV (Y first) or UYVY."""
    both = np.full((*luma.shape, 2), 99, np.uint8)
    both[..., 0 if first else 1] = luma
    return both


@pytest.mark.parametrize("flat", [False, True])
@pytest.mark.parametrize(
    ("fourcc", "buffer", "full_scale"),
    [
        ("GREY", scene(2), 255),
        ("YUYV", interleaved(scene(2), first=True), 255),
        ("UYVY", interleaved(scene(2), first=False), 255),
        ("NV12", np.vstack([scene(2), np.full((HEIGHT // 2, WIDTH), 9, np.uint8)]), 255),
        ("Y10", scene(2).astype(np.uint16) * 4, 1023),
        ("Y12", scene(2).astype(np.uint16) * 16, 4095),
        ("Y16", scene(2).astype(np.uint16) * 256, 65535),
    ],
)
def test_luminance_of_each_format(fourcc: str, buffer: np.ndarray, full_scale: int, flat: bool):
    """Layouts after the Linux Media userspace API, "Image Formats"; flat or in rows."""
    given = buffer.reshape(1, -1) if flat else buffer
    if flat and buffer.dtype == np.uint16:
        given = given.view(np.uint8)
    pixels, top = luminance_of(given, fourcc, SHAPE)
    factor = {255: 1, 1023: 4, 4095: 16, 65535: 256}[full_scale]
    np.testing.assert_array_equal(pixels, scene(2).astype(pixels.dtype) * factor)
    assert top == full_scale


def test_a_buffer_of_another_size_is_damaged():
    with pytest.raises(BadInput):
        luminance_of(np.zeros((HEIGHT - 1, WIDTH), np.uint8), "GREY", SHAPE)


def test_the_mode_chosen():
    vga, hd, full = (640, 480), (1280, 720), (1920, 1080)

    def choice(*modes: tuple[str, tuple[int, int], float]) -> tuple[str, int] | None:
        chosen = choose_mode([Mode(f, *size, rate) for f, size, rate in modes])
        return chosen and (chosen.fourcc, chosen.width_px)

    webcam = [("MJPG", full, 30.0), ("YUYV", vga, 30.0), ("YUYV", hd, 10.0)]
    assert choice(*webcam) == ("YUYV", 640)  # luminance untouched, at a useful rate
    assert choice(*webcam, ("GREY", vga, 60.0), ("GREY", hd, 30.0)) == ("GREY", 1280)
    assert choice(("GREY", hd, 30.0), ("Y10", hd, 30.0), ("Y16", hd, 30.0)) == ("Y10", 1280)
    assert choice(("YUYV", vga, 5.0), ("YUYV", hd, 5.0)) == ("YUYV", 1280)
    assert choice(("MJPG", vga, 30.0), ("H264", full, 30.0)) == ("MJPG", 640)
    assert choice(("H264", full, 30.0)) is None
    assert choice() is None
