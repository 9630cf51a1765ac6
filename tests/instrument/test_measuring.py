"""One source through to its end: what is written, what is said, when it is over."""

from __future__ import annotations

import pytest

from readout.errors import BadInput, NoRoom, SourceLost
from readout.instrument import Instrument
from readout.instrument.measuring import Measuring
from readout.model import Reading, Target
from tests.instrument.fakes import FakeClock, ScriptedObserver, Step


class Bench:
    """Measures scripted sources one after another; ``waits`` are those between them."""

    def __init__(self, *scripts: list[Step], give_up_after_s: float) -> None:
        self.clock = FakeClock()
        self.written: list[Reading] = []
        self.warnings: list[str] = []
        self._scripts = list(scripts)
        self.instrument = Instrument(observe=self._observe, clock_ns=self.clock)
        self.measuring = Measuring(
            self.instrument,
            self.written.append,
            warn=self.warnings.append,
            give_up_after_s=give_up_after_s,
        )

    def _observe(self, source: str, target: Target) -> ScriptedObserver:
        acquisition = self.instrument._acquisition
        assert acquisition is not None
        acquisition._wait = self.clock.wait
        return ScriptedObserver(self.clock, self._scripts.pop(0))

    def run(self) -> None:
        self.measuring.run("scripted", target=Target.CROSSHAIR)


def test_a_stream_that_vanishes_is_waited_for_and_given_up_with_a_line() -> None:
    gone = SourceLost("the stream has ended")
    bench = Bench([None, None, gone], *[[gone]] * 9, give_up_after_s=10.0)
    begin_ns = bench.clock.now_ns
    with pytest.raises(BadInput, match=r"the stream has ended; given up after 10 s"):
        bench.run()
    assert bench.warnings == ["the stream has ended; trying again for 10 s"]
    assert len(bench.written) == bench.measuring.n == 2
    # two frames of a tenth of a second, then what it was waited for
    assert (bench.clock.now_ns - begin_ns) * 1e-9 == pytest.approx(10.2)


def test_a_stream_that_comes_back_in_time_goes_on() -> None:
    gone = SourceLost("the stream has ended")
    bench = Bench([None, gone], [gone], [None, None], give_up_after_s=10.0)
    bench.run()
    assert bench.measuring.n == 3


def test_a_failure_of_writing_ends_it_even_where_a_source_would_be_waited_for() -> None:
    bench = Bench([None] * 5, give_up_after_s=10.0)

    def full(reading: Reading) -> None:
        raise NoRoom("cannot write angles.csv: make room on the disk")

    bench.measuring._write = full
    with pytest.raises(NoRoom, match="make room"):
        bench.run()
    assert bench.measuring.n == 0
