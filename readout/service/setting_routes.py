"""What can be set: the settings and the zero."""

from __future__ import annotations

from typing import Any

from fastapi import APIRouter, Response

from readout.instrument import Instrument
from readout.service.control import Control
from readout.service.feed import Feed
from readout.service.messages import ZeroMessage, zero_message


def setting_routes(instrument: Instrument, feed: Feed, control: Control) -> APIRouter:
    """Routes that change something."""
    routes = APIRouter(prefix="/api", tags=["settings"])

    @routes.get("/settings")
    def get_settings() -> dict[str, Any]:
        """All settings, the source without a password."""
        return control.settings.shown()

    @routes.put("/settings")
    def put_settings(changes: dict[str, Any]) -> dict[str, Any]:
        """Merge the given settings into those kept; answers them all.

        A source given back as it was shown stays as it was, password and all.
        """
        settings = control.change(changes)
        feed.announce()
        return settings.shown()

    @routes.post("/zero")
    def post_zero() -> ZeroMessage | None:
        """Count from the averaged value; 409 while it is flagged or the mirror moves."""
        zero = instrument.set_zero()
        feed.announce()
        return zero_message(zero)

    @routes.delete("/zero", status_code=204)
    def delete_zero() -> Response:
        """Take the zero back."""
        instrument.clear_zero()
        feed.announce()
        return Response(status_code=204)

    return routes
