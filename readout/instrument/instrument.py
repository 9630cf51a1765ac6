"""The instrument: one source, measured, with its calibration, average and zero.

It knows no network. Readings and events go to listeners, called from the acquisition's thread;
everything else may be asked from any thread.
"""

from __future__ import annotations

import contextlib
import math
import threading
import time
from collections.abc import Callable
from dataclasses import replace

from readout.angle import Calibration, reading_of
from readout.capture.source_name import encodable, source_name
from readout.capture.timebase import TimeBase
from readout.errors import BadInput, NotNow
from readout.instrument.acquisition import Acquisition, State
from readout.instrument.averaging import Average, Statistic, TrailingWindow, average_of
from readout.instrument.observer import Observer, Picture
from readout.instrument.opening import open_observer
from readout.instrument.scale import Optics, calibration_for
from readout.instrument.values import Event, Status
from readout.instrument.zero import Reference, Zero, zero_from
from readout.model import Observation, Reading, Target
from readout.units import signed
from readout.utc import utc_text

SOURCE_CHANGED = "source"
"""The event that tells of another source; what is recorded of the one before ends with it."""

_EVENT_OF_STATE = {
    State.STALLED: "stalled",
    State.LOST: "lost",
    State.ENDED: "ended",
    State.FAILED: "failed",
}


class Instrument:
    """See the module. ``scale``: a calibration from a file, or the optics for a nominal one, or
    None; without a file, a source's own calibration (the simulator's) is used. ``t_s`` counts from
    ``start``, or, with ``from_first_frame``, from the first frame. UTC is counted on from ``start``
    however often the wall clock is set, but for recorded frames that are not replayed live.
    ``observe`` opens the observer for a source and a target.
    """

    def __init__(
        self,
        *,
        scale: Calibration | Optics | None = None,
        window_s: float = 1.0,
        statistic: Statistic = Statistic.MEAN,
        observe: Callable[[str, Target], Observer] = open_observer,
        start: TimeBase | None = None,
        from_first_frame: bool = False,
        clock_ns: Callable[[], int] = time.monotonic_ns,
    ) -> None:
        self.start_time = start or TimeBase.now()
        self.on_reading: list[Callable[[Reading], None]] = []
        self.on_event: list[Callable[[Event], None]] = []
        self.on_state: list[Callable[[State, str], None]] = []
        self._observe = observe
        self._clock_ns = clock_ns
        self._lock = threading.RLock()
        self._scale = scale
        self._calibration: Calibration | None = None
        self._own_calibration: Calibration | None = None
        self._statistic = statistic
        self._window = TrailingWindow(window_s)
        self._average: tuple[float, Average] | None = None
        self._reference: Reference | None = None
        self._zero_wanted = ""
        self._first_seq: int | None = None
        self._newest: tuple[Observation, Reading] | None = None
        self._came_ns = 0
        self._acquisition: Acquisition | None = None
        self._source: str | None = None
        self._source_given: str | None = None
        self._target = Target.CROSSHAIR
        self._state = State.OPENING
        self._detail = ""
        self._size_px: tuple[int, int] | None = None
        self._size_known = self._scale_chosen = False
        self._from_first_frame = from_first_frame
        self._t_zero_ns = None if from_first_frame else self.start_time.t_mono_ns
        self._frames = self._unusable = self._missed = 0

    # -- the source ---------------------------------------------------------------------------

    def use(
        self,
        source: str,
        *,
        target: Target = Target.CROSSHAIR,
        patient: bool = False,
        give_up_after_s: float = math.inf,
    ) -> Acquisition:
        """Measure ``source`` instead of what was measured before.

        ``patient``: wait for a live source that is not there yet. One that vanishes is waited for
        ``give_up_after_s``. It begins with the ``start`` (a thread of its own) or the ``run`` (this
        thread) of the acquisition returned.
        """
        before = self._acquisition
        if before is not None:
            before.stop()
        with self._lock:
            changed_from = self._source if source != self._source_given else None
            self._source_given = source
            self._source, self._target = source_name(source), target
            self._state, self._detail = State.OPENING, ""
            self._missed += before.missed if before else 0
            self._size_px = self._calibration = self._newest = None
            self._size_known = False
            zero_lost = self._forget_readings()
            self._acquisition = acquisition = Acquisition(
                lambda: self._observe(source, target),
                on_observation=self._take,
                on_state=self._change_state,
                first_seq=before.next_seq if before else 0,
                patient=patient,
                give_up_after_s=give_up_after_s,
                clock_ns=self._clock_ns,
            )
        if changed_from is not None:
            self.tell(SOURCE_CHANGED, f"the source is {self._source} now, it was {changed_from}")
        self._tell_lost(zero_lost, "the source was opened anew")
        return acquisition

    def stop(self) -> None:
        """End the acquisition; returns within a second."""
        acquisition = self._acquisition
        if acquisition is not None:
            acquisition.stop()

    def picture(self, timeout_s: float = 1.0) -> Picture | None:
        """The newest picture and what was seen in it; None while there is none."""
        acquisition = self._acquisition
        return acquisition.picture(timeout_s) if acquisition is not None else None

    def prepare_anew(self) -> None:
        """What is known of the camera has changed: use it from the next frame on."""
        acquisition = self._acquisition
        if acquisition is not None:
            acquisition.prepare_anew()

    # -- what it shows ------------------------------------------------------------------------

    @property
    def newest(self) -> tuple[Observation, Reading] | None:
        """Of the source in use; None before its first frame and once it is lost or has failed."""
        with self._lock:
            return self._newest

    @property
    def age_s(self) -> float | None:
        """Time since the newest reading came; None while there is none."""
        with self._lock:
            return None if self._newest is None else (self._clock_ns() - self._came_ns) * 1e-9

    @property
    def source(self) -> str | None:
        """The source in use, by the name that may be shown and kept."""
        return self._source

    @property
    def scale(self) -> Calibration | Optics | None:
        """What was given as the scale; what is used of it: ``status().calibration``."""
        return self._scale

    @property
    def target(self) -> Target:
        return self._target

    @property
    def window_s(self) -> float:
        """Length of the window the average is taken over."""
        return self._window.window_s

    @property
    def calibration(self) -> Calibration | None:
        """The one the next reading will have, as far as it is known."""
        with self._lock:
            return self._calibration

    @property
    def zero(self) -> Zero | None:
        reference = self.reference
        return reference.zero if reference is not None else None

    @property
    def reference(self) -> Reference | None:
        """The zero with what readings relative to it need."""
        with self._lock:
            return self._reference

    def status(self) -> Status:
        acquisition = self._acquisition
        now_ns = self._clock_ns()
        with self._lock:
            width_px, height_px = self._size_px or (None, None)
            measuring = acquisition is not None and self._state in (State.MEASURING, State.STALLED)
            return Status(
                source=self._source,
                state=self._state,
                state_detail=self._detail,
                frames_per_s=acquisition.pace.per_s(now_ns) if acquisition and measuring else 0.0,
                frames=self._frames,
                frames_unusable=self._unusable,
                missed=self._missed + (acquisition.missed if acquisition else 0),
                image_width_px=width_px,
                image_height_px=height_px,
                calibration=self._calibration,
                zero=self.zero,
                zero_wanted=self._zero_wanted,
                prepared_utc=None if self._newest is None else self._newest[0].prepared,
            )

    def average(self) -> Average | None:
        """The average over the trailing window; None before the first reading and while none comes.

        It is taken anew after a hundredth of the window, so that a long one costs no more than a
        short one, and without holding up who measures.
        """
        with self._lock:
            if self._newest is None or self._state is State.STALLED:
                return None
            t_s, window, statistic = self._newest[1].t_s, self._window, self._statistic
            if self._average is not None:
                taken_s, average = self._average
                if abs(t_s - taken_s) < window.window_s / 100:
                    return average
            rows, history = window.rows(), window.history()
        average = average_of(rows, window_s=window.window_s, statistic=statistic, history=history)
        with self._lock:
            if window is self._window and statistic is self._statistic:  # else it is another's
                self._average = t_s, average
        return average

    # -- what can be set ----------------------------------------------------------------------

    def set_averaging(self, window_s: float, statistic: Statistic) -> None:
        """Another window or statistic; what the old window holds is kept where it still counts."""
        with self._lock:
            before, self._window = self._window, TrailingWindow(window_s)
            self._window.take_over(before)
            self._statistic = statistic
            self._average = None

    def set_scale(self, scale: Calibration | Optics | None) -> None:
        """Another scale, from the next reading on; the zero and the average start anew. Where the
        source has ended there is no next one: the newest reading is made anew.

        A calibration that does not fit the pictures makes the acquisition fail: see
        ``refuse_unfit`` for asking first.
        """
        with self._lock:
            if scale == self._scale:
                return
            self._scale = scale
            self._scale_chosen = False
            zero_lost = self._forget_readings()
            if self._state is State.ENDED:
                self._read_newest_anew()
        if self._acquisition is not None:
            self.tell("calibration", "the scale was changed")
        self._tell_lost(zero_lost, "the scale was changed")

    def set_zero(self) -> Zero:
        """Zero at the averaged value. Raises NotNow while flagged or moving, or none comes."""
        with self._lock:
            newest, rows = self.reading_of_now("set the zero"), self._window.rows()
            average = average_of(
                rows,
                window_s=self._window.window_s,
                statistic=self._statistic,
                history=self._window.history(),
            )
            zero = zero_from(
                newest,
                rows,
                average,
                now_utc_ns=self.start_time.utc_ns(self._clock_ns()),
            )
            if self._calibration is None or self._first_seq is None:
                raise NotNow("there is no scale yet: give one, then set the zero")
            self._reference = Reference(zero, self._calibration, self._first_seq)
            self._zero_wanted = ""
        self.tell(
            "zero", f"zero set at X {signed(zero.x_arcsec, 3)}″, Y {signed(zero.y_arcsec, 3)}″"
        )
        return zero

    def reading_of_now(self, then: str) -> Reading:
        """The newest reading. Raises NotNow if it is not of now: what a source showed long ago is
        not what stands before the instrument. ``then``: what to do once it is, for the message.
        """
        acquisition, age_s = self._acquisition, self.age_s
        newest, since = self._newest, self._first_seq
        if acquisition is None or newest is None or age_s is None or since is None:
            raise NotNow(f"there is no reading yet: wait for the first one, then {then}")
        if self._state is not State.MEASURING:
            raise NotNow(
                f"no readings come from {self._source} ({self._state.value}): "
                f"wait until it measures again, then {then}"
            )
        if age_s > acquisition.stalled_after_s:
            raise NotNow(f"the newest reading is {age_s:.1f} s old: wait for the next, then {then}")
        return newest[1]

    def clear_zero(self) -> None:
        with self._lock:
            before, self._reference = self._reference, None
        if before is not None:
            self.tell("zero", "the zero was taken back")

    def optics_changed(self, what: str) -> None:
        """Tell that ``what`` of the optics is another now: no zero from before counts any more."""
        with self._lock:
            self._zero_wanted = f"{what} changed"
            zero_lost = self._forget_readings()
        self.tell("optics", f"optics changed: {what}; set a new zero")
        self._tell_lost(zero_lost, "the optics were changed")

    # -- called by the acquisition ------------------------------------------------------------

    def _take(self, observation: Observation, observer: Observer) -> None:
        size_px = observation.width_px, observation.height_px
        zero_lost = False
        with self._lock:
            if self._newest is not None and observation.prepared != self._newest[0].prepared:
                zero_lost = self._forget_readings()  # the place of the same return is another now
            if not self._size_known:  # newly opened: perhaps in another mode
                self._size_px, self._size_known, self._scale_chosen = size_px, True, False
            elif self._size_px != size_px:
                raise _size_changed(self._size_px, size_px, observation.name)
            if not self._scale_chosen:
                self._own_calibration = observer.calibration
                self._calibration = self._calibration_for(size_px)
                self._scale_chosen = True
            if self._t_zero_ns is None:
                self._t_zero_ns = observation.t_mono_ns
            t_s = (observation.t_mono_ns - self._t_zero_ns) * 1e-9
            if observer.live or not self._from_first_frame:  # on the session's clock
                t_utc_ns = self.start_time.utc_ns(observation.t_mono_ns)
                observation = replace(observation, t_utc_ns=t_utc_ns)
            reading = reading_of(observation, self._calibration, t_s)
            self._window.add(reading)
            if self._first_seq is None:
                self._first_seq = reading.seq
            self._newest = observation, reading
            self._came_ns = self._clock_ns()
            self._frames += 1
            self._unusable += not observation.sighting.found
        self._tell_lost(zero_lost, "the fixed frame is another now")
        for listener in self.on_reading:
            listener(reading)

    def _read_newest_anew(self) -> None:
        if self._newest is None:
            return
        observation, before = self._newest
        size_px = observation.width_px, observation.height_px
        self._calibration = None
        with contextlib.suppress(BadInput):  # one that does not fit these pictures is none
            self._calibration = self._calibration_for(size_px)
        self._newest = observation, reading_of(observation, self._calibration, before.t_s)

    def _calibration_for(self, size_px: tuple[int, int]) -> Calibration | None:
        return calibration_for(
            self._scale,
            self._own_calibration,
            size_px=size_px,
            target=self._target,
            created_utc=utc_text(self.start_time.utc_ns(self._clock_ns())),
        )

    def _change_state(self, state: State, detail: str) -> None:
        detail = encodable(detail)
        zero_lost = False
        with self._lock:
            before, self._state, self._detail = self._state, state, detail
            if state is State.LOST:
                self._size_known = False
            if state in (State.LOST, State.FAILED):
                self._newest = None
                zero_lost = self._forget_readings()
        if state is State.MEASURING:
            happened = "recovered" if before is State.STALLED else "opened"
            self.tell(happened, f"{self._source}: measuring")
        elif state in _EVENT_OF_STATE and state is not before:
            self.tell(_EVENT_OF_STATE[state], detail or f"{self._source}: {state.value}")
        self._tell_lost(zero_lost, "the source was lost")
        for listener in self.on_state:
            listener(state, detail)

    def now(self) -> tuple[float, int]:
        """The present: seconds since the program's start, and UTC in nanoseconds."""
        t_ns = self._clock_ns()
        return (t_ns - self.start_time.t_mono_ns) * 1e-9, self.start_time.utc_ns(t_ns)

    def tell(self, event: str, text: str) -> None:
        """Tell the listeners of something that happens now."""
        happened = Event(*self.now(), event, encodable(text))
        for listener in self.on_event:
            listener(happened)

    def _forget_readings(self) -> bool:
        """A zero or an average never reaches across a gap in which anything may have moved.

        True if there was a zero.
        """
        self._window = TrailingWindow(self._window.window_s)
        before, self._average, self._reference = self._reference, None, None
        self._first_seq = None
        return before is not None

    def _tell_lost(self, zero_lost: bool, why: str) -> None:
        if zero_lost:
            self.tell("zero", f"the zero is gone: {why}")


def _size_changed(
    before: tuple[int, int] | None, now: tuple[int, int], name: str | None
) -> BadInput:
    was = f"{before[0]} × {before[1]}" if before else "unknown"
    return BadInput(
        f"{name or 'the picture'} is {now[0]} × {now[1]} px, those before it were {was} px: "
        "give pictures of one size"
    )
