"""The width of the target's lines while somebody turns the focus, picture by picture."""

from __future__ import annotations

import threading

from readout.angle.focus import FocusTrace, focus_sample, forget_best
from readout.instrument.instrument import Instrument
from readout.model import Reading

WATCHED_S = 10.0
"""Nothing is followed once nobody has asked for so long."""


class Focusing:
    """Follows the width while it is asked for, in seconds of the instrument's clock."""

    def __init__(self, instrument: Instrument) -> None:
        self._instrument = instrument
        self._lock = threading.Lock()
        self._trace = FocusTrace()
        self._asked_s: float | None = None
        instrument.on_reading.append(self._take)

    def trace(self) -> FocusTrace:
        """What has been seen since it was asked for; it begins anew after a pause."""
        now_s, _ = self._instrument.now()
        with self._lock:
            if self._asked_s is None or now_s - self._asked_s > WATCHED_S:
                self._trace = FocusTrace()
            self._asked_s = now_s
            return self._trace

    def forget_best(self) -> FocusTrace:
        """Another target or another light: the best so far counts no more."""
        with self._lock:
            self._trace = forget_best(self._trace)
            return self._trace

    def _take(self, reading: Reading) -> None:
        asked_s = self._asked_s
        if asked_s is None or self._instrument.now()[0] - asked_s > WATCHED_S:
            return
        newest = self._instrument.newest
        if newest is None or newest[1].seq != reading.seq:
            return
        sample = focus_sample(newest[0].sighting)
        with self._lock:
            self._trace = self._trace.add(sample)
