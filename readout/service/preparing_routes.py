"""What one does beside measuring: focus, the uncertainty budget, and optics that were changed."""

from __future__ import annotations

from typing import Annotated, Any

from fastapi import APIRouter, Response
from pydantic import BaseModel, ConfigDict, Field

from readout.angle.budget_conditions import parse_conditions
from readout.angle.budget_document import tilt_budget_document
from readout.instrument import Instrument
from readout.instrument.focusing import Focusing
from readout.instrument.present_budget import present_budget
from readout.service.control import Control
from readout.service.feed import Feed


class ChangedBody(BaseModel):
    """What of the optics is another now: the lamp, a polariser, the beam splitter."""

    model_config = ConfigDict(extra="forbid")

    what: Annotated[str, Field(min_length=1, max_length=100, pattern=r"\S")]


def preparing_routes(
    instrument: Instrument, focusing: Focusing, control: Control, feed: Feed
) -> APIRouter:
    """Routes of the preparations that make no calibration."""
    routes = APIRouter(prefix="/api", tags=["preparing"])

    @routes.get("/focus")
    def get_focus() -> dict[str, Any]:
        """Widths of both arms' lines since the first of these questions, the best, and words.

        Columns, oldest first, as standard deviations of the light across the line. It is followed
        while it is asked for at least every ten seconds.
        """
        return focusing.trace().document()

    @routes.delete("/focus/best")
    def delete_best() -> dict[str, Any]:
        """Begin anew: another target, or another light."""
        return focusing.forget_best().document()

    @routes.get("/budget")
    def get_budget() -> dict[str, Any]:
        """The uncertainty of the averaged value now, line by line, from zero where one is set.

        What the user knows of the set-up comes from ``conditions`` in the settings.
        """
        conditions = parse_conditions(control.settings.conditions)
        return tilt_budget_document(present_budget(instrument, conditions))

    @routes.post("/optics/changed", status_code=204)
    def post_changed(body: ChangedBody) -> Response:
        """Something of the optics is another now: the zero goes, and a new one is asked for."""
        instrument.optics_changed(" ".join(body.what.split()))
        feed.announce()
        return Response(status_code=204)

    return routes
