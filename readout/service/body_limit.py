"""What is sent here is small: a body that is not ends the request before it fills the memory."""

from __future__ import annotations

from starlette.exceptions import HTTPException
from starlette.types import ASGIApp, Message, Receive, Scope, Send

LARGEST_BYTES = 5_000_000
"""Ten times the largest calibration file there is reason for."""


class BodyLimit:
    """ASGI middleware: 413 once more than ``LARGEST_BYTES`` of a body have come."""

    def __init__(self, app: ASGIApp) -> None:
        self._app = app

    async def __call__(self, scope: Scope, receive: Receive, send: Send) -> None:
        if scope["type"] != "http":
            await self._app(scope, receive, send)
            return
        come = 0

        async def receiving() -> Message:
            nonlocal come
            message = await receive()
            come += len(message.get("body", b""))
            if come > LARGEST_BYTES:
                raise HTTPException(413, "this is larger than anything readout takes: send less")
            return message

        await self._app(scope, receiving, send)
