"""The fixed frame: what the camera shows with the mirror covered, taken away from every picture."""

from __future__ import annotations

from typing import Annotated

from fastapi import APIRouter, Response
from pydantic import BaseModel, ConfigDict, Field
from typing_extensions import TypedDict

from readout.instrument.fixed_frame import FRAMES, FixedFrame
from readout.service.feed import Feed
from readout.sighting.standing import FEWEST


class TakeBody(BaseModel):
    """How many frames to average."""

    model_config = ConfigDict(extra="forbid")

    frames: Annotated[int, Field(strict=True, ge=FEWEST, le=256)] = FRAMES


class FixedFrameMessage(TypedDict):
    """The fixed frame in use now. ``target_seen``: it shows what could be the mirror's return,
    which then has to be covered; a fixed crosshair of the instrument's own looks the same.
    """

    taken_utc: str
    frames: int
    image_width_px: int
    image_height_px: int
    target_seen: bool


def fixed_frame_routes(fixed_frame: FixedFrame, feed: Feed) -> APIRouter:
    """Routes over the fixed frame of the camera in use."""
    routes = APIRouter(prefix="/api/fixed-frame", tags=["preparing"])

    @routes.post("", status_code=201)
    def post_fixed_frame(body: TakeBody | None = None) -> FixedFrameMessage:
        """Take it now, lamp on and mirror covered; 409 while the picture moves. It is kept for this
        camera, picture size and depth. The zero goes; ``prepared_utc`` of the status tells when it
        is in use.
        """
        taken = fixed_frame.take((body or TakeBody()).frames)
        feed.announce()
        width_px, height_px = taken.size_px
        return {
            "taken_utc": taken.known.made_utc,
            "frames": taken.known.fixed_frames,
            "image_width_px": width_px,
            "image_height_px": height_px,
            "target_seen": taken.target_seen,
        }

    @routes.delete("", status_code=204)
    def delete_fixed_frame() -> Response:
        """Forget it: pictures are measured as they come; 409 where there is none."""
        fixed_frame.forget()
        feed.announce()
        return Response(status_code=204)

    return routes
