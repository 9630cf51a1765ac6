"""The simulator as a source: a live view without a camera, its truth known."""

from __future__ import annotations

import math
import time
from collections.abc import Callable
from types import TracebackType
from typing import Self

import numpy as np

from readout.angle import Calibration
from readout.capture.timebase import Clock, TimeBase
from readout.errors import BadInput, SourceLost, SourceStalled
from readout.model import Frame
from readout.simulation import Autocollimator, LiveRenderer, Motion, Truth, truth_at

NS_PER_S = 1_000_000_000
_BANK = 2**63
"""Seeds the bank of noise; no frame ever has this number."""


class SimulatedSource:
    """A simulated autocollimator before a simulated mirror, paced like a camera.

    Frame k shows the mirror at k / ``frames_per_s`` seconds and is the same for the same seed,
    however late it is fetched; k is its ``seq``. A reader that falls behind misses frames, as with
    a camera, and sees gaps in ``seq``. ``truth`` belongs to the newest frame. Clocks and sleep are
    injected for tests.
    """

    live = True

    def __init__(
        self,
        seed: int = 0,
        frames_per_s: float = 30.0,
        *,
        autocollimator: Autocollimator | None = None,
        motion: Motion | None = None,
        clock: Clock = time.monotonic_ns,
        utc: Clock = time.time_ns,
        sleep: Callable[[float], None] = time.sleep,
    ) -> None:
        if not (0 < frames_per_s <= 1000 and math.isfinite(frames_per_s)):
            raise BadInput(f"{frames_per_s:g} frames a second cannot be simulated: give 1 to 1000")
        self.frames_per_s = frames_per_s
        self.autocollimator = autocollimator or Autocollimator()
        self.motion = motion or Motion(seed=seed)
        self.truth: Truth | None = None
        self._seed = seed
        self._clock, self._utc, self._sleep = clock, utc, sleep
        self._calibration = self.autocollimator.calibration()
        self._renderer: LiveRenderer | None = None
        self._timebase = TimeBase(0, 0)
        self._next = 0

    @property
    def calibration(self) -> Calibration:
        """The true calibration of the simulated instrument."""
        return self._calibration

    def __enter__(self) -> Self:
        self._renderer = LiveRenderer(self.autocollimator, self._rng(_BANK))
        self._timebase = TimeBase.now(self._clock, self._utc)
        self._next = 0
        return self

    def __exit__(
        self,
        exc_type: type[BaseException] | None,
        exc: BaseException | None,
        tb: TracebackType | None,
    ) -> None:
        self._renderer = None

    def read(self, timeout_s: float) -> Frame:
        """The next frame when it is due. Raises SourceStalled if that is after ``timeout_s``."""
        if self._renderer is None:
            raise SourceLost("the simulated source is closed: open it again")
        elapsed_ns = self._clock() - self._timebase.t_mono_ns
        self._next = max(self._next, math.floor(elapsed_ns * self.frames_per_s / NS_PER_S))
        wait_s = self._next / self.frames_per_s - elapsed_ns / NS_PER_S
        if wait_s > timeout_s:
            self._sleep(max(0.0, timeout_s))
            raise SourceStalled(
                f"no frame within {timeout_s:g} s: the simulator gives "
                f"{self.frames_per_s:g} a second"
            )
        if wait_s > 0:
            self._sleep(wait_s)
        t_s = self._next / self.frames_per_s
        self.truth = truth_at(t_s, self.motion, self._calibration)
        pixels = self._renderer.frame(self.truth.x_px, self.truth.y_px, self._rng(self._next))
        t_mono_ns = self._clock()
        frame = Frame(
            pixels=pixels,
            seq=self._next,
            t_mono_ns=t_mono_ns,
            t_utc_ns=self._timebase.utc_ns(t_mono_ns),
            full_scale=self.autocollimator.sensor.full_scale,
        )
        self._next += 1
        return frame

    def _rng(self, number: int) -> np.random.Generator:
        return np.random.default_rng((self._seed % 2**64, number))
