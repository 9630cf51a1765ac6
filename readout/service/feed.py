"""Readings on their way to viewers: the last ten minutes kept, each viewer with its own queue.

The last events are kept as well, and are the first that a new viewer gets.

The producer never waits for a viewer. A queue that is full drops its oldest reading, or event, and
counts it. ``append`` and ``announce`` are called from the acquisition's thread; queues belong to
the event loop, and one call into the loop serves all of them.
"""

from __future__ import annotations

import asyncio
import itertools
import threading
from collections import deque
from collections.abc import Iterable
from dataclasses import dataclass, field

import numpy as np
from numpy.typing import NDArray

from readout.instrument import Event
from readout.model import Reading

KEPT_S = 600.0
KEPT_EVENTS = 30
FLOATS = (
    "t_s",
    "x_arcsec",
    "y_arcsec",
    "x_sd_arcsec",
    "y_sd_arcsec",
    "x_u_arcsec",
    "y_u_arcsec",
    "x_px",
    "y_px",
)
Columns = dict[str, NDArray[np.float64] | NDArray[np.int64]]


@dataclass(slots=True)
class Batch:
    """What came for one viewer since it last looked."""

    readings: list[Reading] = field(default_factory=list)
    events: list[Event] = field(default_factory=list)
    status_changed: bool = False


class Subscription:
    """The queue of one viewer, used within the event loop only. It begins with ``events``."""

    def __init__(self, capacity: int, events: Iterable[Event] = ()) -> None:
        self._readings: deque[Reading] = deque(maxlen=capacity)
        self._events: deque[Event] = deque(events, maxlen=100)
        self._status_changed = False
        self._ready = asyncio.Event()
        if self._events:
            self._ready.set()
        self.dropped = self.dropped_events = 0
        self.closed = False

    def offer(self, item: Reading | Event | None) -> None:
        """Queue a reading or an event; None says that the status has changed."""
        match item:
            case Reading():
                self.dropped += len(self._readings) == self._readings.maxlen
                self._readings.append(item)
            case Event():
                self.dropped_events += len(self._events) == self._events.maxlen
                self._events.append(item)
            case None:
                self._status_changed = True
        self._ready.set()

    def close(self) -> None:
        """Wake the viewer for the last time."""
        self.closed = True
        self._ready.set()

    async def next(self, timeout_s: float) -> Batch:
        """All that has come; an empty batch if nothing does within ``timeout_s``."""
        try:
            await asyncio.wait_for(self._ready.wait(), timeout_s)
        except TimeoutError:
            return Batch()
        self._ready.clear()
        batch = Batch(list(self._readings), list(self._events), self._status_changed)
        self._readings.clear()
        self._events.clear()
        self._status_changed = False
        return batch


class Feed:
    """See the module. ``capacity``: rows of memory, enough for ``KEPT_S`` at 200 a second."""

    def __init__(self, *, capacity: int = 120_000) -> None:
        self._capacity = capacity
        self._floats = {name: np.empty(capacity) for name in FLOATS}
        self._seq = np.empty(capacity, dtype=np.int64)
        self._quality = np.empty(capacity, dtype=np.int64)
        self._count = 0
        self._events: deque[Event] = deque(maxlen=KEPT_EVENTS)
        self._lock = threading.Lock()
        self._loop: asyncio.AbstractEventLoop | None = None
        self._subscriptions: set[Subscription] = set()
        self._dropped_before = 0

    # -- from the acquisition's thread --------------------------------------------------------

    def append(self, reading: Reading) -> None:
        with self._lock:
            row = self._count % self._capacity
            for name, column in self._floats.items():
                column[row] = getattr(reading, name)
            self._seq[row] = reading.seq
            self._quality[row] = reading.quality.value
            self._count += 1
        self._into_loop(reading)

    def announce(self, event: Event | None = None) -> None:
        """Tell all viewers of an event, or (None) that the status has changed."""
        self._into_loop(event)

    def _into_loop(self, item: Reading | Event | None) -> None:
        with self._lock:
            if isinstance(item, Event):
                self._events.append(item)
            if self._loop is not None and self._subscriptions:
                # Those of this instant: who comes later finds an event among the kept ones.
                self._loop.call_soon_threadsafe(_fan_out, self._subscriptions, item)

    # -- from the event loop ------------------------------------------------------------------

    def attach(self, loop: asyncio.AbstractEventLoop) -> None:
        """Serve viewers in ``loop``."""
        with self._lock:
            self._loop = loop

    def detach(self) -> None:
        """Let all viewers go; the loop is about to end."""
        with self._lock:
            self._loop = None
            for subscription in self._subscriptions:
                subscription.close()

    def subscribe(self, capacity: int) -> Subscription:
        """A queue for another viewer, which begins with the events of late."""
        with self._lock:
            subscription = Subscription(capacity, self._events)
            self._subscriptions = self._subscriptions | {subscription}
            if self._loop is None:
                subscription.close()
        return subscription

    def unsubscribe(self, subscription: Subscription) -> None:
        with self._lock:
            self._subscriptions = self._subscriptions - {subscription}
            self._dropped_before += subscription.dropped + subscription.dropped_events

    @property
    def dropped(self) -> int:
        """Readings and events lost to viewers that were slow, all viewers so far."""
        with self._lock:
            return self._dropped_before + sum(
                s.dropped + s.dropped_events for s in self._subscriptions
            )

    # -- from any thread ----------------------------------------------------------------------

    def rows(self, from_seq: int = 0) -> Columns:
        """Copies of the rows still held whose seq is ``from_seq`` or more, oldest first."""
        with self._lock:
            held = min(self._count, self._capacity)
            order = np.arange(self._count - held, self._count) % self._capacity
            t_s = self._floats["t_s"][order]
            recent = t_s > t_s[-1] - KEPT_S if held else np.zeros(0, dtype=bool)
            order = order[recent & (self._seq[order] >= from_seq)]
            columns: Columns = {"seq": self._seq[order]}
            columns.update({name: column[order] for name, column in self._floats.items()})
            columns["quality"] = self._quality[order]
        return columns


def _fan_out(subscriptions: Iterable[Subscription], item: Reading | Event | None) -> None:
    for subscription in subscriptions:
        subscription.offer(item)


def thinned(columns: Columns, points: int) -> Columns:
    """About ``points`` real rows that keep what a plot would show.

    Of each bin of neighbouring rows: the extreme rows in x and in y, and the first and the last
    row without an angle, so that a gap stays one. All rows if there are no more than ``points``.
    """
    n = columns["seq"].size
    if n <= points:
        return columns
    keep: set[int] = {0, n - 1}
    edges = np.linspace(0, n, max(1, points // 4) + 1).astype(int)
    for begin, end in itertools.pairwise(edges):
        for name in ("x_arcsec", "y_arcsec"):
            values = columns[name][begin:end]
            measured = np.flatnonzero(np.isfinite(values))
            if measured.size:
                inside = values[measured]
                keep.add(int(begin + measured[inside.argmin()]))
                keep.add(int(begin + measured[inside.argmax()]))
            if measured.size < values.size:
                missing = np.flatnonzero(~np.isfinite(values))
                keep.update((int(begin + missing[0]), int(begin + missing[-1])))
    rows = np.array(sorted(keep))
    return {name: column[rows] for name, column in columns.items()}
