"""How a command that runs without end is ended."""

from __future__ import annotations

import signal
from collections.abc import Callable, Iterator
from contextlib import contextmanager


@contextmanager
def ended_by_signals(stop: Callable[[], object]) -> Iterator[None]:
    """SIGINT and SIGTERM call ``stop`` and do nothing else: the command ends by itself, cleanly."""
    before = {
        number: signal.signal(number, lambda *_: stop())
        for number in (signal.SIGINT, signal.SIGTERM)
    }
    try:
        yield
    finally:
        for number, handler in before.items():
            signal.signal(number, handler)
