"""The time of a frame: monotonic for intervals, UTC from one anchor a session.

A wall clock may be set back or forth while readings run; the monotonic clock may not. So UTC is
asked for once, beside the monotonic clock, and counted on from there.
"""

from __future__ import annotations

import time
from collections.abc import Callable
from dataclasses import dataclass

Clock = Callable[[], int]
"""Nanoseconds of a monotonic clock."""


@dataclass(frozen=True, slots=True)
class TimeBase:
    """One instant on both clocks, in nanoseconds; UTC since 1970."""

    t_mono_ns: int
    t_utc_ns: int

    @classmethod
    def now(cls, clock: Clock = time.monotonic_ns, utc: Clock = time.time_ns) -> TimeBase:
        """The present instant.

        Of five tries the tightest is kept: a pause between the two clocks would shift every UTC
        of the session.
        """
        tries = []
        for _ in range(5):
            before, t_utc_ns, after = clock(), utc(), clock()
            tries.append((after - before, (before + after) // 2, t_utc_ns))
        _, t_mono_ns, t_utc_ns = min(tries)
        return cls(t_mono_ns, t_utc_ns)

    def utc_ns(self, t_mono_ns: int) -> int:
        """UTC, in nanoseconds since 1970, of an instant of the monotonic clock."""
        return self.t_utc_ns + t_mono_ns - self.t_mono_ns
