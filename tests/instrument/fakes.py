"""Sources, observers and clocks that do what a test has laid out."""

from __future__ import annotations

import math
import os
import time
from collections.abc import Iterable
from types import TracebackType
from typing import Self

import numpy as np

from readout.angle import Calibration
from readout.errors import ReadoutError, SourceEnded, SourceLost, SourceStalled
from readout.instrument.observer import Picture
from readout.model import Frame, Observation, Quality, Reading, Sighting, no_sighting

WIDTH_PX, HEIGHT_PX = 64, 48


class FakeClock:
    """Time that passes only when somebody waits or works."""

    def __init__(self) -> None:
        self.now_ns = 1_000_000_000_000
        self.waits: list[float] = []

    def __call__(self) -> int:
        return self.now_ns

    def advance(self, seconds: float) -> None:
        self.now_ns += round(seconds * 1e9)

    def wait(self, seconds: float) -> bool:
        self.waits.append(seconds)
        self.advance(seconds)
        return False


def sighting(x_px: float = 32.0, y_px: float = 24.0, quality: Quality = Quality.OK) -> Sighting:
    return Sighting(x_px, y_px, (1e-4, 0.0, 1e-4), quality)


def observation(
    seq: int, clock: FakeClock, *, seen: Sighting | None = None, size: tuple[int, int] | None = None
) -> Observation:
    width_px, height_px = size or (WIDTH_PX, HEIGHT_PX)
    return Observation(seq, clock.now_ns, clock.now_ns, width_px, height_px, seen or sighting())


Step = Sighting | ReadoutError | float | tuple[int, int] | None


class ScriptedObserver:
    """Plays a script, one step a call: a sighting (None: a good one), an error, or silence of
    so many seconds (each call taking its timeout). A (width, height) changes the picture size
    and gives a good sighting. At the end of the script the source has ended.
    """

    def __init__(
        self,
        clock: FakeClock,
        script: Iterable[Step],
        *,
        live: bool = True,
        calibration: Calibration | None = None,
        interval_s: float = 0.1,
    ) -> None:
        self.clock, self.script, self.live = clock, list(script), live
        self.calibration = calibration
        self.interval_s = interval_s
        self.entered = self.left = 0
        self.size = WIDTH_PX, HEIGHT_PX
        self.skip = 0
        self._seq = 0

    def __enter__(self) -> Self:
        self.entered += 1
        return self

    def __exit__(
        self,
        exc_type: type[BaseException] | None,
        exc: BaseException | None,
        tb: TracebackType | None,
    ) -> None:
        self.left += 1

    def observe(self, timeout_s: float) -> Observation:
        if not self.script:
            raise SourceEnded("the script is at its end")
        step = self.script[0]
        if isinstance(step, float) and step > timeout_s:
            self.script[0] = step - timeout_s
            self.clock.advance(timeout_s)
            raise SourceStalled("silence")
        self.script.pop(0)
        match step:
            case float():
                self.clock.advance(step)
                raise SourceStalled("silence")
            case ReadoutError():
                raise step
            case tuple():
                self.size = step
                step = None
        self.clock.advance(self.interval_s)
        seq, self._seq = self._seq, self._seq + 1 + self.skip
        self.skip = 0
        return observation(seq, self.clock, seen=step, size=self.size)

    def picture(self, timeout_s: float) -> Picture | None:
        del timeout_s
        if self._seq == 0:
            return None
        pixels = np.zeros((self.size[1], self.size[0]), np.uint8)
        return Picture(Frame(pixels, self._seq - 1, 0, 0, 255), sighting())

    def prepare_anew(self) -> None:
        return


def reading(
    k: int,
    x_arcsec: float = 0.0,
    y_arcsec: float = 0.0,
    *,
    t_s: float | None = None,
    sd: float = 0.01,
    u: float = 0.1,
    quality: Quality = Quality.OK,
) -> Reading:
    """Reading number ``k`` of ten a second."""
    t_s = k / 10 if t_s is None else t_s
    return Reading(
        seq=k,
        t_s=t_s,
        t_utc_ns=round(t_s * 1e9),
        x_arcsec=x_arcsec,
        y_arcsec=y_arcsec,
        x_sd_arcsec=sd,
        y_sd_arcsec=sd,
        x_u_arcsec=u,
        y_u_arcsec=u,
        x_px=1.0,
        y_px=2.0,
        x_sd_px=sd,
        y_sd_px=sd,
        quality=quality,
        calibration_id="c",
    )


def unmeasured(k: int) -> Reading:
    return reading(k, math.nan, math.nan, sd=math.nan, u=math.nan, quality=Quality.NO_IMAGE)


class DriverSource:
    """A source for a child process; what it does stands in its name, after the colon.

    ``frames``: ten frames, then it is lost. ``hang``: one frame, then the read never returns.
    ``hang-in-open``: opening never returns. ``crash``: one frame, then the process dies.
    ``absent``: cannot be opened. ``slow``: frames without end, 20 a second.
    """

    live = True

    def __init__(self, text: str) -> None:
        self.manner = text.partition(":")[2]
        self._seq = 0

    def __enter__(self) -> Self:
        if self.manner == "absent":
            raise SourceLost("camera 7 is not connected")
        if self.manner == "hang-in-open":
            hang()
        return self

    def __exit__(
        self,
        exc_type: type[BaseException] | None,
        exc: BaseException | None,
        tb: TracebackType | None,
    ) -> None:
        return

    def read(self, timeout_s: float) -> Frame:
        del timeout_s
        if self._seq == 1 and self.manner == "hang":
            hang()
        if self._seq == 1 and self.manner == "crash":
            os._exit(3)
        if self._seq == 10 and self.manner == "frames":
            raise SourceLost("the cable was pulled")
        if self.manner == "slow":
            time.sleep(0.05)
        seq, self._seq = self._seq, self._seq + 1
        pixels = np.full((HEIGHT_PX, WIDTH_PX), seq, np.uint8)
        return Frame(pixels, seq, time.monotonic_ns(), time.time_ns(), 255)


def hang() -> None:
    """As a driver does that never comes back, and that does not hear SIGTERM."""
    import signal

    signal.signal(signal.SIGTERM, signal.SIG_IGN)
    while True:
        time.sleep(60)


def open_driver(text: str) -> DriverSource:
    return DriverSource(text)


def blind(*_: object, **__: object) -> Sighting:
    """A locate that never finds anything."""
    return no_sighting(Quality.NO_IMAGE)
