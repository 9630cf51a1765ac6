"""The instrument as a whole, over scripted observers."""

from __future__ import annotations

import math
from collections.abc import Callable, Iterable
from dataclasses import replace
from types import SimpleNamespace

import pytest

from readout.angle import Calibration, nominal_calibration
from readout.capture.timebase import TimeBase
from readout.errors import BadInput, NotNow, SourceLost
from readout.instrument import Event, Instrument, Optics, State, Statistic, Zero
from readout.instrument.measuring import Measuring
from readout.instrument.observer import Observer
from readout.instrument.scale import refuse_unfit
from readout.model import Quality, Reading, Target, no_sighting
from tests.instrument.fakes import (
    HEIGHT_PX,
    WIDTH_PX,
    FakeClock,
    ScriptedObserver,
    Step,
    sighting,
)


def calibration(**changes: object) -> Calibration:
    made = nominal_calibration(
        focal_length_mm=300.0, pitch_um=3.45, image_width_px=WIDTH_PX, image_height_px=HEIGHT_PX
    )
    return replace(made, **changes)


class Bench:
    """An instrument whose sources play scripts; ``use`` runs one to its end."""

    def __init__(
        self,
        *scripts: Iterable[Step],
        scale: Calibration | Optics | None = None,
        own: Calibration | None = None,
        live: bool = True,
        from_first_frame: bool = False,
    ) -> None:
        self.clock = FakeClock()
        self._scripts = list(scripts)
        self._own, self._live = own, live
        self.readings: list[Reading] = []
        self.events: list[Event] = []
        self.instrument = Instrument(
            scale=scale,
            observe=self._observe,
            start=TimeBase(self.clock.now_ns, 5_000_000_000),
            from_first_frame=from_first_frame,
            clock_ns=self.clock,
        )
        self.instrument.on_reading.append(self.readings.append)
        self.instrument.on_event.append(self.events.append)

    def _observe(self, source: str, target: Target) -> Observer:
        del source, target
        script = self._scripts.pop(0)
        return ScriptedObserver(self.clock, script, live=self._live, calibration=self._own)

    def run(self, source: str = "scripted", *, target: Target = Target.CROSSHAIR) -> Bench:
        acquisition = self.instrument.use(source, target=target)
        acquisition._wait = self.clock.wait
        acquisition.run()
        return self

    def after(self, n: int, act: Callable[[], object]) -> Bench:
        """Have ``act`` done with the ``n``-th reading, while the source measures."""

        def listen(reading: Reading) -> None:
            if len(self.readings) == n:
                act()

        self.instrument.on_reading.append(listen)
        return self

    @property
    def state(self) -> tuple[State, str]:
        status = self.instrument.status()
        return status.state, status.state_detail


def test_a_frame_becomes_a_reading_in_arcseconds() -> None:
    bench = Bench([sighting(40.0, 20.0)], scale=calibration()).run()
    (reading,) = bench.readings
    # right of the centre by 8.5 px and above it by 3.5 px, each 206264.806 * pitch / (2 f)
    scale = 206264.806 * 3.45e-3 / (2 * 300.0)
    assert reading.x_arcsec == pytest.approx(8.5 * scale, rel=1e-6)
    assert reading.y_arcsec == pytest.approx(3.5 * scale, rel=1e-6)
    assert reading.quality is Quality.OK
    assert bench.instrument.newest is not None
    assert bench.instrument.newest[1] is reading


def test_what_cannot_be_measured_is_a_reading_all_the_same() -> None:
    bench = Bench([None, no_sighting(Quality.NO_IMAGE), None], scale=calibration()).run()
    assert [r.seq for r in bench.readings] == [0, 1, 2]
    assert math.isnan(bench.readings[1].x_arcsec)
    assert bench.readings[1].quality is Quality.NO_IMAGE
    status = bench.instrument.status()
    assert (status.frames, status.frames_unusable) == (3, 1)


def test_without_a_scale_positions_stand_and_angles_are_void() -> None:
    bench = Bench([None]).run()
    assert bench.readings[0].x_px == 32.0
    assert math.isnan(bench.readings[0].x_arcsec)
    assert bench.instrument.status().calibration is None


def test_optics_give_a_nominal_calibration_for_the_size_of_the_picture() -> None:
    bench = Bench([None], scale=Optics(300.0, 3.45)).run()
    used = bench.instrument.status().calibration
    assert used is not None
    assert (used.method, used.signs) == ("nominal", "unproven")
    assert (used.image_width_px, used.image_height_px) == (WIDTH_PX, HEIGHT_PX)


def test_a_source_with_its_own_calibration_uses_it_unless_a_file_is_given() -> None:
    own, given = calibration(id="own"), calibration(id="given")
    assert Bench([None], own=own).run().readings[0].calibration_id == "own"
    optics = Bench([None], own=own, scale=Optics(1.0, 1.0)).run()
    assert optics.readings[0].calibration_id == "own"
    assert Bench([None], own=own, scale=given).run().readings[0].calibration_id == "given"


def test_a_calibration_of_another_size_is_refused_in_one_line() -> None:
    bench = Bench([None], scale=calibration(image_width_px=1280, image_height_px=720)).run()
    state, line = bench.state
    assert state is State.FAILED
    assert "1280 × 720" in line
    assert f"{WIDTH_PX} × {HEIGHT_PX}" in line
    assert "\n" not in line
    assert bench.readings == []


def test_a_calibration_of_another_target_is_refused() -> None:
    """There is one target so far: a stand-in takes the place of a second."""
    other = replace(calibration(), target=SimpleNamespace(value="spot"))
    with pytest.raises(BadInput, match="spot"):
        refuse_unfit(other, WIDTH_PX, HEIGHT_PX, Target.CROSSHAIR)
    assert Bench([None], scale=other).run().state[0] is State.FAILED


def test_pictures_that_change_their_size_are_refused_and_what_came_before_stands() -> None:
    bench = Bench([None, None, (100, 80)], scale=calibration(), live=False).run()
    state, line = bench.state
    assert state is State.FAILED
    assert "100 × 80" in line
    assert len(bench.readings) == 2


def test_a_source_opened_anew_may_come_in_another_size_if_the_scale_allows() -> None:
    scripts = [[None, SourceLost("gone")], [(100, 80)]]
    bench = Bench(*scripts, scale=Optics(300.0, 3.45)).run()
    assert [r.seq for r in bench.readings] == [0, 1]
    status = bench.instrument.status()
    assert (status.image_width_px, status.image_height_px) == (100, 80)
    assert status.calibration is not None
    assert status.calibration.image_width_px == 100


def test_time_counts_from_the_start_of_the_program_or_from_the_first_frame() -> None:
    program = Bench([1.0, None, None], scale=calibration()).run()
    # 1 s of silence, then frames every 0.1 s
    assert [r.t_s for r in program.readings] == pytest.approx([1.1, 1.2])
    frames = Bench([1.0, None, None], scale=calibration(), from_first_frame=True).run()
    assert [r.t_s for r in frames.readings] == pytest.approx([0.0, 0.1])


def test_utc_is_counted_on_from_the_start_whatever_a_source_took_for_it() -> None:
    """A source takes UTC at each opening; a wall clock set by 5 s between must not show."""
    bench = Bench([None, SourceLost("gone")], [None, None], scale=calibration()).run()
    stamped = [r.t_utc_ns for r in bench.readings]
    start_ns = bench.instrument.start_time.t_utc_ns
    assert [(ns - start_ns) * 1e-9 for ns in stamped] == pytest.approx(
        [r.t_s for r in bench.readings]
    )
    recorded = Bench([None], scale=calibration(), live=False, from_first_frame=True).run()
    assert recorded.readings[0].t_utc_ns == recorded.clock.now_ns  # as the frame had it


def test_seq_and_counts_go_on_over_a_change_of_source() -> None:
    bench = Bench([None, None], [None], scale=calibration()).run().run("another")
    assert [r.seq for r in bench.readings] == [0, 1, 2]
    assert bench.instrument.status().frames == 3
    assert bench.instrument.source == "another"


def test_events_tell_what_happened_once_each_in_one_line() -> None:
    gone = SourceLost("gone")
    script: list[Step] = [*[None] * 5, 0.9, None, gone]
    bench = Bench(script, [SourceLost("still away")], [None], scale=calibration()).run()
    told = [event.event for event in bench.events]
    assert told == ["opened", "stalled", "recovered", "lost", "opened", "ended"]
    assert all(event.text and "\n" not in event.text for event in bench.events)
    assert [e.t_s for e in bench.events] == sorted(e.t_s for e in bench.events)


def test_zero_is_set_taken_back_and_lost_with_the_source() -> None:
    bench = Bench([None] * 30, [None], scale=calibration())
    instrument = bench.instrument
    zeros: list[Zero | None] = []

    def set_take_back_set() -> None:
        instrument.set_zero()
        zeros.append(instrument.status().zero)
        instrument.clear_zero()
        zeros.append(instrument.zero)
        instrument.set_zero()

    bench.after(20, set_take_back_set).run()
    set_to, taken_back = zeros
    assert set_to is not None
    assert set_to.x_arcsec == pytest.approx(bench.readings[0].x_arcsec)
    assert taken_back is None
    assert instrument.zero == set_to
    bench.run()
    assert instrument.zero is None


def refusal_of_a_zero(bench: Bench) -> str:
    with pytest.raises(NotNow) as refused:
        bench.instrument.set_zero()
    return str(refused.value)


def test_no_zero_from_a_source_that_gives_no_readings() -> None:
    ended = Bench([None] * 20, scale=calibration()).run()
    assert "ended" in refusal_of_a_zero(ended)
    failed = Bench([*[None] * 20, BadInput("the disk is gone")], scale=calibration(), live=False)
    assert "no reading" in refusal_of_a_zero(failed.run())
    stalled = Bench([*[None] * 20, 0.9], scale=calibration())
    lines: list[str] = []
    stalled.instrument.on_state.append(
        lambda state, _: (
            lines.append(refusal_of_a_zero(stalled)) if state is State.STALLED else None
        )
    )
    stalled.run()
    assert ["stalled" in line for line in lines] == [True]


def test_no_zero_from_a_reading_that_is_old() -> None:
    """As when the thread that reads is stuck and nobody has called the silence a stall yet."""
    bench = Bench([None] * 20, scale=calibration())
    lines: list[str] = []

    def long_after() -> None:
        bench.clock.advance(0.6)
        lines.append(refusal_of_a_zero(bench))

    bench.after(20, long_after).run()
    assert "old" in lines[0]


def test_no_zero_without_readings() -> None:
    with pytest.raises(NotNow):
        Bench().instrument.set_zero()


def test_a_new_scale_begins_average_and_zero_anew() -> None:
    bench = Bench([None] * 10, scale=calibration())

    def change() -> None:
        bench.instrument.set_zero()
        bench.instrument.set_scale(Optics(150.0, 3.45))
        assert bench.instrument.zero is None
        assert [e.event for e in bench.events][-2:] == ["calibration", "zero"]
        assert "no reading" in refusal_of_a_zero(bench)

    bench.after(10, change).run()
    assert bench.state == (State.ENDED, "the script is at its end")


def test_a_long_average_is_taken_anew_after_a_hundredth_of_its_window() -> None:
    bench = Bench([None] * 30, scale=calibration())
    bench.instrument.set_averaging(25.0, Statistic.MEAN)
    counts: list[int] = []

    def look(reading: Reading) -> None:
        average = bench.instrument.average()
        assert average is not None
        counts.append(average.n)

    bench.instrument.on_reading.append(look)
    bench.run()
    # ten readings a second: the third is the first one later than 0.25 s
    assert len(set(counts)) == 10
    assert counts[-1] >= 28


def test_the_average_is_null_before_there_is_a_reading() -> None:
    assert Bench().instrument.average() is None
    average = Bench([None] * 5, scale=calibration()).run().instrument.average()
    assert average is not None
    assert average.n == 5


def test_measuring_stops_at_its_limit_with_what_was_asked_for() -> None:
    bench = Bench([None] * 50, scale=calibration(), from_first_frame=True)
    measuring = Measuring(bench.instrument, lambda _: None, warn=print, most=7)
    measuring.run("scripted", target=Target.CROSSHAIR)
    assert (measuring.n, measuring.good) == (7, 7)
    bench = Bench([None] * 50, scale=calibration(), from_first_frame=True)
    measuring = Measuring(bench.instrument, lambda _: None, warn=print, seconds=1.05)
    measuring.run("scripted", target=Target.CROSSHAIR)
    assert measuring.n == 11  # 0.0, 0.1 ... 1.0 s


def test_measuring_keeps_what_was_written_when_the_disk_is_full() -> None:
    bench = Bench([None] * 50, scale=calibration())
    written: list[Reading] = []

    def write(reading: Reading) -> None:
        if len(written) == 3:
            raise OSError(28, "No space left on device")
        written.append(reading)

    with pytest.raises(OSError, match="No space"):
        Measuring(bench.instrument, write, warn=print).run("scripted", target=Target.CROSSHAIR)
    assert len(written) == 3


def test_a_live_source_that_comes_back_smaller_is_measured_again_when_it_is_itself() -> None:
    small: list[Step] = [(100, 80)]
    bench = Bench([None, *small], small, [None, None], scale=calibration()).run()
    assert len(bench.readings) == 3
    words = [event.event for event in bench.events]
    assert words == ["opened", "lost", "opened", "ended"]
    (lost,) = (event for event in bench.events if event.event == "lost")
    assert "100 × 80" in lost.text


def test_what_becomes_of_a_zero_is_told() -> None:
    bench = Bench([None] * 30, scale=calibration())
    zeros: list[str] = []

    def listen(event: Event) -> None:
        if event.event == "zero":
            zeros.append(event.text)

    bench.instrument.on_event.append(listen)

    def set_and_clear() -> None:
        bench.instrument.set_zero()
        bench.instrument.clear_zero()
        bench.instrument.clear_zero()  # there is none any more: nothing to tell
        bench.instrument.set_zero()

    bench.after(20, set_and_clear).run()
    assert [text.split(" at ")[0] for text in zeros] == [
        "zero set",
        "the zero was taken back",
        "zero set",
    ]
    bench.instrument.set_scale(Optics(200.0, 3.45))
    assert zeros[3:] == ["the zero is gone: the scale was changed"]
