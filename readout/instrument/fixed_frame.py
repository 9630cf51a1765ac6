"""The fixed frame of the camera in use: taken while the mirror is covered, kept, forgotten."""

from __future__ import annotations

import threading
from collections.abc import Callable, Iterator
from dataclasses import dataclass, replace

from readout.errors import NotNow, cannot_write
from readout.files.preparation_file import CameraKnowledge, save_knowledge
from readout.instrument.instrument import Instrument
from readout.instrument.kept_frame import KeptFor
from readout.model import Frame, Pixels, Quality
from readout.sighting import locate
from readout.sighting.prepare import Preparation
from readout.sighting.standing import squares, stood_still
from readout.utc import utc_text

FRAMES = 32
"""the mean adds 1/32 of a frame's variance: 1.6 % to the noise of a position"""
FRAME_WITHIN_S = 2.0
_ASK = "take the fixed frame"
_UNFIT = Quality.DAMAGED | Quality.DUPLICATE | Quality.SETTLING


@dataclass(frozen=True, slots=True)
class Taken:
    """A fixed frame now in use. ``target_seen``: one frame of it, measured as it came, shows what
    could be the return.
    """

    known: CameraKnowledge
    size_px: tuple[int, int]
    target_seen: bool


class FixedFrame:
    """Takes the fixed frame of what ``instrument`` measures; ``kept_for`` a source it is kept."""

    def __init__(self, instrument: Instrument, kept_for: Callable[[str], KeptFor]) -> None:
        self._instrument = instrument
        self._kept_for = kept_for
        self._taking = threading.Lock()
        self._arrived = threading.Event()
        instrument.on_reading.append(lambda _: self._arrived.set())

    def take(self, n: int = FRAMES) -> Taken:
        """Average ``n`` frames (4 or more) and take the mean away from all that follow.

        From any thread but the acquisition's. Raises NotNow while no frames come or the picture
        moves, BadInput where the file cannot be written.
        """
        self._instrument.reading_of_now(_ASK)
        if not self._taking.acquire(blocking=False):
            raise NotNow("a fixed frame is being taken already: wait for it")
        try:
            return self._taken(n)
        finally:
            self._taking.release()

    def forget(self) -> None:
        """Measure frames as they come again. Raises NotNow where there is no fixed frame."""
        frame = self._newest_frame()
        path = self._kept().path_for(_size(frame), frame.full_scale)
        try:
            path.unlink()
        except FileNotFoundError:
            raise NotNow("there is no fixed frame of this camera in this size") from None
        except OSError as error:
            raise cannot_write(path, error) from error
        self._instrument.prepare_anew()
        self._instrument.tell("fixed_frame", "the fixed frame was taken back")

    def _taken(self, n: int) -> Taken:
        first = self._newest_frame()
        size_px, kept = _size(first), self._kept()
        base = kept.base(size_px, first.full_scale)
        made = base.preparation if base else Preparation()
        standing = []

        def seen(frames: Iterator[Frame]) -> Iterator[Pixels]:
            for frame in frames:
                standing.append(squares(frame.pixels))
                yield frame.pixels

        made = made.with_fixed(seen(self._frames(n, first)))
        if not stood_still(standing, first.full_scale):
            raise NotNow(
                "the picture moved while the frames were taken: cover the mirror, touch nothing, "
                f"then {_ASK}"
            )
        now_utc = utc_text(self._instrument.now()[1])
        known = CameraKnowledge(made, first.full_scale, now_utc, n, base.dark_frames if base else 0)
        save_knowledge(kept.path_for(size_px, first.full_scale), known)
        self._instrument.prepare_anew()
        plain = replace(made, dark=None, fixed=None)
        target = self._instrument.target
        sighting = locate(
            first.pixels, full_scale=first.full_scale, target=target, preparation=plain
        )
        text = f"fixed frame taken, the mean of {n}"
        if sighting.found:
            text += f"; it shows a {target.value}: if that is the mirror's, cover it and take anew"
        self._instrument.tell("fixed_frame", text)
        return Taken(known, size_px, sighting.found)

    def _frames(self, n: int, like: Frame) -> Iterator[Frame]:
        """``n`` sound frames as they come. Raises NotNow if they stay away or change their kind."""
        given, last_seq, source = 0, like.seq, self._instrument.source
        self._arrived.clear()
        for _ in range(4 * n):
            if given == n:
                return
            if not self._arrived.wait(FRAME_WITHIN_S):
                raise NotNow(f"no frame for {FRAME_WITHIN_S:g} s: wait, then {_ASK}")
            self._arrived.clear()
            frame = self._newest_frame()
            if self._instrument.source != source or _kind(frame) != _kind(like):
                raise NotNow(f"the source changed meanwhile: {_ASK} anew")
            if frame.seq > last_seq and not frame.quality & _UNFIT:
                given, last_seq = given + 1, frame.seq
                yield frame
        if given < n:
            raise NotNow(f"only {given} of {4 * n} frames are sound: mend that, then {_ASK}")

    def _newest_frame(self) -> Frame:
        picture = self._instrument.picture()
        if picture is None:
            raise NotNow("there is no picture: wait for the first one")
        return picture.frame

    def _kept(self) -> KeptFor:
        return self._kept_for(self._instrument.source or "")


def _kind(frame: Frame) -> tuple[tuple[int, ...], int]:
    return frame.pixels.shape, frame.full_scale


def _size(frame: Frame) -> tuple[int, int]:
    return frame.pixels.shape[1], frame.pixels.shape[0]
