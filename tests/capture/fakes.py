"""A stand-in for OpenCV's camera: it gives what a test has laid out, and records what is set."""

from __future__ import annotations

from collections.abc import Callable

import cv2
import numpy as np


class FakeCapture:
    """Behaves as a driver's capture does, including its bad manners.

    ``stamps_ms``: what the driver says of the time of each picture; nothing without it.
    ``script``: what each grab brings: a picture, "fails" (grab refused), "torn" (grab taken,
    nothing to retrieve) or "silent" (no frame comes). Once a grab failed, retrieving gives the
    picture before, as V4L2 does; it goes on saying that it is open; and a second grab without
    retrieving in between gives the same picture once more.
    """

    def __init__(self, script: list[np.ndarray | str], *, opens: bool = True) -> None:
        self.script, self.opens = list(script), opens
        self.set_calls: list[tuple[int, float]] = []
        self.values: dict[int, float] = {}
        self.released = 0
        self.stamps_ms: list[float] = []
        self._picture: np.ndarray | None = None
        self._torn = self._pending = False

    def isOpened(self) -> bool:  # noqa: N802 (OpenCV's name)
        return self.opens

    def set(self, what: int, value: float) -> bool:
        self.set_calls.append((what, value))
        self.values[what] = value
        return True

    def get(self, what: int) -> float:
        return self.values.get(what, -1.0)

    def grab(self) -> bool:
        if self._pending:
            return True
        if not self.script:
            return False
        item = self.script.pop(0)
        self._torn = isinstance(item, str) and item == "torn"
        if isinstance(item, str):
            return item == "torn"
        self._picture, self._pending = item, True
        if self.stamps_ms:
            self.values[cv2.CAP_PROP_POS_MSEC] = self.stamps_ms.pop(0)
        return True

    def retrieve(self) -> tuple[bool, np.ndarray | None]:
        self._pending = False
        if self._torn:
            return False, None
        return self._picture is not None, self._picture

    def release(self) -> None:
        self.released += 1


def video_capture(fake: FakeCapture) -> type:
    """The class to put in place of cv2.VideoCapture."""

    class Opened:
        asked: tuple[object, ...] = ()

        def __new__(cls, *asked: object) -> FakeCapture:  # type: ignore[misc]
            cls.asked = asked
            return fake

        @staticmethod
        def waitAny(  # noqa: N802 (OpenCV's name)
            captures: list[FakeCapture],
            timeoutNs: int,  # noqa: N803
        ) -> tuple[bool, list[int]]:
            if fake.script and isinstance(fake.script[0], str) and fake.script[0] == "silent":
                fake.script.pop(0)
                return False, []
            return bool(fake.script) or timeoutNs > 1, [0]

    return Opened


class FakeClock:
    """Nanoseconds that pass when a test says so; as a sleep it passes them itself."""

    def __init__(self, start_ns: int = 1_000_000_000) -> None:
        self.now_ns = start_ns
        self.slept_s: list[float] = []

    def __call__(self) -> int:
        return self.now_ns

    def sleep(self, seconds: float) -> None:
        self.slept_s.append(seconds)
        self.now_ns += round(seconds * 1e9)


def ticking(step_ns: int = 40_000_000) -> Callable[[], int]:
    """A clock that moves on by one step at each look."""
    now = [0]

    def clock() -> int:
        now[0] += step_ns
        return now[0]

    return clock
