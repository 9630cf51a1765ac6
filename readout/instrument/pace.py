"""How often frames come."""

from __future__ import annotations

import itertools
from collections import deque
from statistics import median


class Pace:
    """Keeps the arrival times of the frames of the last two seconds (of the last nine at least)."""

    def __init__(self, *, span_s: float = 2.0) -> None:
        self._span_ns = round(span_s * 1e9)
        self._times_ns: deque[int] = deque(maxlen=2000)

    def add(self, t_ns: int) -> None:
        self._times_ns.append(t_ns)
        while len(self._times_ns) > 9 and t_ns - self._times_ns[0] > self._span_ns:
            self._times_ns.popleft()

    @property
    def interval_s(self) -> float | None:
        """Median time from frame to frame; None before there are two."""
        times = list(self._times_ns)
        if len(times) < 2:
            return None
        return median(b - a for a, b in itertools.pairwise(times)) * 1e-9

    def per_s(self, now_ns: int) -> float:
        """Frames a second over the span that ends now; 0 when none came in it."""
        times = [t for t in list(self._times_ns) if now_ns - t <= self._span_ns]
        if len(times) < 2 or times[-1] == times[0]:
            return 0.0
        rate = (len(times) - 1) / ((times[-1] - times[0]) * 1e-9)
        silent_s = (now_ns - times[-1]) * 1e-9
        return rate if silent_s * rate < 3 else len(times) / (self._span_ns * 1e-9)
