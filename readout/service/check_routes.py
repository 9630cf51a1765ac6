"""Is the set-up sound? The check with two tilts, and the range a mirror can be read at."""

from __future__ import annotations

from typing import Annotated, Any

from fastapi import APIRouter, Query
from pydantic import BaseModel, ConfigDict, Field

from readout.angle import Calibration
from readout.angle.distance import clear_range
from readout.angle.distance_fit import check_distance
from readout.angle.distance_rows import distance_rows
from readout.errors import BadInput
from readout.instrument import Instrument

Millimetres = Annotated[float, Field(gt=0, le=1e7)]
MillimetresQuery = Annotated[float, Query(gt=0, le=1e7, allow_inf_nan=False)]
Sd = Annotated[float, Field(ge=0, le=1e7)]
MOST_DISTANCES = 100


class DistanceBody(BaseModel):
    """Rows as they were taken: ``distance_mm``, ``step`` (a name for each of the two tilts),
    ``x_arcsec``, ``y_arcsec``, ``sd_arcsec``; the last three may be null. Without a focal length
    that of the calibration in use counts, with its uncertainty.
    """

    model_config = ConfigDict(extra="forbid", allow_inf_nan=False)

    rows: Annotated[list[dict[str, Any]], Field(max_length=10_000)]
    focal_length_mm: Millimetres | None = None
    focal_length_sd_mm: Sd = 0.0
    step_sd_arcsec: Sd = 0.0
    objective_mm: Millimetres | None = None
    mirror_mm: Millimetres | None = None


def check_routes(instrument: Instrument) -> APIRouter:
    """Routes of what is worked out from numbers alone."""
    routes = APIRouter(prefix="/api", tags=["checks"])

    @routes.post("/checks/distance")
    def post_distance(body: DistanceBody) -> dict[str, Any]:
        """Defocus of the sensor with its uncertainty, and apart from it the way's own tilt."""
        focal_mm, sd_mm = body.focal_length_mm, body.focal_length_sd_mm
        if focal_mm is None:
            focal_mm, sd_mm = _focal_length(instrument.calibration)
        return check_distance(
            distance_rows(body.rows),
            focal_length_mm=focal_mm,
            focal_length_sd_mm=sd_mm,
            step_sd_arcsec=body.step_sd_arcsec,
            objective_mm=body.objective_mm,
            mirror_mm=body.mirror_mm,
        ).document()

    @routes.get("/range")
    def get_range(
        objective_mm: MillimetresQuery,
        mirror_mm: MillimetresQuery,
        distance_mm: Annotated[list[float], Query(min_length=1, max_length=MOST_DISTANCES)],
    ) -> list[dict[str, Any]]:
        """Tilts up to which the return is whole, and beyond which it is gone, at each distance."""
        found = (
            clear_range(one, objective_mm=objective_mm, mirror_mm=mirror_mm) for one in distance_mm
        )
        return [limits.document() | {"words": limits.words()} for limits in found]

    return routes


def _focal_length(calibration: Calibration | None) -> tuple[float, float]:
    """In millimetres, with its standard uncertainty."""
    focal_mm = None if calibration is None else calibration.focal_length_mm
    if calibration is None or focal_mm is None:
        raise BadInput("no focal length is known here: give focal_length_mm")
    return focal_mm, focal_mm * calibration.focal_length_px_sd / calibration.focal_length_px
