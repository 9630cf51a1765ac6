"""A folder or video at its own speed, for a live view of something recorded."""

from __future__ import annotations

import dataclasses
import time
from collections.abc import Callable
from types import TracebackType
from typing import Self

from readout.capture.source import Source
from readout.capture.timebase import Clock, TimeBase
from readout.errors import SourceStalled
from readout.model import Frame


class PacedSource:
    """Hands out each frame of ``source`` when its time since the first one has passed.

    Frames are stamped anew with the instant they are due, as if a camera had just taken them: a
    replay is on the same clock as everything else of the session.
    """

    live = False

    def __init__(
        self,
        source: Source,
        *,
        clock: Clock = time.monotonic_ns,
        sleep: Callable[[float], None] = time.sleep,
    ) -> None:
        """``sleep`` takes seconds."""
        self._source, self._clock, self._sleep = source, clock, sleep
        self._timebase = TimeBase(0, 0)
        self._offset_ns: int | None = None
        self._held: Frame | None = None

    def __enter__(self) -> Self:
        self._source.__enter__()
        self._timebase = TimeBase.now(self._clock)
        self._offset_ns = self._held = None
        return self

    def __exit__(
        self,
        exc_type: type[BaseException] | None,
        exc: BaseException | None,
        tb: TracebackType | None,
    ) -> None:
        self._held = None
        self._source.__exit__(exc_type, exc, tb)

    def read(self, timeout_s: float) -> Frame:
        """The next frame at its time; see `readout.capture.source.Source`."""
        frame = self._held or self._source.read(timeout_s)
        if self._offset_ns is None:
            self._offset_ns = self._clock() - frame.t_mono_ns
        due_ns = frame.t_mono_ns + self._offset_ns
        wait_s = (due_ns - self._clock()) * 1e-9
        if wait_s > timeout_s:
            self._held = frame
            self._sleep(timeout_s)
            raise SourceStalled(f"the next frame is due in {wait_s:.3g} s")
        self._held = None
        if wait_s > 0:
            self._sleep(wait_s)
        return dataclasses.replace(frame, t_mono_ns=due_ns, t_utc_ns=self._timebase.utc_ns(due_ns))
