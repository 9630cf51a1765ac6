"""``WS /api/stream``: everything as it comes, to a viewer that may be slow.

First the status, then the last events, then all that comes. A reading goes out at once; what
arrives while a send is under way forms the next message. A second task waits for the viewer to
leave, so that one who does while the source is silent is noticed. A send that takes longer than
three seconds ends the connection.
"""

from __future__ import annotations

import asyncio
import contextlib
from collections.abc import Callable

from fastapi import APIRouter, WebSocket, WebSocketDisconnect

from readout.instrument import Instrument
from readout.service.feed import Batch, Feed, Subscription
from readout.service.messages import StatusMessage, encode, event_message, readings_message

QUEUE = 600
STATUS_EVERY_S = 1.0
SEND_WITHIN_S = 3.0
GOODBYE_WITHIN_S = 0.3
TRY_AGAIN_LATER = 1013  # RFC 6455 registry: the server is overloaded, as seen from this viewer
GOING_AWAY = 1001


def stream_routes(
    instrument: Instrument, feed: Feed, status: Callable[[], StatusMessage]
) -> APIRouter:
    """The stream."""
    routes = APIRouter(prefix="/api")

    @routes.websocket("/stream")
    async def stream(viewer: WebSocket) -> None:
        await viewer.accept()
        subscription = feed.subscribe(QUEUE)
        leaving = asyncio.create_task(_until_left(viewer))
        sending = asyncio.create_task(_send_all(viewer, subscription, instrument, status))
        try:
            await asyncio.wait({leaving, sending}, return_when=asyncio.FIRST_COMPLETED)
        finally:
            feed.unsubscribe(subscription)
            for task in (leaving, sending):
                task.cancel()
            await asyncio.wait({leaving, sending})
        for task in (leaving, sending):
            error = None if task.cancelled() else task.exception()
            if isinstance(error, Exception) and not _is_departure(error):
                raise error

    return routes


async def _until_left(viewer: WebSocket) -> None:
    while (await viewer.receive())["type"] != "websocket.disconnect":
        pass


async def _send_all(
    viewer: WebSocket,
    subscription: Subscription,
    instrument: Instrument,
    status: Callable[[], StatusMessage],
) -> None:
    loop = asyncio.get_running_loop()
    status_due = loop.time()
    batch = Batch(status_changed=True)
    while not subscription.closed:
        messages = _messages(batch, subscription, instrument)
        if batch.status_changed or loop.time() >= status_due:
            messages.append(encode({"kind": "status", **status()}))
            status_due = loop.time() + STATUS_EVERY_S
        for message in messages:
            try:
                await asyncio.wait_for(viewer.send_text(message), SEND_WITHIN_S)
            except TimeoutError:
                await _close(viewer, TRY_AGAIN_LATER)
                return
        batch = await subscription.next(max(0.0, status_due - loop.time()))
    await _close(viewer, GOING_AWAY)


async def _close(viewer: WebSocket, code: int) -> None:
    """Say goodbye, without waiting for one who does not listen; the server drops it then."""
    with contextlib.suppress(TimeoutError):
        await asyncio.wait_for(viewer.close(code), GOODBYE_WITHIN_S)


def _messages(batch: Batch, subscription: Subscription, instrument: Instrument) -> list[str]:
    messages = [encode(event_message(event)) for event in batch.events]
    if batch.readings:
        columns = readings_message(
            batch.readings,
            dropped=subscription.dropped + subscription.dropped_events,
            average=instrument.average(),
            reference=instrument.reference,
        )
        messages.insert(0, encode(columns))
    return messages


def _is_departure(error: Exception) -> bool:
    """Errors that only say the viewer is no longer there."""
    return isinstance(error, (WebSocketDisconnect, OSError, TimeoutError))
