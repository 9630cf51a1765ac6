"""Every error is a problem in the sense of RFC 9457, with a detail for people."""

from __future__ import annotations

import pytest
from starlette.testclient import TestClient

from tests.service.conftest import Rig


@pytest.mark.parametrize(
    ("method", "path", "status"),
    [
        ("GET", "/api/reading", 404),
        ("GET", "/api/sighting", 404),
        ("GET", "/api/nothing", 404),
        ("GET", "/nothing.html", 404),
        ("GET", "/api/frame.jpg", 503),
        ("GET", "/api/health", 503),
        ("GET", "/api/recent?points=many", 422),
        ("GET", "/api/recent?from_seq=x", 422),
        ("GET", "/api/log?every_s=-1", 422),
        ("GET", "/api/log?every_s=nan", 422),
        ("GET", "/api/log?format=xml", 422),
        ("POST", "/api/status", 405),
        ("POST", "/api/zero", 409),
        ("PUT", "/api/settings", 422),
    ],
)
def test_errors_are_problems(client: TestClient, method: str, path: str, status: int) -> None:
    answer = client.request(method, path)
    assert answer.status_code == status
    assert answer.headers["content-type"] == "application/problem+json"
    problem = answer.json()
    assert set(problem) == {"type", "title", "status", "detail"}  # RFC 9457, 3.1
    assert problem["status"] == status
    assert problem["detail"]
    assert "\n" not in problem["detail"]


def test_a_fault_of_our_own_is_a_problem_too(
    rig: Rig, client: TestClient, monkeypatch: pytest.MonkeyPatch
) -> None:
    def fault() -> None:
        raise ZeroDivisionError

    monkeypatch.setattr(rig.instrument, "status", fault)
    answer = client.get("/api/status")
    assert answer.status_code == 500
    assert answer.headers["content-type"] == "application/problem+json"
    assert "ZeroDivision" not in answer.text


def test_the_description_of_the_api_is_served(client: TestClient) -> None:
    paths = client.get("/openapi.json").json()["paths"]
    assert {"/api/status", "/api/reading", "/api/log", "/api/settings", "/api/zero"} <= set(paths)
    assert client.get("/docs").status_code == 404  # its page would load from outside


def test_without_a_built_dashboard_the_first_page_says_what_to_do(client: TestClient) -> None:
    assert "has not been built" in client.get("/").text


def test_the_dashboard_is_served_from_its_folder(rig: Rig) -> None:
    rig.static.mkdir()
    (rig.static / "index.html").write_text("<title>the page</title>", "utf-8")
    with rig.asked() as client:
        assert "the page" in client.get("/").text
        assert client.get("/api/status").status_code == 200
        missing = client.get("/none.js")
        assert missing.headers["content-type"] == "application/problem+json"
