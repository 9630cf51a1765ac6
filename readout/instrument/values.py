"""What the instrument tells: an event, and its status at one instant."""

from __future__ import annotations

from dataclasses import dataclass

from readout.angle import Calibration
from readout.instrument.acquisition import State
from readout.instrument.zero import Zero


@dataclass(frozen=True, slots=True)
class Event:
    """Something that happened beside the readings, with one line for people."""

    t_s: float
    t_utc_ns: int
    event: str
    text: str


@dataclass(frozen=True, slots=True)
class Status:
    """The instrument at one instant. ``frames`` counts all measured, ``missed`` those a source
    knows it did not deliver. ``zero_wanted``: what has changed so that a new zero is due, else "".
    ``prepared_utc``: when the fixed frame, or what else is known of the camera, was made that the
    newest frame was prepared with; None for a frame as it came.
    """

    source: str | None
    state: State
    state_detail: str
    frames_per_s: float
    frames: int
    frames_unusable: int
    missed: int
    image_width_px: int | None
    image_height_px: int | None
    calibration: Calibration | None
    zero: Zero | None
    zero_wanted: str = ""
    prepared_utc: str | None = None
