"""The thread that keeps a source open and observations coming.

States: *opening* (being opened, or no frame yet), *measuring*, *stalled* (open, but no frame for
half a second or three frame times, whichever is longer), *lost* (gone; opened again after a
pause), *ended* (a folder or video read to its end) and *failed* (cannot be opened: the user must
do something). Every wait is bounded; clock and waiting are arguments, so that tests need neither.
"""

from __future__ import annotations

import logging
import math
import threading
import time
from collections.abc import Callable
from dataclasses import replace
from enum import StrEnum

from readout.errors import BadInput, ReadoutError, SourceEnded, SourceLost, SourceStalled
from readout.instrument.observer import Observer, OpenObserver, Picture
from readout.instrument.pace import Pace
from readout.model import Observation

log = logging.getLogger(__name__)

BACK_OFF_S = (0.5, 1.0, 2.0, 5.0, 10.0)
READ_TIMEOUT_S = 0.2
STALLED_AFTER_S = 0.5
LOST_AFTER_S = 5.0
OPENED_WITHIN_S = 35.0


class State(StrEnum):
    """What the source is doing."""

    OPENING = "opening"
    MEASURING = "measuring"
    STALLED = "stalled"
    LOST = "lost"
    ENDED = "ended"
    FAILED = "failed"


class Refused(ReadoutError):
    """What came from the source cannot be used with these settings."""


class Acquisition:
    """Opens, reads and re-opens one source until it ends, fails or is stopped.

    ``on_observation`` gets each observation, its seq counted on from ``first_seq`` through all
    re-openings (what the source itself counted as missing stays a gap). ``on_state`` gets each
    change of state or of its detail, one line for people. Both are called from the acquisition's
    own thread. ``missed`` counts the gaps, all openings together.
    ``patient``: wait for a live source that is not there at first; otherwise the first opening
    must succeed. A live source that has been measured is always waited for, also where it came back
    with pictures that cannot be used, until it has been gone for ``give_up_after_s``.
    ``wait(seconds)`` returns early, with True, when the acquisition is stopped.
    """

    def __init__(
        self,
        open_observer: OpenObserver,
        *,
        on_observation: Callable[[Observation, Observer], None],
        on_state: Callable[[State, str], None],
        first_seq: int = 0,
        patient: bool = False,
        give_up_after_s: float = math.inf,
        clock_ns: Callable[[], int] = time.monotonic_ns,
        wait: Callable[[float], bool] | None = None,
    ) -> None:
        self._open_observer = open_observer
        self._on_observation = on_observation
        self._on_state = on_state
        self._patient = patient
        self._give_up_after_s = give_up_after_s
        self._measured = False
        self._lost_since_ns: int | None = None
        self._clock_ns = clock_ns
        self._stop = threading.Event()
        self._wait = wait or self._stop.wait
        self._thread: threading.Thread | None = None
        self._observer: Observer | None = None
        self._last_picture: Picture | None = None
        self._failures = 0
        self._seq_offset = 0
        self._state: State | None = None
        self._detail = ""
        self.next_seq = first_seq
        self.missed = 0
        self.pace = Pace()

    def start(self) -> None:
        """Run in a thread of its own."""
        self._thread = threading.Thread(target=self.run, name="acquisition", daemon=True)
        self._thread.start()

    def stop(self, timeout_s: float = 1.0) -> None:
        """Ask the loop to end and wait for it, ``timeout_s`` at most."""
        self._stop.set()
        if self._thread is not None:
            self._thread.join(timeout_s)

    @property
    def stalled_after_s(self) -> float:
        """Silence longer than this is a stall: half a second or three frame times."""
        return max(STALLED_AFTER_S, 3 * (self.pace.interval_s or 0.0))

    def picture(self, timeout_s: float) -> Picture | None:
        """The newest picture with its seq as counted here; None while there is none.

        Of a source read in this process, the last one is still there when it has ended.
        """
        observer, offset = self._observer, self._seq_offset
        if observer is None:
            return self._last_picture
        picture = observer.picture(timeout_s)
        if picture is None:
            return None
        return replace(picture, frame=replace(picture.frame, seq=picture.frame.seq + offset))

    def prepare_anew(self) -> None:
        """What is known of the camera has changed; an observer not yet open will see by itself."""
        observer = self._observer
        if observer is not None:
            observer.prepare_anew()

    def run(self) -> None:
        """The loop itself; returns when the source has ended or failed, or on ``stop``."""
        while not self._stop.is_set():
            if self._state is not State.LOST:  # which it stays until a frame comes again
                self._enter(State.OPENING, "")
            live = False
            try:
                observer = self._open_observer()
                live = observer.live
                with observer:
                    self._follow(observer)
                return
            except SourceEnded as end:
                if self._observer is None:  # it has given nothing
                    self._enter(State.FAILED, f"not one frame could be read ({end})")
                else:
                    self._enter(State.ENDED, str(end))
                return
            except ReadoutError as error:
                if not self._may_come_back(error, live=live):
                    return
            except Exception as error:
                log.debug("acquisition failed", exc_info=True)
                kind = type(error).__name__
                self._enter(State.FAILED, f"internal error, please report it: {kind}: {error}")
                return
            finally:
                self._leave()
            pause_s = BACK_OFF_S[min(self._failures, len(BACK_OFF_S) - 1)]
            self._failures += 1
            self._wait(max(0.0, min(pause_s, self._give_up_after_s - self._lost_s())))

    def _may_come_back(self, error: ReadoutError, *, live: bool) -> bool:
        """Whether to wait and open the source anew; the state then says why, or that it is over."""
        waited_for = self._measured if isinstance(error, Refused) else self._patient
        if not (live and waited_for):
            self._enter(State.FAILED, str(error))
            return False
        if self._lost_since_ns is None:
            self._lost_since_ns = self._clock_ns()
        if self._lost_s() >= self._give_up_after_s:
            self._enter(State.FAILED, f"{error}; given up after {self._give_up_after_s:g} s")
            return False
        self._enter(State.LOST, str(error))
        return True

    def _lost_s(self) -> float:
        since_ns = self._lost_since_ns
        return 0.0 if since_ns is None else (self._clock_ns() - since_ns) * 1e-9

    def _follow(self, observer: Observer) -> None:
        last_ns = self._clock_ns()
        nothing_yet = True
        self.pace = Pace()
        while not self._stop.is_set():
            try:
                observation = observer.observe(READ_TIMEOUT_S)
            except SourceStalled:
                self._judge_silence(observer, (self._clock_ns() - last_ns) * 1e-9, nothing_yet)
                continue
            if nothing_yet:
                nothing_yet = False
                self._seq_offset = self.next_seq - observation.seq
                self._observer = observer
            last_ns = self._clock_ns()
            self.pace.add(last_ns)
            self._deliver(observation, observer)

    def _deliver(self, observation: Observation, observer: Observer) -> None:
        if self._stop.is_set():  # it came too late: somebody else may be measuring by now
            return
        seq = observation.seq + self._seq_offset
        self.missed += seq - self.next_seq
        self.next_seq = seq + 1
        try:
            self._on_observation(replace(observation, seq=seq), observer)
        except BadInput as error:
            raise Refused(str(error)) from error
        self._failures = 0
        self._patient = self._measured = True
        self._lost_since_ns = None
        self._enter(State.MEASURING, "")

    def _leave(self) -> None:
        """Keep what outlasts an observer; it is closed."""
        self._last_picture = self.picture(0.0)
        self._observer = None

    def _judge_silence(self, observer: Observer, silent_s: float, nothing_yet: bool) -> None:
        if not observer.live:  # a folder on a slow disk, a replay before its next frame
            return
        if nothing_yet:
            if silent_s > OPENED_WITHIN_S:
                raise SourceLost(f"no frame within {OPENED_WITHIN_S:.0f} s of opening")
            return
        limit_s = self.stalled_after_s
        if silent_s > limit_s:
            self._enter(State.STALLED, "no new frame from the source")
        if silent_s > max(LOST_AFTER_S, 10 * limit_s):
            raise SourceLost(f"no frame for {silent_s:.0f} s")

    def _enter(self, state: State, detail: str) -> None:
        if (state, detail) != (self._state, self._detail) and not self._stop.is_set():
            self._state, self._detail = state, detail
            self._on_state(state, detail)
