"""The fixed frame, from a camera whose mirror can be covered, to readings without it."""

from __future__ import annotations

import math
import threading
from collections.abc import Callable, Iterator
from contextlib import contextmanager
from pathlib import Path
from types import TracebackType
from typing import Self

import numpy as np
import pytest

from readout.capture.cameras import Camera
from readout.errors import BadInput, NotNow
from readout.files.preparation_file import CameraKnowledge, load_knowledge
from readout.instrument import Instrument, Optics
from readout.instrument.fixed_frame import FixedFrame
from readout.instrument.kept_frame import KeptFor
from readout.instrument.observer import DirectObserver
from readout.instrument.preparing import Always
from readout.model import Frame, Observation, Quality, Reading
from readout.sighting import locate
from readout.sighting.prepare import Preparation
from readout.sighting.response import power_response
from readout.simulation import Crosshair, Sensor, crosshair_image, expose
from tests.instrument.fakes import FakeClock

SHAPE = (96, 128)
SENSOR = Sensor(8, gain_levels_per_electron=0.02, read_noise_electrons=6.0, black_levels=4.0)
LINES = Crosshair(line_px=4.0, blur_px=1.6, background=0.0, contrast=5000.0)
FIXED_PX, RETURN_PX = (70.4, 45.3), (52.2, 58.9)
WITHIN_S = 20.0


class Bench:
    """A source: a fixed crosshair in the picture, and a return unless the mirror is covered.

    ``drift_px``: how far the fixed crosshair moves from frame to frame.
    """

    live = True

    def __init__(self) -> None:
        self.covered = False
        self.drift_px = 0.0
        self.quality = Quality.OK
        self.ended = threading.Event()
        self._seq = 0
        self._rng = np.random.default_rng(9)
        self._fixed = crosshair_image(SHAPE, *FIXED_PX, LINES) + 300.0
        self._return = crosshair_image(SHAPE, *RETURN_PX, LINES)

    def __enter__(self) -> Self:
        return self

    def __exit__(
        self,
        exc_type: type[BaseException] | None,
        exc: BaseException | None,
        tb: TracebackType | None,
    ) -> None:
        return

    def read(self, timeout_s: float) -> Frame:
        del timeout_s
        self.ended.wait(0.001)  # lets the other thread have its turn
        seq, self._seq = self._seq, self._seq + 1
        fixed = self._fixed
        if self.drift_px:
            fixed = crosshair_image(SHAPE, FIXED_PX[0] + seq * self.drift_px, FIXED_PX[1], LINES)
        electrons = fixed + (0.0 if self.covered else self._return)
        pixels = expose(electrons, SENSOR, self._rng)
        return Frame(pixels, seq, seq * 1_000_000, 0, 255, quality=self.quality)


class Rig:
    def __init__(self, folder: Path, given: Always | None = None) -> None:
        self.bench, self.clock = Bench(), FakeClock()
        self.kept = KeptFor(folder, "bench", given)
        self.instrument = Instrument(
            observe=lambda _s, t: DirectObserver(
                self.bench, target=t, locate=locate, preparing=self.kept
            ),
            clock_ns=self.clock,
        )
        self.fixed_frame = FixedFrame(self.instrument, lambda _: self.kept)
        self.events: list[str] = []
        self.instrument.on_event.append(lambda event: self.events.append(event.text))

    @contextmanager
    def measuring(self) -> Iterator[Self]:
        acquisition = self.instrument.use("bench")
        acquisition.start()
        try:
            self.wait_for(lambda newest: True)
            yield self
        finally:
            self.bench.ended.set()
            acquisition.stop()

    def wait_for(self, true_of: Callable[[Observation], bool]) -> Observation:
        """The next observation of which that is true."""
        found: list[Observation] = []
        come = threading.Event()

        def look(_: Reading) -> None:
            newest = self.instrument.newest
            if newest is not None and not found and true_of(newest[0]):
                found.append(newest[0])
                come.set()

        self.instrument.on_reading.append(look)
        assert come.wait(WITHIN_S)
        return found[0]

    def take_covered(self, n: int = 8) -> str:
        """Cover the mirror, take the frame, uncover it; when it was made."""
        self.bench.covered = True
        seq = self.wait_for(lambda _: True).seq
        self.wait_for(lambda seen: seen.seq > seq)  # what was under way had the mirror in it
        made_utc = self.fixed_frame.take(n).known.made_utc
        self.bench.covered = False
        return made_utc


def found_alone(seen: Observation) -> bool:
    sighting = seen.sighting
    return sighting.quality is Quality.OK and math.hypot(
        sighting.x_px - RETURN_PX[0], sighting.y_px - RETURN_PX[1]
    ) < 6 * math.hypot(sighting.x_sd_px, sighting.y_sd_px)


def test_the_return_is_right_once_the_fixed_crosshair_is_known(tmp_path: Path) -> None:
    with Rig(tmp_path).measuring() as rig:
        before = rig.wait_for(lambda _: True)
        assert Quality.SEVERAL_RETURNS in before.sighting.quality
        assert rig.instrument.status().prepared_utc is None
        made_utc = rig.take_covered()
        seen = rig.wait_for(lambda newest: newest.prepared is not None and found_alone(newest))
        assert seen.prepared == rig.instrument.status().prepared_utc == made_utc
        assert any(event.startswith("fixed frame taken, the mean of 8") for event in rig.events)
        rig.bench.covered = True
        nothing = rig.wait_for(lambda newest: not newest.sighting.found)
        assert nothing.sighting.quality is Quality.NO_IMAGE


def test_it_is_found_again_and_can_be_forgotten(tmp_path: Path) -> None:
    with Rig(tmp_path).measuring() as rig:
        made_utc = rig.take_covered()
    with Rig(tmp_path).measuring() as rig:
        assert rig.wait_for(lambda _: True).prepared == made_utc
        rig.fixed_frame.forget()
        assert not list(tmp_path.iterdir())
        rig.wait_for(lambda newest: newest.prepared is None)
        with pytest.raises(NotNow, match="no fixed frame"):
            rig.fixed_frame.forget()


def test_the_zero_goes_with_it(tmp_path: Path) -> None:
    with Rig(tmp_path).measuring() as rig:
        rig.take_covered()
        rig.wait_for(lambda newest: newest.prepared is not None)
        rig.instrument.set_scale(Optics(300.0, 3.45))
        seq = rig.wait_for(found_alone).seq
        rig.wait_for(lambda newest: newest.seq > seq + 5)
        rig.instrument.set_zero()
        rig.fixed_frame.forget()
        rig.wait_for(lambda newest: newest.prepared is None)
        assert rig.instrument.zero is None
    assert "the zero is gone: the fixed frame is another now" in rig.events


def test_a_picture_that_moves_is_refused_and_nothing_kept(tmp_path: Path) -> None:
    with Rig(tmp_path).measuring() as rig:
        rig.bench.drift_px = 0.2
        with pytest.raises(NotNow, match="the picture moved"):
            rig.fixed_frame.take(16)
        assert not list(tmp_path.iterdir())
        assert rig.instrument.status().prepared_utc is None


def test_what_shows_a_return_is_taken_and_says_so(tmp_path: Path) -> None:
    """Nothing tells a still return from a fixed crosshair: the person is asked."""
    with Rig(tmp_path).measuring() as rig:
        rig.bench.covered = True
        rig.wait_for(found_fixed)
        assert rig.fixed_frame.take(4).target_seen
        assert "cover it" in rig.events[-1]


def found_fixed(seen: Observation) -> bool:
    return abs(seen.sighting.x_px - FIXED_PX[0]) < 0.1


def test_frames_that_are_not_sound_are_left_out(tmp_path: Path) -> None:
    with Rig(tmp_path).measuring() as rig:
        rig.bench.quality = Quality.DAMAGED
        rig.wait_for(lambda newest: Quality.DAMAGED in newest.sighting.quality)
        with pytest.raises(NotNow, match=r"only 0 of 16 frames are sound"):
            rig.fixed_frame.take(4)


def test_not_before_there_is_a_picture(tmp_path: Path) -> None:
    rig = Rig(tmp_path)
    with pytest.raises(NotNow, match="no reading yet"):
        rig.fixed_frame.take()
    with pytest.raises(NotNow, match="no picture"):
        rig.fixed_frame.forget()


def test_two_at_once_are_refused(tmp_path: Path) -> None:
    with (
        Rig(tmp_path).measuring() as rig,
        rig.fixed_frame._taking,
        pytest.raises(NotNow, match="already"),
    ):
        rig.fixed_frame.take()


class TestKept:
    def test_a_file_for_each_size_depth_camera_and_what_was_given(self, tmp_path: Path) -> None:
        curve = Preparation(response=power_response(0.45, 255))
        given = Always(CameraKnowledge(curve, 255, "2026-01-01T00:00:00.000Z"))
        paths = {
            KeptFor(tmp_path, "a").path_for((640, 480), 255),
            KeptFor(tmp_path, "a").path_for((640, 481), 255),
            KeptFor(tmp_path, "a").path_for((640, 480), 1023),
            KeptFor(tmp_path, "b").path_for((640, 480), 255),
            KeptFor(tmp_path, "a", given).path_for((640, 480), 255),
        }
        assert len(paths) == 5
        assert all(path.parent == tmp_path for path in paths)

    def test_the_camera_itself_counts_not_its_number(
        self, tmp_path: Path, monkeypatch: pytest.MonkeyPatch
    ) -> None:
        """Two cameras change places: each keeps its own frame."""
        cameras = [Camera(0, "one", "id-one", "/dev/one"), Camera(1, "two", "id-two", "/dev/two")]
        monkeypatch.setattr("readout.capture.cameras.list_cameras", lambda: cameras)
        path = KeptFor(tmp_path, "usb:0").path_for((640, 480), 255)
        assert KeptFor(tmp_path, "usb:id-one").path_for((640, 480), 255) == path
        cameras[:] = [Camera(0, "two", "id-two", "/dev/two"), Camera(1, "one", "id-one", "/dev/1")]
        assert KeptFor(tmp_path, "usb:1").path_for((640, 480), 255) == path
        assert KeptFor(tmp_path, "usb:0").path_for((640, 480), 255) != path

    def test_names_from_anywhere_stay_in_the_folder(self, tmp_path: Path) -> None:
        for source in ("../../x", "http://host/…?…", "usb:a/b\\c", "", "x" * 500):
            path = KeptFor(tmp_path, source).path_for((640, 480), 255)
            assert path.parent == tmp_path
            assert len(path.name) < 100
            assert path.name.isascii()

    def test_what_was_given_stands_beneath(self, tmp_path: Path) -> None:
        curve = Preparation(response=power_response(0.45, 255))
        given = Always(CameraKnowledge(curve, 255, "2026-01-01T00:00:00.000Z"))
        with Rig(tmp_path, given).measuring() as rig:
            assert rig.wait_for(lambda _: True).prepared == "2026-01-01T00:00:00.000Z"
            made_utc = rig.take_covered()
            rig.wait_for(lambda newest: newest.prepared == made_utc)
        (path,) = tmp_path.iterdir()
        known = load_knowledge(path).preparation
        assert known.response is not None
        assert known.fixed is not None
        assert np.array_equal(known.response.table, curve.response.table)
        # 300 electrons and the black level, 10 levels, are light of 255 (10 / 255)^(1 / 0.45)
        assert np.median(known.fixed) == pytest.approx(255 * (10 / 255) ** (1 / 0.45), rel=0.1)

    def test_a_broken_file_is_named_with_what_to_do(self, tmp_path: Path) -> None:
        kept = KeptFor(tmp_path, "bench")
        path = kept.path_for((640, 480), 255)
        path.write_bytes(b"torn")
        with pytest.raises(BadInput, match=f"delete {path}") as refused:
            kept.known_for((640, 480), 255)
        assert "\n" not in str(refused.value)
