"""One source and one sighting: frames become observations.

The observer hands the last position on as the prior of the next and keeps the newest frame, so
that somebody can look at it.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass, replace
from types import TracebackType
from typing import Protocol, Self

from readout.angle import Calibration
from readout.capture.source import Source
from readout.files.preparation_file import CameraKnowledge
from readout.instrument.preparing import Preparing
from readout.model import Frame, Observation, Pixels, Sighting, Target
from readout.sighting.prepare import Preparation
from readout.sighting.targets import AS_THEY_COME


@dataclass(frozen=True, slots=True)
class Picture:
    """A frame and what was seen in it."""

    frame: Frame
    sighting: Sighting


class Locate(Protocol):
    """What ``readout.sighting.locate`` does."""

    def __call__(
        self,
        pixels: Pixels,
        *,
        full_scale: int,
        target: Target = ...,
        prior: Sighting | None = ...,
        preparation: Preparation = ...,
    ) -> Sighting: ...


class Observer(Protocol):
    """Gives observations, one at a time, to the thread that opened it."""

    @property
    def live(self) -> bool: ...

    @property
    def calibration(self) -> Calibration | None:
        """The calibration that belongs to the source itself, as a simulated one has."""
        ...

    def __enter__(self) -> Self: ...

    def __exit__(
        self,
        exc_type: type[BaseException] | None,
        exc: BaseException | None,
        tb: TracebackType | None,
    ) -> None: ...

    def observe(self, timeout_s: float) -> Observation:
        """The next observation; raises as ``Source.read`` does."""
        ...

    def picture(self, timeout_s: float) -> Picture | None:
        """The newest picture, None while there is none. May be called from any thread."""
        ...

    def prepare_anew(self) -> None:
        """What is known of the camera has changed: look again. May be called from any thread."""
        ...


OpenObserver = Callable[[], Observer]


class DirectObserver:
    """Reads, prepares and locates in the calling thread."""

    def __init__(
        self,
        source: Source,
        *,
        target: Target,
        locate: Locate,
        preparing: Preparing | None = None,
    ) -> None:
        self._source = source
        self._target = target
        self._locate = locate
        self._preparing = preparing
        self._known: CameraKnowledge | None = None
        self._known_of: tuple[int, ...] | None = None
        self._prior: Sighting | None = None
        self._newest: Picture | None = None

    @property
    def live(self) -> bool:
        return self._source.live

    @property
    def calibration(self) -> Calibration | None:
        own = getattr(self._source, "calibration", None)
        return own if isinstance(own, Calibration) else None

    def __enter__(self) -> Self:
        self._source.__enter__()
        return self

    def __exit__(
        self,
        exc_type: type[BaseException] | None,
        exc: BaseException | None,
        tb: TracebackType | None,
    ) -> None:
        self._source.__exit__(exc_type, exc, tb)

    def observe(self, timeout_s: float) -> Observation:
        frame = self._source.read(timeout_s)
        known = self._known_for(frame)
        sighting = self._locate(
            frame.pixels,
            full_scale=frame.full_scale,
            target=self._target,
            prior=self._prior,
            preparation=AS_THEY_COME if known is None else known.preparation,
        )
        if frame.quality:
            sighting = replace(sighting, quality=sighting.quality | frame.quality)
        self._prior = sighting if sighting.found else None
        self._newest = Picture(frame, sighting)
        height_px, width_px = frame.pixels.shape
        return Observation(
            seq=frame.seq,
            t_mono_ns=frame.t_mono_ns,
            t_utc_ns=frame.t_utc_ns,
            width_px=width_px,
            height_px=height_px,
            sighting=sighting,
            name=frame.name,
            prepared=None if known is None else known.made_utc,
        )

    def picture(self, timeout_s: float) -> Picture | None:
        del timeout_s  # it is here already
        return self._newest

    def prepare_anew(self) -> None:
        """See `Observer`."""
        self._known_of = None

    def _known_for(self, frame: Frame) -> CameraKnowledge | None:
        """What is known for frames of this format; asked for once, for it may be a file."""
        if self._preparing is None:
            return None
        height_px, width_px = frame.pixels.shape
        format_of_it = width_px, height_px, frame.full_scale
        if self._known_of != format_of_it:
            self._known_of = format_of_it  # before the asking: a change meanwhile asks again
            self._known = self._preparing.known_for((width_px, height_px), frame.full_scale)
            self._prior = None
        return self._known
