"""The guided calibration: begun, point by point, finished to a file on the shelf."""

from __future__ import annotations

import json
import math
from pathlib import Path
from typing import Annotated, Literal

from fastapi import APIRouter, Response
from pydantic import BaseModel, ConfigDict, Field
from typing_extensions import TypedDict

from readout.files.calibration_file import calibration_document
from readout.files.calibration_shelf import keep_calibration
from readout.instrument import Instrument
from readout.instrument.known_points import (
    Known,
    KnownPoints,
    Plan,
    Point,
    Progress,
    Way,
    expected_of_plan,
)
from readout.rows import Number, rounded
from readout.service.calibration_routes import KeptCalibrationMessage, kept_message
from readout.service.control import Control
from readout.service.feed import Feed
from readout.utc import utc_text

Positive = Annotated[float, Field(gt=0, le=1e6)]
NotNegative = Annotated[float, Field(ge=0, le=1e6)]
Angle = Annotated[float, Field(ge=-36_000, le=36_000)]


class _Body(BaseModel):
    model_config = ConfigDict(extra="forbid", allow_inf_nan=False)


class PlanBody(_Body):
    """How the tilts are known; what does not belong to the ``way`` is left out."""

    way: Way
    sd_arcsec: NotNegative = 0.0
    scale_rel_sd: Annotated[float, Field(ge=0, le=1)] = 0.0
    lever_mm: Positive | None = None
    lever_sd_mm: NotNegative = 0.0
    height_sd_mm: NotNegative = 0.0
    horizontal: bool = False

    @property
    def plan(self) -> Plan:
        return Plan(
            way=self.way,
            sd_arcsec=self.sd_arcsec,
            scale_rel_sd=self.scale_rel_sd,
            lever_mm=math.nan if self.lever_mm is None else self.lever_mm,
            lever_sd_mm=self.lever_sd_mm,
            height_sd_mm=self.height_sd_mm,
            horizontal=self.horizontal,
        )


class ExpectedBody(PlanBody):
    """A plan with the points meant: from ``lowest`` to ``highest``, in arcsec or in mm."""

    lowest: Annotated[float, Field(ge=-1e6, le=1e6)]
    highest: Annotated[float, Field(ge=-1e6, le=1e6)]
    points: Annotated[int, Field(ge=1, le=200)]


class KnownBody(_Body):
    """A tilt: angles as the stage shows them, or a height and the axis it tilts."""

    x_arcsec: Angle | None = None
    y_arcsec: Angle | None = None
    height_mm: Annotated[float, Field(ge=-1e4, le=1e4)] | None = None
    axis: Literal["x", "y"] | None = None


class FinishBody(_Body):
    """``use``: read with it from now on."""

    name: Annotated[str, Field(min_length=1, max_length=80, pattern=r"\S")]
    note: Annotated[str, Field(max_length=2000)] = ""
    conditions: Annotated[str, Field(max_length=2000)] = ""
    use: bool = True


class SharedMessage(TypedDict):
    """What acts on several points at once, and its part of the relative uncertainty."""

    name: str
    rel_u: Number


class ExpectedMessage(TypedDict):
    """Relative standard uncertainty of the focal length to expect: of all, of what is new in each
    point, of each shared input; ``largest`` names what limits it. ``range_arcsec``: from the first
    to the last point.
    """

    rel_u: Number
    points_rel_u: Number
    shared: list[SharedMessage]
    largest: str
    range_arcsec: Number


class PointMessage(TypedDict):
    """A point taken; residuals are null while the points do not determine a calibration."""

    number: int
    x_arcsec: Number
    y_arcsec: Number
    height_mm: Number
    axis: str | None
    x_px: Number
    y_px: Number
    n: int
    x_residual_arcsec: Number
    y_residual_arcsec: Number
    outlier: bool


class PlanMessage(TypedDict):
    """The plan in use."""

    way: str
    sd_arcsec: Number
    scale_rel_sd: Number
    lever_mm: Number
    lever_sd_mm: Number
    height_sd_mm: Number
    horizontal: bool


class ProgressMessage(TypedDict):
    """``plan`` is null before a calibration has begun. ``lacking`` says why there is no
    ``focal_length_px`` yet.
    """

    plan: PlanMessage | None
    points: list[PointMessage]
    lacking: str
    method: str | None
    focal_length_px: Number
    focal_length_rel_u: Number
    residual_rms_arcsec: Number
    warnings: list[str]


class FinishedMessage(TypedDict):
    """The calibration kept. ``used``: readings are made with it from now on; else ``why_not``."""

    kept: KeptCalibrationMessage
    warnings: list[str]
    used: bool
    why_not: str


def calibrating_routes(
    instrument: Instrument, points: KnownPoints, control: Control, feed: Feed, folder: Path
) -> APIRouter:
    """Routes of the guided calibration; what it makes is kept in ``folder``."""
    routes = APIRouter(prefix="/api/calibrating", tags=["calibrations"])

    @routes.get("")
    def get_progress() -> ProgressMessage:
        """Where it stands."""
        return _progress(points.progress) if points.begun else _NOT_BEGUN

    @routes.post("/expected")
    def post_expected(body: ExpectedBody) -> ExpectedMessage:
        """What the plan can be worth; nothing begins."""
        expected, reach_arcsec = expected_of_plan(
            body.plan, lowest=body.lowest, highest=body.highest, n=body.points
        )
        return {
            "rel_u": rounded(expected.rel_sd),
            "points_rel_u": rounded(expected.rows_rel_sd),
            "shared": [{"name": n, "rel_u": rounded(u)} for n, u in expected.shared_rel_sd],
            "largest": expected.largest,
            "range_arcsec": rounded(reach_arcsec),
        }

    @routes.post("", status_code=201)
    def post_begin(body: PlanBody) -> ProgressMessage:
        """Begin; 409 while another one has points."""
        optics = control.settings.optics
        return _progress(
            points.begin(body.plan, pitch_um=optics.pitch_um, mounting=optics.mounting)
        )

    @routes.post("/points", status_code=201)
    def post_point(body: KnownBody) -> ProgressMessage:
        """Take the averaged position as the return of this tilt; 409 while flagged or moving."""
        known = Known(
            x_arcsec=_or_nan(body.x_arcsec),
            y_arcsec=_or_nan(body.y_arcsec),
            height_mm=_or_nan(body.height_mm),
            axis=body.axis or "",
        )
        return _progress(points.take(known))

    @routes.delete("/points/last")
    def delete_last() -> ProgressMessage:
        """Take the last point back."""
        return _progress(points.undo())

    @routes.delete("/points/{number}")
    def delete_point(number: int) -> ProgressMessage:
        """Take one point back."""
        return _progress(points.undo(number))

    @routes.post("/finish", status_code=201)
    def post_finish(body: FinishBody) -> FinishedMessage:
        """Keep the calibration under its name, and use it; no other one is overwritten."""
        made = points.finish(
            body.name.strip(),
            note=body.note.strip(),
            conditions=body.conditions.strip(),
            created_utc=utc_text(instrument.now()[1]),
        )
        text = json.dumps(calibration_document(made), indent=2, allow_nan=False) + "\n"
        path, kept = keep_calibration(folder, text.encode())
        points.give_up()
        why_not = control.use_calibration(path) if body.use else "not asked for"
        feed.announce()
        return {
            "kept": kept_message(path, kept, instrument.scale),
            "warnings": list(kept.warnings),
            "used": why_not == "",
            "why_not": why_not,
        }

    @routes.delete("", status_code=204)
    def delete_all() -> Response:
        """Give it up, with every point taken."""
        points.give_up()
        return Response(status_code=204)

    return routes


_NOT_BEGUN: ProgressMessage = {
    "plan": None,
    "points": [],
    "lacking": "",
    "method": None,
    "focal_length_px": None,
    "focal_length_rel_u": None,
    "residual_rms_arcsec": None,
    "warnings": [],
}


def _progress(progress: Progress) -> ProgressMessage:
    made, plan = progress.calibration, progress.plan
    residuals = {} if made is None else {str(row["file"]): row for row in made.residuals}
    rms = None if made is None else made.residual_rms_arcsec
    scale = None if made is None else (made.focal_length_px, made.focal_length_px_sd)
    return {
        "plan": {
            "way": plan.way.value,
            "sd_arcsec": rounded(plan.sd_arcsec),
            "scale_rel_sd": rounded(plan.scale_rel_sd),
            "lever_mm": rounded(plan.lever_mm),
            "lever_sd_mm": rounded(plan.lever_sd_mm),
            "height_sd_mm": rounded(plan.height_sd_mm),
            "horizontal": plan.horizontal,
        },
        "points": [_point(point, residuals.get(point.name, {})) for point in progress.points],
        "lacking": progress.lacking,
        "method": None if made is None else made.method,
        "focal_length_px": None if scale is None else rounded(scale[0]),
        "focal_length_rel_u": None if scale is None else rounded(scale[1] / scale[0]),
        "residual_rms_arcsec": None if rms is None else rounded(rms),
        "warnings": [] if made is None else list(made.warnings),
    }


def _point(point: Point, residual: dict[str, object]) -> PointMessage:
    def left(axis: str) -> Number:
        value = residual.get(f"{axis}_residual_arcsec")
        return rounded(value) if isinstance(value, float) else None

    return {
        "number": point.number,
        "x_arcsec": rounded(point.x_arcsec),
        "y_arcsec": rounded(point.y_arcsec),
        "height_mm": rounded(point.known.height_mm),
        "axis": point.known.axis or None,
        "x_px": rounded(point.seen.x_px),
        "y_px": rounded(point.seen.y_px),
        "n": point.seen.n,
        "x_residual_arcsec": left("x"),
        "y_residual_arcsec": left("y"),
        "outlier": residual.get("outlier") is True,
    }


def _or_nan(value: float | None) -> float:
    return math.nan if value is None else value
