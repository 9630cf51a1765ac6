"""Who may ask: pages of this address and programs of this machine, nobody else."""

from __future__ import annotations

import asyncio

import pytest
from starlette.testclient import TestClient
from starlette.types import Message, Receive, Scope, Send
from starlette.websockets import WebSocketDisconnect

from readout.service.guard import Guard
from tests.service.conftest import HERE, STREAM

STRANGERS = [
    "readout.example:8470",
    "127.0.0.1",
    "127.0.0.1:80",
    "127.0.0.1.readout.example:8470",
    "localhost:8471",
    "",
]


@pytest.mark.parametrize(
    "host", ["127.0.0.1:8470", "localhost:8470", "LOCALHOST:8470", "[::1]:8470"]
)
def test_this_machine_is_answered(client: TestClient, host: str) -> None:
    answer = client.get("/api/status", headers={"Host": host, "Origin": f"http://{host}"})
    assert answer.status_code == 200
    assert answer.headers["content-security-policy"].startswith("default-src 'self'")
    assert answer.headers["x-content-type-options"] == "nosniff"
    headers = {"Host": host, "Origin": f"http://{host}"}
    with client.websocket_connect(STREAM, headers=headers) as session:
        assert session.receive_json()["kind"] == "status"


@pytest.mark.parametrize("host", STRANGERS)
def test_another_host_name_is_refused(client: TestClient, host: str) -> None:
    answer = client.get("/api/status", headers={"Host": host})
    assert answer.status_code == 421
    assert answer.headers["content-type"] == "application/problem+json"
    with (
        pytest.raises(WebSocketDisconnect),
        client.websocket_connect(STREAM, headers={"Host": host}),
    ):
        pass


@pytest.mark.parametrize(
    "origin",
    [
        "http://readout.example",
        "null",
        "https://127.0.0.1:8470",
        "http://localhost:8470",
        HERE + "1",
    ],
)
def test_a_page_of_another_address_is_refused(client: TestClient, origin: str) -> None:
    headers = {"Host": "127.0.0.1:8470", "Origin": origin}
    for answer in (
        client.get("/api/status", headers=headers),
        client.put("/api/settings", headers=headers, json={"unit": "urad"}),
        client.post("/api/zero", headers=headers),
    ):
        assert answer.status_code == 403
        assert answer.headers["content-type"] == "application/problem+json"
    with (
        pytest.raises(WebSocketDisconnect),
        client.websocket_connect(STREAM, headers=headers),
    ):
        pass


def test_the_pages_of_the_service_itself_are_guarded_too(client: TestClient) -> None:
    assert client.get("/", headers={"Host": "readout.example"}).status_code == 421


@pytest.mark.parametrize("site", ["cross-site", "same-site", "unheard-of"])
@pytest.mark.parametrize(
    ("path", "mode", "destination"),
    [
        ("/api/status", "no-cors", "image"),
        ("/api/frame.jpg", "no-cors", "script"),
        ("/api/log", "navigate", "document"),
        ("/", "navigate", "iframe"),
    ],
)
def test_what_a_page_elsewhere_embeds_is_refused(
    client: TestClient, site: str, path: str, mode: str, destination: str
) -> None:
    """Such a request carries no Origin (W3C, Fetch Metadata Request Headers)."""
    headers = {"Sec-Fetch-Site": site, "Sec-Fetch-Mode": mode, "Sec-Fetch-Dest": destination}
    answer = client.get(path, headers=headers)
    assert answer.status_code == 403
    assert answer.headers["content-type"] == "application/problem+json"


@pytest.mark.parametrize("site", ["same-origin", "none"])
def test_our_own_page_and_an_address_typed_in_are_answered(client: TestClient, site: str) -> None:
    assert client.get("/api/status", headers={"Sec-Fetch-Site": site}).status_code == 200


def test_a_link_elsewhere_leads_to_the_dashboard_but_no_frame_shows_it(client: TestClient) -> None:
    headers = {
        "Sec-Fetch-Site": "cross-site",
        "Sec-Fetch-Mode": "navigate",
        "Sec-Fetch-Dest": "document",
    }
    answer = client.get("/", headers=headers)
    assert answer.status_code == 200
    assert "frame-ancestors 'none'" in answer.headers["content-security-policy"]
    assert answer.headers["cross-origin-resource-policy"] == "same-origin"


@pytest.mark.parametrize("second", [b"readout.example", b"127.0.0.1:8470"])
def test_two_host_names_in_one_request_are_refused(second: bytes) -> None:
    """Which of them somebody in between went by is not known (RFC 9112, 3.2: a bad request)."""
    sent: list[Message] = []

    async def never(scope: Scope, receive: Receive, send: Send) -> None:
        raise AssertionError("let through")

    async def ask() -> None:
        headers = [(b"host", b"127.0.0.1:8470"), (b"host", second)]
        scope = {"type": "http", "method": "GET", "path": "/api/status", "headers": headers}

        async def receive() -> Message:
            return {"type": "http.request"}

        async def send(message: Message) -> None:
            sent.append(message)

        await Guard(never, port=8470)(scope, receive, send)

    asyncio.run(ask())
    assert sent[0]["status"] == 421
