"""A service over a scripted source, asked as a browser on this machine would ask."""

from __future__ import annotations

from collections.abc import Callable, Iterable, Iterator
from contextlib import contextmanager
from pathlib import Path

import pytest
from starlette.testclient import TestClient

from readout.angle import Calibration, nominal_calibration
from readout.capture.timebase import TimeBase
from readout.instrument import Instrument
from readout.instrument.observer import Observer
from readout.instrument.recorder import Recorder
from readout.logbook import FILE_NAME, Logbook
from readout.model import Reading, Target
from readout.service.app import make_app
from readout.service.control import Control, Options
from readout.service.feed import Feed
from readout.service.settings import SettingsStore
from tests.instrument.fakes import HEIGHT_PX, WIDTH_PX, FakeClock, ScriptedObserver, Step

PORT = 8470
HERE = f"http://127.0.0.1:{PORT}"
STREAM = f"ws://127.0.0.1:{PORT}/api/stream"


def small_calibration() -> Calibration:
    return nominal_calibration(
        focal_length_mm=300.0, pitch_um=3.45, image_width_px=WIDTH_PX, image_height_px=HEIGHT_PX
    )


class Rig:
    """``measure`` plays a script through the instrument; ``client`` asks the service."""

    def __init__(self, folder: Path) -> None:
        self.clock = FakeClock()
        self.feed = Feed(capacity=50_000)
        self.script: list[Step] = []
        self.observers: list[ScriptedObserver] = []
        self.instrument = Instrument(
            observe=self._observe,
            start=TimeBase(self.clock.now_ns, 1_700_000_000_000_000_000),
            clock_ns=self.clock,
        )
        self.instrument.on_reading.append(self.feed.append)
        self.instrument.on_event.append(self.feed.announce)
        self.instrument.on_state.append(lambda *_: self.feed.announce())
        self.store = SettingsStore(folder / "settings.json")
        self.control = Control(self.instrument, self.store, Options())
        self.fix_calibration(small_calibration())
        self.static = folder / "static"
        self.logbook = Logbook(folder / FILE_NAME)
        self.recorder = Recorder(self.instrument, self.logbook)

    def _observe(self, source: str, target: Target) -> Observer:
        del source, target
        self.observers.append(ScriptedObserver(self.clock, self.script))
        return self.observers[-1]

    def measure(self, script: Iterable[Step] = (None,) * 10) -> None:
        self.script = list(script)
        acquisition = self.instrument.use("simulated")
        acquisition._wait = self.clock.wait
        acquisition.run()

    def at_reading(self, seq: int, act: Callable[[], object]) -> None:
        """Have ``act`` done with the reading of this number, while the source measures."""
        self.instrument.on_reading.append(lambda reading: act() if reading.seq == seq else None)

    def play(self, script: Iterable[Step], acts: dict[int, Callable[[], object]]) -> None:
        """Measure ``script``; each act is done with the reading of this place in it."""
        newest = self.instrument.newest
        first = 0 if newest is None else newest[1].seq + 1

        def act(reading: Reading) -> None:
            if reading.seq - first in acts:
                acts[reading.seq - first]()

        self.instrument.on_reading.append(act)
        self.measure(script)
        self.instrument.on_reading.remove(act)

    def fix_calibration(self, calibration: Calibration | None) -> None:
        """As given on the command line; None leaves the scale to the settings."""
        self.control._options = Options(calibration=calibration)
        self.instrument.set_scale(calibration)

    @contextmanager
    def asked(self) -> Iterator[TestClient]:
        app = make_app(
            self.instrument,
            self.feed,
            self.control,
            self.recorder,
            port=PORT,
            static=self.static,
        )
        with TestClient(app, base_url=HERE, raise_server_exceptions=False) as client:
            yield client


@pytest.fixture
def rig(tmp_path: Path) -> Iterator[Rig]:
    rig = Rig(tmp_path)
    yield rig
    rig.logbook.close()


@pytest.fixture
def client(rig: Rig) -> Iterator[TestClient]:
    with rig.asked() as client:
        yield client
