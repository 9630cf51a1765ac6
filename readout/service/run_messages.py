"""Runs as JSON: what the routes of runs answer and ``readout runs --json`` prints."""

from __future__ import annotations

from typing import Any

from typing_extensions import TypedDict

from readout.logbook import LogReader, Run, Series
from readout.rows import Number, rounded, rounded_column
from readout.utc import utc_text


class RunMessage(TypedDict):
    """A run. ``ended_utc`` and ``ending`` are null while it is open; ``duration_s``: up to its
    last reading.
    """

    id: int
    title: str
    note: str
    source: str
    started_utc: str
    ended_utc: str | None
    ending: str | None
    every_s: float
    readings: int
    duration_s: Number
    version: str


class RunCalibrationMessage(TypedDict):
    """A calibration, whole, as its file holds it, of the readings from ``from_seq`` on."""

    from_seq: int
    calibration: dict[str, Any]


class RunEventMessage(TypedDict):
    """Something that happened during a run; ``t_s`` since its start."""

    t_utc: str
    t_s: Number
    event: str
    text: str


class WholeRunMessage(RunMessage):
    """A run with all that was kept beside its readings."""

    settings: dict[str, Any]
    calibrations: list[RunCalibrationMessage]
    events: list[RunEventMessage]


class SeriesMessage(TypedDict):
    """Columns of equal length, one element a bin; null, and 0 in ``n``, where nothing is.

    ``bin_s``: length of a bin, 0 for single readings. Means are over the ``n_good`` readings
    without a doubt, extremes over everything measured.
    """

    run_id: int
    bin_s: float
    t_s: list[Number]
    n: list[int]
    n_good: list[int]
    x_min_arcsec: list[Number]
    x_max_arcsec: list[Number]
    x_mean_arcsec: list[Number]
    y_min_arcsec: list[Number]
    y_max_arcsec: list[Number]
    y_mean_arcsec: list[Number]


def run_message(run: Run) -> RunMessage:
    """A run in a list."""
    return {
        "id": run.id,
        "title": run.title,
        "note": run.note,
        "source": run.source,
        "started_utc": utc_text(run.started_utc_ns),
        "ended_utc": None if run.ended_utc_ns is None else utc_text(run.ended_utc_ns),
        "ending": run.ending,
        "every_s": run.every_s,
        "readings": run.readings,
        "duration_s": rounded(run.duration_s),
        "version": run.version,
    }


def whole_run_message(reader: LogReader, run: Run) -> WholeRunMessage:
    """A run with settings, calibrations and events."""
    return {
        **run_message(run),
        "settings": run.settings,
        "calibrations": [
            {"from_seq": c.from_seq, "calibration": c.document} for c in reader.calibrations(run.id)
        ],
        "events": [
            {
                "t_utc": utc_text(e.t_utc_ns),
                "t_s": rounded((e.t_utc_ns - run.started_utc_ns) * 1e-9),
                "event": e.event,
                "text": e.text,
            }
            for e in reader.events(run.id)
        ],
    }


def series_message(run_id: int, series: Series) -> SeriesMessage:
    """What a plot of a run is drawn from."""
    return {
        "run_id": run_id,
        "bin_s": series.bin_s,
        "t_s": rounded_column(series.t_s),
        "n": series.n.tolist(),
        "n_good": series.n_good.tolist(),
        "x_min_arcsec": rounded_column(series.x_min_arcsec),
        "x_max_arcsec": rounded_column(series.x_max_arcsec),
        "x_mean_arcsec": rounded_column(series.x_mean_arcsec),
        "y_min_arcsec": rounded_column(series.y_min_arcsec),
        "y_max_arcsec": rounded_column(series.y_max_arcsec),
        "y_mean_arcsec": rounded_column(series.y_mean_arcsec),
    }
