"""Runs: begun, ended, listed, plotted, exported."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import replace
from pathlib import Path
from typing import Annotated, Literal

from fastapi import APIRouter, Query, Response
from fastapi.responses import StreamingResponse
from pydantic import BaseModel, ConfigDict, Field
from typing_extensions import TypedDict

from readout.errors import BadInput
from readout.instrument.recorder import Recorder
from readout.logbook import LogReader, Run
from readout.logbook.export import csv_of, ndjson_of
from readout.logbook.parquet import NEEDED, parquet_is_there, parquet_of
from readout.logbook.statements import UNWRITABLE
from readout.service.control import Control
from readout.service.feed import Feed
from readout.service.messages import encode
from readout.service.problems import Problem
from readout.service.run_messages import (
    RunMessage,
    SeriesMessage,
    WholeRunMessage,
    run_message,
    series_message,
    whole_run_message,
)

Seconds = Annotated[float, Query(allow_inf_nan=False)]
Form = Literal["csv", "ndjson", "parquet"]
MEDIA_TYPES: dict[Form, str] = {
    "csv": "text/csv",
    "ndjson": "application/x-ndjson",
    "parquet": "application/vnd.apache.parquet",
}


class NewRunBody(BaseModel):
    """``every_s`` 0 keeps every reading, else means over so many seconds."""

    model_config = ConfigDict(extra="forbid", allow_inf_nan=False)

    title: Annotated[str, Field(max_length=200)] = ""
    note: Annotated[str, Field(max_length=10_000)] = ""
    every_s: Annotated[float, Field(ge=0, le=86_400)] = 0.0


class RunId(TypedDict):
    """The run that has begun."""

    id: int


def run_routes(recorder: Recorder, feed: Feed, control: Control) -> APIRouter:
    """Routes of the log."""
    routes = APIRouter(prefix="/api/runs", tags=["runs"])
    path = recorder.path

    def ended_if_broken_off(run: Run) -> Run:
        """A log that cannot be written does not know that its run has ended."""
        if run.id != recorder.broken_off_id or run.ending is not None:
            return run
        ended_utc_ns = run.started_utc_ns + round(run.duration_s * 1e9)
        return replace(run, ended_utc_ns=ended_utc_ns, ending=UNWRITABLE)

    @routes.post("", status_code=201)
    def post_run(body: NewRunBody, response: Response) -> RunId:
        """Begin a run; 409 while another one is recorded."""
        run_id = recorder.start(
            title=body.title.strip(),
            note=body.note,
            every_s=body.every_s,
            settings=control.settings.document(),
        )
        feed.announce()
        response.headers["Location"] = f"/api/runs/{run_id}"
        return {"id": run_id}

    @routes.post("/{run_id}/stop")
    def post_stop(run_id: int) -> RunMessage:
        """End the run; all of it is written when this answers."""
        with LogReader(path) as reader:
            _known(reader, run_id)
        recorder.stop(run_id)
        feed.announce()
        with LogReader(path) as reader:
            return run_message(_known(reader, run_id))

    @routes.get("")
    def get_runs() -> list[RunMessage]:
        """All runs, the newest first."""
        with LogReader(path) as reader:
            return [run_message(ended_if_broken_off(run)) for run in reader.runs()]

    @routes.get("/{run_id}")
    def get_run(run_id: int) -> WholeRunMessage:
        """A run with its settings, calibrations and events."""
        with LogReader(path) as reader:
            return whole_run_message(reader, ended_if_broken_off(_known(reader, run_id)))

    @routes.get("/{run_id}/series", response_model=SeriesMessage)
    def get_series(
        run_id: int,
        from_s: Seconds = 0.0,
        to_s: Seconds | None = None,
        points: Annotated[int, Query(ge=10, le=20_000)] = 2000,
    ) -> Response:
        """Extremes and means of a part of a run in at most ``points`` bins."""
        with LogReader(path) as reader:
            _known(reader, run_id)
            series = reader.series(run_id, from_s, to_s, points)
        return Response(encode(series_message(run_id, series)), media_type="application/json")

    @routes.get("/{run_id}/export")
    def get_export(
        run_id: int,
        form: Annotated[Form, Query(alias="format")] = "csv",
    ) -> StreamingResponse:
        """All rows of a run, as a file."""
        if form == "parquet" and not parquet_is_there():
            raise Problem(501, f"{NEEDED}, or choose csv or ndjson")
        with LogReader(path) as reader:
            _known(reader, run_id)
        return StreamingResponse(
            _export(path, run_id, form),
            media_type=MEDIA_TYPES[form],
            headers={"Content-Disposition": f'attachment; filename="run-{run_id}.{form}"'},
        )

    return routes


def _known(reader: LogReader, run_id: int) -> Run:
    try:
        return reader.run(run_id)
    except BadInput as error:
        raise Problem(404, str(error)) from error


def _export(path: Path, run_id: int, form: Form) -> Iterator[str | bytes]:
    with LogReader(path) as reader:
        match form:
            case "csv":
                yield from csv_of(reader, run_id)
            case "ndjson":
                yield from ndjson_of(reader, run_id)
            case "parquet":
                yield from parquet_of(reader, run_id)
