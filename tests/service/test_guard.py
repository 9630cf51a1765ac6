"""Who may ask: pages of this address and programs of this machine, nobody else."""

from __future__ import annotations

import pytest
from starlette.testclient import TestClient
from starlette.websockets import WebSocketDisconnect

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
