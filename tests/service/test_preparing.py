"""Focus, and optics that were changed."""

from __future__ import annotations

import math
from dataclasses import replace
from typing import Any

import pytest
from starlette.testclient import TestClient

from readout.model import Arm, Sighting
from tests.instrument.fakes import sighting
from tests.service.conftest import Rig


def with_width(blur_px: float) -> Sighting:
    arm = Arm(0.0, 0.0, 100.0, 10.0, line_px=0.0, blur_px=blur_px)
    return replace(sighting(), upright=arm, level=replace(arm, blur_px=2 * blur_px))


def test_the_width_is_followed_once_somebody_asks(rig: Rig, client: TestClient) -> None:
    rig.measure([with_width(9.0)])
    assert client.get("/api/focus").json()["spread_px"] == []
    rig.measure([with_width(blur) for blur in (4.0, 3.0, 2.0, 3.0)])
    trace = client.get("/api/focus").json()
    assert trace["upright_px"] == [4.0, 3.0, 2.0, 3.0]
    assert trace["level_px"] == [8.0, 6.0, 4.0, 6.0]
    # Both arms in one number: the root of the mean square, 2 sqrt((1 + 4) / 2).
    assert trace["best_px"] == pytest.approx(2 * 2.5**0.5)
    assert client.delete("/api/focus/best").json()["spread_px"] == trace["spread_px"][-1:]


def test_it_begins_anew_after_a_pause(rig: Rig, client: TestClient) -> None:
    client.get("/api/focus")
    rig.measure([with_width(2.0)])
    rig.clock.advance(11)
    rig.measure([with_width(1.0)])
    assert client.get("/api/focus").json()["spread_px"] == []


def test_changed_optics_take_the_zero_and_ask_for_a_new_one(rig: Rig, client: TestClient) -> None:
    told: list[str] = []
    rig.instrument.on_event.append(lambda event: told.append(f"{event.event}: {event.text}"))
    wanted = []

    def change() -> None:
        assert client.post("/api/zero").status_code == 200
        answer = client.post("/api/optics/changed", json={"what": "the lamp"})
        assert answer.status_code == 204
        status = client.get("/api/status").json()
        wanted.append((status["zero"], status["zero_wanted"]))

    def zero_anew() -> None:
        assert client.post("/api/zero").status_code == 200
        wanted.append(client.get("/api/status").json()["zero_wanted"])

    rig.play([None] * 40, {12: change, 39: zero_anew})
    assert wanted == [(None, "the lamp changed"), ""]
    assert "optics: optics changed: the lamp; set a new zero" in told
    assert "zero: the zero is gone: the optics were changed" in told


@pytest.mark.parametrize("body", [{}, {"what": ""}, {"what": "  "}, {"what": "x" * 101}])
def test_a_change_needs_a_name(client: TestClient, body: dict[str, str]) -> None:
    assert client.post("/api/optics/changed", json=body).status_code == 422


def test_the_budget_of_the_average_adds_up(rig: Rig, client: TestClient) -> None:
    def line(document: dict[str, Any], name: str) -> dict[str, Any]:
        return next(one for one in document["lines"] if one["name"] == name)

    assert client.get("/api/budget").status_code == 409
    rig.measure([None] * 12)
    both = client.get("/api/budget").json()
    assert both["schema"] == "readout.budget/1"
    x = both["x"]
    known = [one["u_arcsec"] for one in x["lines"] if one["u_arcsec"] is not None]
    assert x["combined_u_arcsec"] == pytest.approx(math.hypot(*known))
    # Ten readings of 0.01 px each (the scripted covariance is 1e-4 px²) average to 0.01/√10 px.
    scale = client.get("/api/status").json()["calibration"]["scale_x_arcsec_per_px"]
    assert line(x, "noise")["u_arcsec"] == pytest.approx(0.01 * scale / 10**0.5, rel=1e-3)
    client.put("/api/settings", json={"conditions": {"seating_arcsec": 0.6}})
    seating = line(client.get("/api/budget").json()["x"], "seating")
    # Limits of ± a, rectangular: a / √3 (JCGM 100:2008, 4.3.7).
    assert seating["u_arcsec"] == pytest.approx(0.6 / 3**0.5)
    refused = client.put("/api/settings", json={"conditions": {"seating": 0.6}})
    assert refused.status_code == 422
    assert "seating" in refused.json()["detail"]
