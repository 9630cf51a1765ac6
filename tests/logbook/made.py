"""Readings and logs made for tests. Everything about a reading follows from its number."""

from __future__ import annotations

import math
from collections.abc import Iterable
from pathlib import Path

from readout.logbook import FILE_NAME, Logbook, NewRun
from readout.model import Quality, Reading

STARTED_UTC_NS = 1_700_000_000_123_456_000
RATE = 50.0


def reading(
    seq: int,
    x_arcsec: float | None = None,
    y_arcsec: float | None = None,
    quality: Quality = Quality.OK,
    **values: float,
) -> Reading:
    """Reading ``seq`` of a made-up mirror; every field has a value of its own."""
    made: dict[str, float] = {
        "t_s": seq / RATE,
        "x_arcsec": 300.0 * math.sin(0.01 * seq) + 0.001 if x_arcsec is None else x_arcsec,
        "y_arcsec": 200.0 * math.cos(0.013 * seq) - 0.002 if y_arcsec is None else y_arcsec,
        "x_sd_arcsec": 0.011 + 1e-6 * seq,
        "y_sd_arcsec": 0.013 + 1e-6 * seq,
        "x_u_arcsec": 0.17 + 1e-6 * seq,
        "y_u_arcsec": 0.19 + 1e-6 * seq,
        "x_px": 320.25 + 0.1 * (seq % 1000),
        "y_px": 240.75 - 0.1 * (seq % 1000),
        "x_sd_px": 0.009,
        "y_sd_px": 0.008,
    }
    made |= values
    return Reading(
        seq=seq,
        t_utc_ns=STARTED_UTC_NS + round(made["t_s"] * 1e9),
        quality=quality,
        calibration_id="made-1",
        **made,
    )


def unmeasured(seq: int) -> Reading:
    """What becomes of a frame without an image."""
    names = [f"{axis}{what}" for axis in "xy" for what in ("_arcsec", "_sd_arcsec", "_u_arcsec")]
    names += ["x_px", "y_px", "x_sd_px", "y_sd_px"]
    return reading(seq, quality=Quality.NO_IMAGE, **dict.fromkeys(names, math.nan))


def new_run(**values: object) -> NewRun:
    return NewRun(**({"title": "made", "started_utc_ns": STARTED_UTC_NS} | values))


def log_of(folder: Path, readings: Iterable[Reading], **values: object) -> Path:
    """A logbook with one run of these readings, and its path."""
    path = folder / FILE_NAME
    with Logbook(path, capacity=2_000_000) as log:
        log.start(new_run(**values))
        for each in readings:
            log.append(each, t_s=each.t_s)
        log.end(STARTED_UTC_NS + 10**12)
    return path
