"""The guided calibration, asked as the page asks."""

from __future__ import annotations

from collections.abc import Callable
from typing import Any

import numpy as np
import pytest
from starlette.testclient import TestClient

from readout.angle import Calibration, nominal_calibration
from readout.files.calibration_file import load_calibration
from readout.model import Quality, Sighting
from tests.instrument.fakes import HEIGHT_PX, WIDTH_PX, sighting
from tests.service.conftest import Rig

SEED = 17
TRUE = nominal_calibration(
    focal_length_mm=250.0,
    pitch_um=3.45,
    rotation_deg=12.0,
    image_width_px=WIDTH_PX,
    image_height_px=HEIGHT_PX,
)
STAY = 14
"""readings at one tilt, of ten a second; the average is over one second"""
TILTS = ((0.0, 0.0), (20.0, 0.0), (-20.0, 0.0), (0.0, 15.0), (0.0, -15.0))
ANGLES = {"way": "angles", "sd_arcsec": 0.05, "scale_rel_sd": 0.002}


def resting_at(
    tilts: tuple[tuple[float, float], ...], truth: Calibration = TRUE, noise_px: float = 0.01
) -> list[Sighting]:
    """STAY sightings at each tilt."""
    rng = np.random.default_rng(SEED)
    script = []
    for tilt in tilts:
        x, y = (float(v) for v in truth.position(*tilt))
        script += [
            sighting(x + dx, y + dy) for dx, dy in rng.normal(0, noise_px, (STAY, 2)).tolist()
        ]
    return script


def end_of(place: int) -> int:
    """Number of the last reading at this tilt."""
    return (place + 1) * STAY - 1


def taking(rig: Rig, client: TestClient, points: list[dict[str, Any]]) -> list[Any]:
    """Play the script and take a point at the end of each tilt."""
    answers: list[Any] = []

    def take(known: dict[str, Any]) -> Callable[[], None]:
        return lambda: answers.append(client.post("/api/calibrating/points", json=known))

    acts = {end_of(place): take(known) for place, known in enumerate(points)}
    rig.play(resting_at(TILTS[: len(points)]), acts)
    return answers


def begun(rig: Rig, client: TestClient, plan: dict[str, Any] = ANGLES) -> None:
    """A camera without a scale whose pictures have come, and a calibration of it begun."""
    rig.fix_calibration(None)
    rig.measure()
    answer = client.post("/api/calibrating", json=plan)
    assert answer.status_code == 201, answer.text


def angles(tilt: tuple[float, float]) -> dict[str, float]:
    return {"x_arcsec": tilt[0], "y_arcsec": tilt[1]}


def test_five_points_without_any_scale_give_the_true_one(rig: Rig, client: TestClient) -> None:
    begun(rig, client)
    answers = taking(rig, client, [angles(tilt) for tilt in TILTS])
    assert [answer.status_code for answer in answers] == [201] * 5
    assert "1 more point" in answers[1].json()["lacking"]
    done = answers[-1].json()
    assert done["lacking"] == ""
    assert done["focal_length_px"] == pytest.approx(TRUE.focal_length_px, rel=2e-3)
    assert len(done["points"]) == 5
    for point in done["points"]:
        assert abs(point["x_residual_arcsec"]) < 0.1
        assert point["n"] >= 10

    answer = client.post(
        "/api/calibrating/finish",
        json={"name": "Bench, north wall", "conditions": "20.1 °C", "note": "stage 2"},
    )
    assert answer.status_code == 201, answer.text
    finished = answer.json()
    assert (finished["used"], finished["why_not"]) == (True, "")
    kept = finished["kept"]
    assert kept["id"].startswith("bench-north-wall-")
    assert (kept["name"], kept["conditions"], kept["source"], kept["active"]) == (
        "Bench, north wall",
        "20.1 °C",
        "simulated",
        True,
    )
    assert kept["signs"] == "unproven"
    assert any("signs unproven" in warning for warning in finished["warnings"])
    made = load_calibration(rig.recorder.path.parent / "calibrations" / f"{kept['id']}.json")
    # The stage defines the axes: the camera's turn comes out too.
    assert made.rotation_deg == pytest.approx(12.0, abs=0.3)
    # The scale of the stage is common to all points and stays in.
    assert made.focal_length_px_sd / made.focal_length_px >= 0.002
    assert client.get("/api/calibrating").json()["plan"] is None
    assert [one["id"] for one in client.get("/api/calibrations").json()] == [kept["id"]]


def test_a_point_is_refused_while_the_mirror_moves_or_is_flagged(
    rig: Rig, client: TestClient
) -> None:
    begun(rig, client)
    details = []

    def take() -> None:
        answer = client.post("/api/calibrating/points", json=angles((0.0, 0.0)))
        details.append((answer.status_code, answer.json().get("detail", "")))

    moving = [sighting(20.0 + k, 24.0) for k in range(12)]
    flagged = [*resting_at(((0.0, 0.0),)), sighting(quality=Quality.SATURATED)]
    rig.play(moving, {11: take})
    rig.play(flagged, {STAY: take})
    take()  # the source has ended: what it showed last is not what stands before it now
    assert [status for status, _ in details] == [409, 409, 409]
    assert "moving" in details[0][1]
    assert "saturated" in details[1][1]
    assert "ended" in details[2][1]
    assert all("take the point" in detail for _, detail in details)
    assert client.get("/api/calibrating").json()["points"] == []


def test_the_last_point_and_any_other_can_be_taken_back(rig: Rig, client: TestClient) -> None:
    begun(rig, client)
    taking(rig, client, [angles(tilt) for tilt in TILTS[:4]])
    assert [
        p["number"] for p in client.delete("/api/calibrating/points/last").json()["points"]
    ] == [
        1,
        2,
        3,
    ]
    assert [p["number"] for p in client.delete("/api/calibrating/points/2").json()["points"]] == [
        1,
        3,
    ]
    assert client.delete("/api/calibrating/points/2").status_code == 409
    refused = client.post("/api/calibrating/finish", json={"name": "too few"})
    assert refused.status_code == 422
    assert "1 more point" in refused.json()["detail"]
    assert client.delete("/api/calibrating").status_code == 204
    assert client.get("/api/calibrating").json()["plan"] is None
    assert client.delete("/api/calibrating/points/last").status_code == 409


def test_a_lever_gives_tilts_of_its_height_over_its_length(rig: Rig, client: TestClient) -> None:
    lever = {"way": "lever", "lever_mm": 250.0, "lever_sd_mm": 0.5, "height_sd_mm": 0.0005}
    begun(rig, client, lever)
    heights = [
        {"height_mm": 250.0 * np.sin(np.radians((x or y) / 3600)), "axis": "x" if x else "y"}
        for x, y in TILTS
    ]
    done = taking(rig, client, heights)[-1].json()
    assert done["points"][1]["x_arcsec"] == pytest.approx(20.0, abs=1e-6)
    assert done["points"][1]["y_arcsec"] is None
    assert done["lacking"] == ""
    # 0.5 mm of 250 mm is common to all points: 0.2 % at the least.
    assert done["focal_length_rel_u"] >= 0.002


def test_what_a_lever_can_be_worth_is_said_before(client: TestClient) -> None:
    answer = client.post(
        "/api/calibrating/expected",
        json={
            "way": "lever",
            "lever_mm": 300.0,
            "lever_sd_mm": 0.3,
            "height_sd_mm": 0.001,
            "lowest": 0.0,
            "highest": 1.0,
            "points": 5,
        },
    )
    expected = answer.json()
    # Heights 0, 0.25 … 1, each with 1 µm: sum of squares about their mean 0.625 mm² (by hand); the
    # pictures' share, 0.01 px of 1 µm behind 100 mm and more, is far below.
    assert expected["points_rel_u"] == pytest.approx(0.001 / 0.625**0.5, rel=0.02)
    assert expected["shared"] == [
        {"name": "length of the lever", "rel_u": pytest.approx(0.001, rel=1e-3)}
    ]
    assert expected["largest"] == "the rows themselves"
    assert expected["rel_u"] == pytest.approx((0.001**2 / 0.625 + 0.001**2) ** 0.5, rel=0.02)
    assert expected["range_arcsec"] == pytest.approx(1 / 300 * 206264.806, rel=1e-5)


@pytest.mark.parametrize(
    ("plan", "word"),
    [
        ({"way": "lever"}, "length"),
        ({"way": "steps"}, "way"),
        ({"way": "angles", "sd_arcsec": -1}, "sd_arcsec"),
    ],
)
def test_a_plan_that_cannot_be_is_refused(
    rig: Rig, client: TestClient, plan: dict[str, Any], word: str
) -> None:
    rig.measure()
    answer = client.post("/api/calibrating", json=plan)
    assert answer.status_code == 422
    assert word in answer.json()["detail"]


@pytest.mark.parametrize(
    ("plan", "known", "word"),
    [
        (ANGLES, {}, "no tilt"),
        ({"way": "lever", "lever_mm": 10.0}, {"axis": "x"}, "no height"),
        ({"way": "lever", "lever_mm": 10.0}, {"height_mm": 1.0}, "which way"),
        ({"way": "lever", "lever_mm": 10.0}, {"height_mm": 11.0, "axis": "x"}, "cannot be raised"),
    ],
)
def test_a_tilt_that_cannot_be_is_refused(
    rig: Rig, client: TestClient, plan: dict[str, Any], known: dict[str, Any], word: str
) -> None:
    begun(rig, client, plan)
    answer = client.post("/api/calibrating/points", json=known)
    assert answer.status_code == 422
    assert word in answer.json()["detail"]


def test_nothing_begins_before_a_picture_nor_over_points_taken(
    rig: Rig, client: TestClient
) -> None:
    early = client.post("/api/calibrating", json=ANGLES)
    assert early.status_code == 409
    begun(rig, client)
    taking(rig, client, [angles(TILTS[0])])
    again = client.post("/api/calibrating", json=ANGLES)
    assert again.status_code == 409
    assert "give them up" in again.json()["detail"]


def test_a_calibration_given_with_the_command_still_counts_and_it_is_said(
    rig: Rig, client: TestClient
) -> None:
    begun(rig, client)
    rig.fix_calibration(TRUE)
    taking(rig, client, [angles(tilt) for tilt in TILTS])
    finished = client.post("/api/calibrating/finish", json={"name": "kept"}).json()
    assert finished["used"] is False
    assert "started" in finished["why_not"]
    assert finished["kept"]["active"] is False


def test_two_calibrations_of_one_name_are_two(rig: Rig, client: TestClient) -> None:
    ids = set()
    for _ in range(2):
        begun(rig, client)
        taking(rig, client, [angles(tilt) for tilt in TILTS])
        answer = client.post("/api/calibrating/finish", json={"name": "bench", "use": False})
        ids.add(answer.json()["kept"]["id"])
    assert len(ids) == 2
    assert len(client.get("/api/calibrations").json()) == 2
