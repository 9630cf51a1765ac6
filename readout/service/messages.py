"""What goes over the wire, as JSON: every missing number null, every time UTC with Z."""

from __future__ import annotations

import json
from collections.abc import Sequence
from typing import Any, Literal

import numpy as np
from typing_extensions import TypedDict

from readout import __version__
from readout.angle import Calibration
from readout.capture.open import SourceDescription
from readout.instrument import Average, Event, Reference, State, Status, Zero
from readout.instrument.recorder import Recording
from readout.model import Arm, Observation, Quality, Reading
from readout.rows import Number, rounded, rounded_column
from readout.service.feed import FLOATS, Columns
from readout.utc import utc_text


class AverageMessage(TypedDict):
    """The averaged tilt and its standard error."""

    x_arcsec: Number
    y_arcsec: Number
    x_se_arcsec: Number
    y_se_arcsec: Number
    n: int
    window_s: float
    statistic: str


class ReadingMessage(TypedDict):
    """One reading. ``x_rel_arcsec``: absolute minus zero, ``x_rel_u_arcsec`` its combined standard
    uncertainty, both null while no zero is set. ``state``: of the source, now; ``age_s``: time
    since the reading came. ``average`` is null while none comes.
    """

    seq: int
    t_utc: str
    t_s: Number
    x_arcsec: Number
    y_arcsec: Number
    x_rel_arcsec: Number
    y_rel_arcsec: Number
    x_sd_arcsec: Number
    y_sd_arcsec: Number
    x_u_arcsec: Number
    y_u_arcsec: Number
    x_rel_u_arcsec: Number
    y_rel_u_arcsec: Number
    x_px: Number
    y_px: Number
    x_sd_px: Number
    y_sd_px: Number
    quality: list[str]
    calibration_id: str | None
    signs: str | None
    state: str
    age_s: Number
    average: AverageMessage | None


class ReadingsMessage(TypedDict):
    """Columns of equal length; ``dropped``: readings and events this viewer lost so far.
    ``x_rel_u_arcsec``: combined standard uncertainty of the tilt minus the zero, null while none is
    set and for readings that it does not belong to.
    """

    kind: Literal["readings"]
    seq: list[int]
    t_s: list[Number]
    x_arcsec: list[Number]
    y_arcsec: list[Number]
    x_sd_arcsec: list[Number]
    y_sd_arcsec: list[Number]
    x_u_arcsec: list[Number]
    y_u_arcsec: list[Number]
    x_rel_u_arcsec: list[Number]
    y_rel_u_arcsec: list[Number]
    x_px: list[Number]
    y_px: list[Number]
    quality: list[list[str]]
    dropped: int
    average: AverageMessage | None


class ArmMessage(TypedDict):
    """A fitted arm; its angle is positive clockwise on screen."""

    angle_deg: Number
    width_px: Number
    contrast: Number
    background: Number


class SightingMessage(TypedDict):
    """Where the return image lies in the newest picture."""

    seq: int
    x_px: Number
    y_px: Number
    upright: ArmMessage | None
    level: ArmMessage | None
    image_width_px: int
    image_height_px: int
    peak: Number
    quality: list[str]


class CalibrationMessage(TypedDict):
    """``name``: given when it was made, else "". ``field_arcsec``: tilts at the picture's corners,
    from the top left clockwise.
    """

    id: str
    name: str
    method: str
    signs: str
    focal_length_mm: Number
    focal_length_px: Number
    scale_x_arcsec_per_px: Number
    scale_y_arcsec_per_px: Number
    rotation_deg: Number
    mirrored: bool
    created_utc: str
    warnings: list[str]
    field_arcsec: list[tuple[Number, Number]]


class ZeroMessage(TypedDict):
    """The zero that is set."""

    x_arcsec: Number
    y_arcsec: Number
    x_sd_arcsec: Number
    y_sd_arcsec: Number
    n: int
    window_s: float
    statistic: str
    set_utc: str


class RunNowMessage(TypedDict):
    """The run being recorded; ``readings``: rows so far."""

    id: int
    title: str
    started_utc: str
    every_s: float
    readings: int


class StatusMessage(TypedDict):
    """What the instrument is doing. ``zero_wanted``: what has changed so that a new zero is due,
    else "". ``prepared_utc``: when the fixed frame in use (or a file given with --prepared) was
    made, null while pictures are measured as they come.
    """

    source: str | None
    source_name: str
    simulated: bool
    state: str
    state_detail: str
    frames_per_s: float
    dropped: int
    frames: int
    frames_unusable: int
    missed: int
    image_width_px: int | None
    image_height_px: int | None
    calibration: CalibrationMessage | None
    zero: ZeroMessage | None
    zero_wanted: str
    prepared_utc: str | None
    run: RunNowMessage | None
    session_start_utc: str
    version: str


class EventMessage(TypedDict):
    """Something that happened beside the readings."""

    kind: Literal["event"]
    t_s: Number
    t_utc: str
    event: str
    text: str


class HealthMessage(TypedDict):
    """Sent while readings flow."""

    state: str


def encode(message: Any) -> str:
    """One line of JSON; raises ValueError rather than write NaN."""
    return json.dumps(message, allow_nan=False, separators=(",", ":"), ensure_ascii=False)


def average_message(average: Average | None) -> AverageMessage | None:
    """None stays None."""
    if average is None:
        return None
    return {
        "x_arcsec": rounded(average.x_arcsec),
        "y_arcsec": rounded(average.y_arcsec),
        "x_se_arcsec": rounded(average.x_se_arcsec),
        "y_se_arcsec": rounded(average.y_se_arcsec),
        "n": average.n,
        "window_s": average.window_s,
        "statistic": average.statistic.value,
    }


def reading_message(
    reading: Reading,
    reference: Reference | None,
    average: Average | None,
    *,
    state: State,
    age_s: float,
) -> ReadingMessage:
    """The newest reading, against the zero if there is one."""
    zero = reference.zero if reference is not None else None
    x_rel_u, y_rel_u = _relative_u(reference, _columns_of([reading]))
    return {
        "seq": reading.seq,
        "t_utc": utc_text(reading.t_utc_ns),
        "t_s": rounded(reading.t_s),
        "x_arcsec": rounded(reading.x_arcsec),
        "y_arcsec": rounded(reading.y_arcsec),
        "x_rel_arcsec": rounded(reading.x_arcsec - zero.x_arcsec) if zero else None,
        "y_rel_arcsec": rounded(reading.y_arcsec - zero.y_arcsec) if zero else None,
        "x_sd_arcsec": rounded(reading.x_sd_arcsec),
        "y_sd_arcsec": rounded(reading.y_sd_arcsec),
        "x_u_arcsec": rounded(reading.x_u_arcsec),
        "y_u_arcsec": rounded(reading.y_u_arcsec),
        "x_rel_u_arcsec": x_rel_u[0],
        "y_rel_u_arcsec": y_rel_u[0],
        "x_px": rounded(reading.x_px),
        "y_px": rounded(reading.y_px),
        "x_sd_px": rounded(reading.x_sd_px),
        "y_sd_px": rounded(reading.y_sd_px),
        "quality": reading.quality.words(),
        "calibration_id": reading.calibration_id,
        "signs": reading.signs,
        "state": state.value,
        "age_s": rounded(age_s),
        "average": average_message(average),
    }


def readings_message(
    readings: Sequence[Reading],
    *,
    dropped: int,
    average: Average | None,
    reference: Reference | None = None,
) -> ReadingsMessage:
    """The message for readings as they come."""
    return _columns_message(_columns_of(readings), dropped, average, reference)


def recent_message(
    columns: Columns, average: Average | None, reference: Reference | None = None
) -> ReadingsMessage:
    """The message for rows out of the feed's memory."""
    return _columns_message(columns, 0, average, reference)


def _columns_of(readings: Sequence[Reading]) -> Columns:
    columns: Columns = {name: np.array([getattr(r, name) for r in readings]) for name in FLOATS}
    columns["seq"] = np.array([r.seq for r in readings])
    columns["quality"] = np.array([r.quality.value for r in readings])
    return columns


def _relative_u(reference: Reference | None, columns: Columns) -> tuple[list[Number], list[Number]]:
    seq = columns["seq"].astype(np.int64)
    if reference is None:
        return [None] * seq.size, [None] * seq.size
    places = columns["x_px"], columns["y_px"], columns["x_sd_arcsec"], columns["y_sd_arcsec"]
    x_u, y_u = reference.relative_u(seq, *(column.astype(np.float64) for column in places))
    return rounded_column(x_u), rounded_column(y_u)


def _columns_message(
    columns: Columns, dropped: int, average: Average | None, reference: Reference | None
) -> ReadingsMessage:
    x_rel_u, y_rel_u = _relative_u(reference, columns)
    floats = {name: rounded_column(columns[name]) for name in FLOATS}
    return {
        "kind": "readings",
        "seq": columns["seq"].tolist(),
        "t_s": floats["t_s"],
        "x_arcsec": floats["x_arcsec"],
        "y_arcsec": floats["y_arcsec"],
        "x_sd_arcsec": floats["x_sd_arcsec"],
        "y_sd_arcsec": floats["y_sd_arcsec"],
        "x_u_arcsec": floats["x_u_arcsec"],
        "y_u_arcsec": floats["y_u_arcsec"],
        "x_rel_u_arcsec": x_rel_u,
        "y_rel_u_arcsec": y_rel_u,
        "x_px": floats["x_px"],
        "y_px": floats["y_px"],
        "quality": [Quality(int(value)).words() for value in columns["quality"]],
        "dropped": dropped,
        "average": average_message(average),
    }


def _arm_message(arm: Arm | None) -> ArmMessage | None:
    if arm is None:
        return None
    return {
        "angle_deg": rounded(arm.angle_deg),
        "width_px": rounded(arm.width_px),
        "contrast": rounded(arm.contrast),
        "background": rounded(arm.background),
    }


def sighting_message(observation: Observation) -> SightingMessage:
    """The sighting of the newest picture."""
    sighting = observation.sighting
    return {
        "seq": observation.seq,
        "x_px": rounded(sighting.x_px),
        "y_px": rounded(sighting.y_px),
        "upright": _arm_message(sighting.upright),
        "level": _arm_message(sighting.level),
        "image_width_px": observation.width_px,
        "image_height_px": observation.height_px,
        "peak": rounded(sighting.peak),
        "quality": sighting.quality.words(),
    }


def name_of(calibration: Calibration) -> str:
    """What it was called when it was made, else ""."""
    name = calibration.made_from.get("name")
    return name if isinstance(name, str) else ""


def calibration_message(calibration: Calibration | None) -> CalibrationMessage | None:
    """None stays None."""
    if calibration is None:
        return None
    scale_x, scale_y = calibration.scale_arcsec_per_px
    right, bottom = calibration.image_width_px - 0.5, calibration.image_height_px - 0.5
    corners = np.array([(-0.5, -0.5), (right, -0.5), (right, bottom), (-0.5, bottom)])
    x_arcsec, y_arcsec = calibration.tilt(corners[:, 0], corners[:, 1])
    focal_mm = calibration.focal_length_mm
    return {
        "id": calibration.id,
        "name": name_of(calibration),
        "method": calibration.method,
        "signs": calibration.signs,
        "focal_length_mm": None if focal_mm is None else rounded(focal_mm),
        "focal_length_px": rounded(calibration.focal_length_px),
        "scale_x_arcsec_per_px": rounded(scale_x),
        "scale_y_arcsec_per_px": rounded(scale_y),
        "rotation_deg": rounded(calibration.rotation_deg),
        "mirrored": calibration.mirrored,
        "created_utc": calibration.created_utc,
        "warnings": list(calibration.warnings),
        "field_arcsec": list(zip(rounded_column(x_arcsec), rounded_column(y_arcsec), strict=True)),
    }


def zero_message(zero: Zero | None) -> ZeroMessage | None:
    """None stays None."""
    if zero is None:
        return None
    return {
        "x_arcsec": rounded(zero.x_arcsec),
        "y_arcsec": rounded(zero.y_arcsec),
        "x_sd_arcsec": rounded(zero.x_sd_arcsec),
        "y_sd_arcsec": rounded(zero.y_sd_arcsec),
        "n": zero.n,
        "window_s": zero.window_s,
        "statistic": zero.statistic.value,
        "set_utc": utc_text(zero.set_utc_ns),
    }


def run_now_message(recording: Recording | None) -> RunNowMessage | None:
    """None stays None."""
    if recording is None:
        return None
    return {
        "id": recording.id,
        "title": recording.title,
        "started_utc": utc_text(recording.started_utc_ns),
        "every_s": recording.every_s,
        "readings": recording.readings,
    }


def status_message(
    status: Status,
    *,
    described: SourceDescription | None,
    recording: Recording | None,
    dropped: int,
    session_start_utc_ns: int,
) -> StatusMessage:
    """``dropped``: readings and events lost to slow viewers."""
    return {
        "source": status.source,
        "source_name": described.title if described else status.source or "",
        "simulated": described.simulated if described else False,
        "state": status.state.value,
        "state_detail": status.state_detail,
        "frames_per_s": round(status.frames_per_s, 2),
        "dropped": dropped,
        "frames": status.frames,
        "frames_unusable": status.frames_unusable,
        "missed": status.missed,
        "image_width_px": status.image_width_px,
        "image_height_px": status.image_height_px,
        "calibration": calibration_message(status.calibration),
        "zero": zero_message(status.zero),
        "zero_wanted": status.zero_wanted,
        "prepared_utc": status.prepared_utc,
        "run": run_now_message(recording),
        "session_start_utc": utc_text(session_start_utc_ns),
        "version": __version__,
    }


def event_message(event: Event) -> EventMessage:
    """An event, as the stream carries it."""
    return {
        "kind": "event",
        "t_s": rounded(event.t_s),
        "t_utc": utc_text(event.t_utc_ns),
        "event": event.event,
        "text": event.text,
    }
