"""One source measured through to its end, in the calling thread."""

from __future__ import annotations

import math
from collections.abc import Callable

from readout.errors import BadInput, ReadoutError
from readout.instrument.acquisition import Acquisition, State
from readout.instrument.instrument import Instrument
from readout.model import Reading, Target


class Measuring:
    """Hands each reading to ``write``, until the source ends, a limit is reached or ``stop``.

    ``most``: frames; ``seconds``: since the first frame. ``warn`` gets a line when the source
    falters and is waited for, ``give_up_after_s`` at most. ``n`` counts the readings written,
    ``good`` those without a doubt.
    """

    def __init__(
        self,
        instrument: Instrument,
        write: Callable[[Reading], None],
        *,
        warn: Callable[[str], None],
        most: int | None = None,
        seconds: float | None = None,
        give_up_after_s: float = math.inf,
    ) -> None:
        self._instrument = instrument
        self._write = write
        self._warn = warn
        self._most = most
        self._seconds = seconds
        self._give_up_after_s = give_up_after_s
        self._acquisition: Acquisition | None = None
        self._failure: str | None = None
        self._broken: OSError | ReadoutError | None = None
        self.n = 0
        self.good = 0
        instrument.on_reading.append(self._take)
        instrument.on_state.append(self._see)

    def run(self, source: str, *, target: Target) -> None:
        """Measure ``source``.

        Raises BadInput if it cannot be used, and the error of ``write``; what was written before
        stays.
        """
        self._acquisition = self._instrument.use(
            source, target=target, give_up_after_s=self._give_up_after_s
        )
        self._acquisition.run()
        if self._broken is not None:
            raise self._broken
        if self._failure is not None:
            raise BadInput(self._failure)

    def stop(self) -> None:
        """End after the reading in hand; may be called from a signal handler."""
        if self._acquisition is not None:
            self._acquisition.stop()

    def _take(self, reading: Reading) -> None:
        over = self._seconds is not None and reading.t_s > self._seconds
        if over or self._broken is not None or self.n == self._most:
            self.stop()
            return
        try:
            self._write(reading)
        except (OSError, ReadoutError) as error:  # a full disk, a reader who has left
            self._broken = error
            self.stop()
            return
        self.n += 1
        self.good += reading.good
        if self.n == self._most:
            self.stop()

    def _see(self, state: State, detail: str) -> None:
        if state is State.FAILED:
            self._failure = detail
        elif state is State.LOST:
            self._warn(f"{detail}; trying again {self._how_long()}")
        elif state is State.STALLED:
            self._warn(detail)

    def _how_long(self) -> str:
        limit_s = self._give_up_after_s
        return f"for {limit_s:g} s" if math.isfinite(limit_s) else "until it comes back"
