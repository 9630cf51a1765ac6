"""The drift of a run, and the floor below which none is claimed."""

from __future__ import annotations

from pathlib import Path
from typing import Any

from fastapi import APIRouter, Response
from pydantic import BaseModel, ConfigDict

from readout.errors import BadInput
from readout.files.floor_file import load_floor, save_floor
from readout.files.json_text import refuse_odd
from readout.instrument import Instrument
from readout.logbook import LogReader
from readout.service.problems import Problem
from readout.stability import (
    Floor,
    TiltSeries,
    drift_document,
    drift_of,
    floor_document,
    floor_of_document,
    floor_of_null_test,
)
from readout.utc import utc_text

FLOOR_FILE = "floor.json"
NO_FLOOR = (
    "no floor is kept: clamp the mirror to the objective, record a run, and make the floor of it"
)


class NullTestBody(BaseModel):
    """The run that was recorded with the mirror clamped to the objective."""

    model_config = ConfigDict(extra="forbid")

    run: int


def drift_routes(instrument: Instrument, log: Path, floor_file: Path) -> APIRouter:
    """Routes over the runs in ``log`` and the floor kept in ``floor_file``."""
    routes = APIRouter(prefix="/api", tags=["drift"])

    @routes.get("/runs/{run_id}/drift")
    def get_drift(run_id: int) -> dict[str, Any]:
        """Rates, spread, gaps and Allan deviation; ``claims`` where a floor is kept."""
        series, _ = _run(log, run_id)
        return drift_document(drift_of(series), _kept(floor_file))

    @routes.get("/floor")
    def get_floor() -> dict[str, Any]:
        """The floor kept; 404 while there is none."""
        floor = _kept(floor_file)
        if floor is None:
            raise Problem(404, NO_FLOOR)
        return floor_document(floor)

    @routes.put("/floor")
    def put_floor(document: dict[str, Any]) -> dict[str, Any]:
        """Keep this floor, as `readout check floor` writes it, in place of the one before."""
        try:
            refuse_odd(document)
        except ValueError as error:
            raise BadInput(f"{error}: correct it") from error
        floor = floor_of_document(document)
        save_floor(floor_file, floor)
        return floor_document(floor)

    @routes.post("/floor", status_code=201)
    def post_floor(body: NullTestBody) -> dict[str, Any]:
        """Make the floor of a run that was a null test, and keep it in place of the one before."""
        series, calibration_id = _run(log, body.run)
        floor = floor_of_null_test(
            series.t_s,
            series.x_arcsec,
            series.y_arcsec,
            created_utc=utc_text(instrument.now()[1]),
            calibration_id=calibration_id,
        )
        save_floor(floor_file, floor)
        return floor_document(floor)

    @routes.delete("/floor", status_code=204)
    def delete_floor() -> Response:
        """Forget it: another lamp, camera or mounting wants another null test."""
        floor_file.unlink(missing_ok=True)
        return Response(status_code=204)

    return routes


def _kept(floor_file: Path) -> Floor | None:
    return load_floor(floor_file) if floor_file.exists() else None


def _run(log: Path, run_id: int) -> tuple[TiltSeries, str | None]:
    """The readings of a run, and the id of what they were calibrated with."""
    with LogReader(log) as reader:
        try:
            reader.run(run_id)
        except BadInput as error:
            raise Problem(404, str(error)) from error
        used = reader.calibrations(run_id)
        found = used[0].document.get("id") if used else None
        return reader.tilts(run_id), found if isinstance(found, str) else None
