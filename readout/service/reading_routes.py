"""What the instrument shows now: status, reading, sighting, picture, recent rows, health."""

from __future__ import annotations

from collections.abc import Callable
from typing import Annotated

from fastapi import APIRouter, Query, Response

from readout.instrument import Instrument, State
from readout.service.feed import Feed, thinned
from readout.service.messages import (
    HealthMessage,
    ReadingMessage,
    ReadingsMessage,
    SightingMessage,
    StatusMessage,
    encode,
    reading_message,
    recent_message,
    sighting_message,
)
from readout.service.problems import Problem


def reading_routes(
    instrument: Instrument, feed: Feed, status: Callable[[], StatusMessage]
) -> APIRouter:
    """Routes that only look."""
    routes = APIRouter(prefix="/api", tags=["readings"])

    @routes.get("/status")
    def get_status() -> StatusMessage:
        """Source, state, calibration and zero."""
        return status()

    @routes.get("/reading")
    def get_reading() -> ReadingMessage:
        """The newest reading, and the average over the trailing window."""
        newest, age_s = instrument.newest, instrument.age_s
        if newest is None or age_s is None:
            raise Problem(404, f"there is no reading: {_why(instrument)}")
        return reading_message(
            newest[1],
            instrument.reference,
            instrument.average(),
            state=instrument.status().state,
            age_s=age_s,
        )

    @routes.get("/sighting")
    def get_sighting() -> SightingMessage:
        """Where the return image lies in the newest picture, and its arms."""
        newest = instrument.newest
        if newest is None:
            raise Problem(404, f"there is no picture: {_why(instrument)}")
        return sighting_message(newest[0])

    @routes.get("/recent", response_model=ReadingsMessage)
    def get_recent(
        from_seq: int = 0, points: Annotated[int, Query(ge=10, le=200_000)] = 3000
    ) -> Response:
        """The readings still held (ten minutes), thinned to about ``points`` real rows."""
        rows = thinned(feed.rows(from_seq), points)
        text = encode(recent_message(rows, instrument.average(), instrument.reference))
        return Response(text, media_type="application/json")

    @routes.get("/frame.jpg", responses={200: {"content": {"image/jpeg": {}}}})
    def get_frame(overlay: bool = False) -> Response:
        """The newest picture; ``overlay=1``: with the fitted arms. ``X-Seq`` tells its reading."""
        from readout.service.picture import jpeg

        picture = instrument.picture()
        if picture is None:
            raise Problem(503, f"there is no picture: {_why(instrument)}")
        headers = {"X-Seq": str(picture.frame.seq), "Cache-Control": "no-store"}
        return Response(jpeg(picture, overlay=overlay), media_type="image/jpeg", headers=headers)

    @routes.get("/health")
    def get_health() -> HealthMessage:
        """200 while readings flow, else 503 with the reason."""
        state = instrument.status().state
        if state is not State.MEASURING:
            raise Problem(503, _why(instrument))
        return {"state": state.value}

    return routes


def _why(instrument: Instrument) -> str:
    now = instrument.status()
    source = now.source or "the source"
    words = {
        State.OPENING: f"{source} is being opened",
        State.STALLED: f"{source} gives no frames at the moment",
        State.LOST: f"{source} is lost and is being opened again",
        State.ENDED: f"{source} has been read to its end",
        State.FAILED: f"{source} cannot be used",
        State.MEASURING: "the next frame brings it",
    }[now.state]
    return f"{words} ({now.state_detail})" if now.state_detail else words
