"""The distance check and the range over HTTP, against the laws they stand on."""

from __future__ import annotations

import math
from typing import Any

import pytest
from starlette.testclient import TestClient

from tests.service.conftest import Rig

DEFOCUS_MM, FOCAL_MM = 0.8, 300.0


def rows() -> list[dict[str, Any]]:
    """The distance law, S (1 + d/f - L d/f^2), in y alone, without noise."""
    return [
        {
            "distance_mm": distance,
            "step": step,
            "x_arcsec": None,
            "y_arcsec": tilt * (1 + DEFOCUS_MM / FOCAL_MM - distance * DEFOCUS_MM / FOCAL_MM**2),
            "sd_arcsec": 0.1,
        }
        for distance in (300, 800, 1900)
        for step, tilt in (("low", -300.0), ("high", 300.0))
    ]


def problem(answer: Any, status: int) -> str:
    assert answer.status_code == status
    assert answer.headers["content-type"] == "application/problem+json"
    detail = answer.json()["detail"]
    assert isinstance(detail, str)
    assert "\n" not in detail
    return detail


def test_the_defocus_of_the_law(client: TestClient) -> None:
    body = {"rows": rows(), "focal_length_mm": FOCAL_MM, "objective_mm": 40, "mirror_mm": 12}
    answer = client.post("/api/checks/distance", json=body)
    assert answer.status_code == 200
    found = answer.json()
    assert found["defocus_mm"] == pytest.approx(DEFOCUS_MM, abs=1e-6)
    assert 0 < found["defocus_u_mm"] < 0.1
    assert found["stations"][1]["way_y_arcsec"] == pytest.approx(0.0, abs=1e-6)
    assert found["warnings"] == []


def test_the_calibration_in_use_knows_the_focal_length(rig: Rig, client: TestClient) -> None:
    """The rig's is nominal: 300 mm, to 1 %, which counts twice (d = r f^2 / (1 - r f))."""
    body = {"rows": rows(), "focal_length_mm": FOCAL_MM}
    sure = client.post("/api/checks/distance", json=body).json()
    rig.measure()
    unsure = client.post("/api/checks/distance", json={"rows": rows()}).json()
    assert unsure["focal_length_mm"] == pytest.approx(FOCAL_MM)
    added = math.sqrt(unsure["defocus_u_mm"] ** 2 - sure["defocus_u_mm"] ** 2)
    assert added == pytest.approx(2 * 0.01 * DEFOCUS_MM, rel=0.02)


def test_without_any_focal_length_it_is_asked_for(rig: Rig, client: TestClient) -> None:
    rig.fix_calibration(None)
    answer = client.post("/api/checks/distance", json={"rows": rows()})
    assert "focal_length_mm" in problem(answer, 422)


@pytest.mark.parametrize(
    ("change", "words"),
    [
        ({"rows": []}, "no rows"),
        ({"rows": rows()[:1]}, "called 'low'"),
        ({"rows": [{"distance_mm": "far", "step": "a"}]}, "distance_mm is 'far'"),
        ({"rows": [{"distance_mm": True, "step": "a"}]}, "distance_mm is 'True'"),
        ({"rows": [3]}, "rows.0"),
        ({"objective_mm": 13, "mirror_mm": 12}, "clipped"),
        ({"focal_length_mm": 0}, "focal_length_mm"),
        ({"focal": 300}, "focal"),
    ],
)
def test_a_check_that_cannot_be(client: TestClient, change: dict[str, Any], words: str) -> None:
    body = {"rows": rows(), "focal_length_mm": FOCAL_MM} | change
    assert words in problem(client.post("/api/checks/distance", json=body), 422)


def test_the_range_at_each_distance(client: TestClient) -> None:
    """tan 2t = (D -+ M) / 2 / L."""
    answer = client.get("/api/range?objective_mm=40&mirror_mm=25&distance_mm=500&distance_mm=2000")
    assert answer.status_code == 200
    for found, distance in zip(answer.json(), (500, 2000), strict=True):
        assert found["distance_mm"] == distance
        for name, way in (("whole_arcsec", 7.5), ("gone_arcsec", 32.5)):
            expected = math.degrees(math.atan(way / distance)) / 2 * 3600
            assert found[name] == pytest.approx(expected, rel=1e-9)
        assert f"at {distance} mm the return is whole" in found["words"]


@pytest.mark.parametrize(
    ("query", "words"),
    [
        ("objective_mm=40&mirror_mm=25", "distance_mm"),
        ("objective_mm=40&mirror_mm=25&distance_mm=-1", "distance of -1 mm"),
        ("objective_mm=40&mirror_mm=25&distance_mm=nan", "distance of nan mm"),
        ("objective_mm=0&mirror_mm=25&distance_mm=500", "objective_mm"),
        ("objective_mm=inf&mirror_mm=25&distance_mm=500", "objective_mm"),
    ],
)
def test_a_range_that_cannot_be(client: TestClient, query: str, words: str) -> None:
    assert words in problem(client.get(f"/api/range?{query}"), 422)
