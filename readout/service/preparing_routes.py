"""What one does before measuring: focus, and tell that the optics were changed."""

from __future__ import annotations

from typing import Annotated, Any

from fastapi import APIRouter, Response
from pydantic import BaseModel, ConfigDict, Field

from readout.instrument import Instrument
from readout.instrument.focusing import Focusing
from readout.service.feed import Feed


class ChangedBody(BaseModel):
    """What of the optics is another now: the lamp, a polariser, the beam splitter."""

    model_config = ConfigDict(extra="forbid")

    what: Annotated[str, Field(min_length=1, max_length=100, pattern=r"\S")]


def preparing_routes(instrument: Instrument, focusing: Focusing, feed: Feed) -> APIRouter:
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

    @routes.post("/optics/changed", status_code=204)
    def post_changed(body: ChangedBody) -> Response:
        """Something of the optics is another now: the zero goes, and a new one is asked for."""
        instrument.optics_changed(" ".join(body.what.split()))
        feed.announce()
        return Response(status_code=204)

    return routes
