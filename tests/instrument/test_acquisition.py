"""The states of the acquisition, with scripted sources and a clock of the test's own."""

from __future__ import annotations

import threading
import time
from collections.abc import Iterable

import pytest

from readout.errors import BadInput, Busy, SourceLost
from readout.instrument.acquisition import Acquisition, State
from readout.instrument.observer import Observer
from readout.model import Observation
from tests.instrument.fakes import FakeClock, ScriptedObserver, Step


class Recorder:
    """Runs an acquisition over one script after another and keeps what it says."""

    def __init__(
        self, *scripts: Iterable[Step] | Exception, live: bool = True, patient: bool = False
    ) -> None:
        self.clock = FakeClock()
        self.states: list[tuple[State, str]] = []
        self.seqs: list[int] = []
        self.observers: list[ScriptedObserver] = []
        self._scripts = list(scripts)
        self._live = live
        self.acquisition = Acquisition(
            self._open,
            on_observation=self._take,
            on_state=lambda state, detail: self.states.append((state, detail)),
            patient=patient,
            clock_ns=self.clock,
            wait=self.clock.wait,
        )

    def _open(self) -> Observer:
        if not self._scripts:
            self.acquisition.stop()
            return ScriptedObserver(self.clock, [], live=self._live)
        script = self._scripts.pop(0)
        steps = [script] if isinstance(script, Exception) else script
        observer = ScriptedObserver(self.clock, steps, live=self._live)
        self.observers.append(observer)
        return observer

    def _take(self, observation: Observation, observer: Observer) -> None:
        del observer
        self.seqs.append(observation.seq)

    def run(self) -> Recorder:
        self.acquisition.run()
        return self

    @property
    def words(self) -> list[str]:
        return [state.value for state, _ in self.states]


def test_a_folder_is_measured_and_ends() -> None:
    run = Recorder([None] * 3, live=False).run()
    assert run.words == ["opening", "measuring", "ended"]
    assert run.seqs == [0, 1, 2]
    assert run.observers[0].entered == run.observers[0].left == 1


def test_a_source_that_ends_before_its_first_frame_has_failed() -> None:
    state, detail = Recorder([], live=False).run().states[-1]
    assert state is State.FAILED
    assert "not one frame" in detail


def test_silence_is_stalled_after_half_a_second_and_measuring_again_with_the_next_frame() -> None:
    run = Recorder([None] * 5 + [0.4, None, 0.9, None]).run()
    assert run.words == ["opening", "measuring", "stalled", "measuring", "ended"]


def test_three_frame_times_count_where_frames_are_slow() -> None:
    recorder = Recorder([None] * 5 + [1.4, None, 1.8, None])
    opened = recorder._open

    def open_slow() -> Observer:
        observer = opened()
        assert isinstance(observer, ScriptedObserver)
        observer.interval_s = 0.5
        return observer

    recorder.acquisition._open_observer = open_slow
    recorder.run()
    # frame times of 0.5 s: 1.4 s of silence is no stall, 1.8 s is
    assert recorder.words == ["opening", "measuring", "stalled", "measuring", "ended"]


def test_long_silence_of_a_live_source_is_a_loss_and_opens_it_anew() -> None:
    run = Recorder([None, None, 9.0], [None, None]).run()
    assert run.words == ["opening", "measuring", "stalled", "lost", "measuring", "ended"]
    assert run.clock.waits == [0.5]


def test_a_folder_on_a_slow_disk_is_waited_for() -> None:
    run = Recorder([None, 100.0, None], live=False).run()
    assert run.words == ["opening", "measuring", "ended"]


def test_seq_goes_on_over_reopenings_and_gaps_of_the_source_are_counted() -> None:
    recorder = Recorder([None, None, SourceLost("gone")], [None, None, None])
    opened = recorder._open

    def open_with_gap() -> Observer:
        observer = opened()
        assert isinstance(observer, ScriptedObserver)
        observer.skip = 2 if len(recorder.observers) == 2 else 0  # after its first frame
        return observer

    recorder.acquisition._open_observer = open_with_gap
    recorder.run()
    assert recorder.seqs == [0, 1, 2, 5, 6]
    assert recorder.acquisition.missed == 2


def test_gaps_of_all_openings_are_summed() -> None:
    recorder = Recorder([None, None, SourceLost("gone")], [None, None])
    opened = recorder._open

    def open_with_gap() -> Observer:
        observer = opened()
        assert isinstance(observer, ScriptedObserver)
        observer.skip = len(recorder.observers)  # 1, then 2, after its first frame
        return observer

    recorder.acquisition._open_observer = open_with_gap
    recorder.run()
    assert recorder.seqs == [0, 2, 3, 6]
    assert recorder.acquisition.missed == 3


def test_back_off_grows_to_ten_seconds_and_begins_anew_after_a_frame() -> None:
    gone = SourceLost("gone")
    run = Recorder([None, gone], *[[gone]] * 6, [None, gone], [None]).run()
    assert run.clock.waits == [0.5, 1.0, 2.0, 5.0, 10.0, 10.0, 10.0, 0.5]


def test_a_lost_source_stays_lost_until_a_frame_comes() -> None:
    gone = SourceLost("gone")
    run = Recorder([None, gone], [SourceLost("not connected")], [None]).run()
    assert run.states[2:5] == [
        (State.LOST, "gone"),
        (State.LOST, "not connected"),
        (State.MEASURING, ""),
    ]


@pytest.mark.parametrize(
    "error", [SourceLost("not connected"), Busy("in use"), BadInput("no such")]
)
def test_a_source_that_cannot_be_opened_fails_unless_it_is_waited_for(error: Exception) -> None:
    assert Recorder([error]).run().states[-1] == (State.FAILED, str(error))
    waiting = Recorder([error], [None], patient=True).run()
    assert waiting.words == ["opening", "lost", "measuring", "ended"]


def test_once_it_has_given_frames_a_live_source_is_always_waited_for() -> None:
    run = Recorder([None, SourceLost("gone")], [BadInput("camera 0 is not there")], [None]).run()
    assert run.words == ["opening", "measuring", "lost", "lost", "measuring", "ended"]


def test_a_folder_that_breaks_has_failed() -> None:
    run = Recorder([None, SourceLost("the disk is gone")], live=False).run()
    assert run.states[-1] == (State.FAILED, "the disk is gone")


@pytest.mark.parametrize(("live", "refused_seq"), [(True, 0), (False, 0), (False, 1)])
def test_what_the_listener_refuses_has_failed_and_is_not_tried_again(
    live: bool, refused_seq: int
) -> None:
    recorder = Recorder([None, None, None], live=live, patient=True)

    def refuse(observation: Observation, observer: Observer) -> None:
        if observation.seq == refused_seq:
            raise BadInput("another size")

    recorder.acquisition._on_observation = refuse
    recorder.run()
    assert recorder.states[-1] == (State.FAILED, "another size")


def test_a_measured_live_source_that_turns_unfit_is_tried_until_it_fits_again() -> None:
    recorder = Recorder([None, None], [None], [None], [None])

    def refuse(observation: Observation, observer: Observer) -> None:
        if 1 <= observation.seq <= 3:
            raise BadInput("another size")
        recorder.seqs.append(observation.seq)

    recorder.acquisition._on_observation = refuse
    recorder.run()
    assert recorder.words == ["opening", "measuring", "lost", "measuring", "ended"]
    assert recorder.states[2] == (State.LOST, "another size")
    assert recorder.seqs == [0, 4]
    assert recorder.clock.waits == [0.5, 1.0, 2.0]


def test_a_source_that_vanishes_is_given_up_in_time() -> None:
    gone = SourceLost("gone")
    recorder = Recorder([None, gone], [gone], [None, gone], *[[gone]] * 9)
    recorder.acquisition._give_up_after_s = 6.0
    recorder.run()
    assert recorder.words == ["opening", "measuring", "lost", "measuring", "lost", "failed"]
    assert recorder.states[-1] == (State.FAILED, "gone; given up after 6 s")
    assert recorder.clock.waits == [0.5, 1.0, 0.5, 1.0, 2.0, 2.5]  # 6 s from the second loss


def test_a_fault_of_our_own_is_shown_in_one_line() -> None:
    recorder = Recorder([None])

    def fault(observation: Observation, observer: Observer) -> None:
        raise ZeroDivisionError("a fault")

    recorder.acquisition._on_observation = fault
    recorder.run()
    state, detail = recorder.states[-1]
    assert state is State.FAILED
    assert "ZeroDivisionError" in detail
    assert "\n" not in detail


def test_a_live_source_without_a_first_frame_is_lost_in_the_end() -> None:
    run = Recorder([40.0], patient=True).run()
    assert run.words == ["opening", "lost"]


def test_the_last_picture_outlasts_the_source_with_the_seq_of_its_reading() -> None:
    run = Recorder([None, SourceLost("gone")], [None, None]).run()
    picture = run.acquisition.picture(0.0)
    assert picture is not None
    assert picture.frame.seq == run.seqs[-1] == 2


def test_one_that_was_stopped_says_nothing_more() -> None:
    """A source that returns long after the stop must not mix with the next one's readings."""
    recorder = Recorder([None, None, SourceLost("gone")])
    opened = recorder._open

    def open_stopping_in_the_second_read() -> Observer:
        observer = opened()
        observe = observer.observe

        def observe_late(timeout_s: float) -> Observation:
            seen = observe(timeout_s)
            if seen.seq == 1:
                recorder.acquisition.stop()
            return seen

        observer.observe = observe_late
        return observer

    recorder.acquisition._open_observer = open_stopping_in_the_second_read
    recorder.run()
    assert recorder.seqs == [0]
    assert recorder.words == ["opening", "measuring"]
    assert recorder.observers[0].left == 1


def test_stop_ends_a_long_pause_at_once() -> None:
    clock = FakeClock()
    opened = threading.Event()

    def absent() -> Observer:
        opened.set()
        return ScriptedObserver(clock, [SourceLost("not connected")])

    acquisition = Acquisition(
        absent, on_observation=lambda *_: None, on_state=lambda *_: None, patient=True
    )
    acquisition._failures = 5  # the next pause would last ten seconds
    acquisition.start()
    assert opened.wait(5.0)
    begin_s = time.monotonic()
    acquisition.stop()
    assert time.monotonic() - begin_s < 1.0
    assert acquisition._thread is not None
    assert not acquisition._thread.is_alive()
