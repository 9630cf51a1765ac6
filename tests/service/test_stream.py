"""The stream over a WebSocket, as a page reads it."""

from __future__ import annotations

import asyncio
import time
from typing import Any

import pytest
from starlette.testclient import TestClient, WebSocketTestSession

from readout.model import Quality, no_sighting
from readout.service import stream
from readout.service.feed import Feed
from tests.instrument.fakes import reading
from tests.service.conftest import STREAM, Rig

COLUMNS = {
    *("seq", "t_s", "x_arcsec", "y_arcsec", "x_sd_arcsec", "y_sd_arcsec"),
    *("x_u_arcsec", "y_u_arcsec", "x_px", "y_px", "quality"),
}


def messages_until(session: WebSocketTestSession, kind: str, **found: object) -> list[Any]:
    """All messages up to the first of ``kind`` with these contents."""
    messages: list[Any] = []
    deadline_s = time.monotonic() + 10.0
    while time.monotonic() < deadline_s:
        messages.append(session.receive_json())
        last = messages[-1]
        if last["kind"] == kind and all(last.get(k) == v for k, v in found.items()):
            return messages
    pytest.fail(f"no {kind} with {found} in {messages}")


def test_status_comes_at_once_then_readings_events_and_changes(
    rig: Rig, client: TestClient
) -> None:
    with client.websocket_connect(STREAM) as session:
        first = session.receive_json()
        assert (first["kind"], first["state"]) == ("status", "opening")
        rig.measure([None, None, no_sighting(Quality.NO_IMAGE)])
        messages = messages_until(session, "status", state="ended")
    readings = [m for m in messages if m["kind"] == "readings"]
    for message in readings:
        assert set(message) >= COLUMNS | {"dropped", "average"}
        assert len({len(message[name]) for name in COLUMNS}) == 1
    assert [seq for m in readings for seq in m["seq"]] == [0, 1, 2]
    assert [q for m in readings for q in m["quality"]] == [[], [], ["no_image"]]
    assert readings[-1]["x_arcsec"][-1] is None
    events = [m for m in messages if m["kind"] == "event"]
    assert [m["event"] for m in events] == ["opened", "ended"]
    assert set(events[0]) == {"kind", "t_s", "t_utc", "event", "text"}


def test_two_viewers_see_the_same_and_a_leaving_one_is_let_go(rig: Rig, client: TestClient) -> None:
    with client.websocket_connect(STREAM) as stays:
        with client.websocket_connect(STREAM) as leaves:
            leaves.receive_json()
            rig.measure([None])
            messages_until(leaves, "readings", seq=[0])
        rig.feed.append(reading(1))
        messages_until(stays, "readings", seq=[1])
    deadline_s = time.monotonic() + 5.0
    while rig.feed._subscriptions and time.monotonic() < deadline_s:
        time.sleep(0.01)
    assert not rig.feed._subscriptions


def test_what_a_slow_viewer_lost_is_told_in_its_next_message(
    rig: Rig, client: TestClient, monkeypatch: pytest.MonkeyPatch
) -> None:
    monkeypatch.setattr(stream, "QUEUE", 4)
    with client.websocket_connect(STREAM) as session:
        session.receive_json()
        (subscription,) = rig.feed._subscriptions
        for k in range(10):  # as if they had come during one send
            subscription._readings.append(reading(k)) if k < 4 else subscription.offer(reading(k))
        subscription.dropped_events = 2
        rig.feed.announce()
        message = messages_until(session, "readings")[-1]
    assert message["seq"] == [6, 7, 8, 9]
    assert message["dropped"] == 8
    assert rig.feed.dropped == 8


def test_changes_of_settings_and_zero_reach_the_viewers(rig: Rig, client: TestClient) -> None:
    with client.websocket_connect(STREAM) as session:
        session.receive_json()
        rig.at_reading(9, lambda: client.post("/api/zero"))
        rig.measure()
        while (zero := messages_until(session, "status")[-1]["zero"]) is None:
            pass
        assert zero["n"] == 10
        client.put("/api/settings", json={"unit": "urad"})
        messages_until(session, "event", event="settings")


def test_the_stream_ends_with_the_service(rig: Rig) -> None:
    with rig.asked() as client, client.websocket_connect(STREAM) as session:
        session.receive_json()
        rig.feed.detach()
        closing = session.receive()
        while closing["type"] == "websocket.send":
            closing = session.receive()
    assert closing["type"] == "websocket.close"


class DeafViewer:
    """Takes a message or two; then its buffers are full and sending never comes back."""

    def __init__(self) -> None:
        self.taken: list[str] = []
        self.closed_with: int | None = None

    async def send_text(self, message: str) -> None:
        if len(self.taken) == 2:
            await asyncio.Event().wait()
        self.taken.append(message)

    async def close(self, code: int) -> None:
        self.closed_with = code
        await asyncio.Event().wait()  # neither does closing


def test_a_viewer_that_takes_nothing_for_too_long_is_let_go(
    rig: Rig, monkeypatch: pytest.MonkeyPatch
) -> None:
    monkeypatch.setattr(stream, "SEND_WITHIN_S", 0.05)
    monkeypatch.setattr(stream, "GOODBYE_WITHIN_S", 0.05)
    deaf = DeafViewer()

    async def run() -> None:
        rig.feed.attach(asyncio.get_running_loop())
        subscription = rig.feed.subscribe(10)

        def status() -> dict[str, str]:
            subscription.offer(reading(len(deaf.taken)))  # there is always more to send
            return {}

        sending = stream._send_all(deaf, subscription, rig.instrument, status)
        await asyncio.wait_for(sending, 10.0)

    asyncio.run(run())
    assert len(deaf.taken) == 2
    assert deaf.closed_with == stream.TRY_AGAIN_LATER


def test_a_feed_without_viewers_takes_readings_all_the_same() -> None:
    feed = Feed(capacity=3)
    feed.append(reading(0))
    assert feed.dropped == 0


def test_a_viewer_that_comes_late_first_gets_the_last_events_each_once(
    rig: Rig, client: TestClient
) -> None:
    rig.measure()
    for number in range(40):
        rig.instrument.tell("note", f"number {number}")
    with client.websocket_connect(STREAM) as session:
        assert session.receive_json()["kind"] == "status"
        kept = [session.receive_json() for _ in range(30)]
        assert [m["text"] for m in kept] == [f"number {number}" for number in range(10, 40)]
        rig.instrument.tell("note", "the newest")
        later = messages_until(session, "event", text="the newest")
    assert [m["text"] for m in later if m["kind"] == "event"] == ["the newest"]
