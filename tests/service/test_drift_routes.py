"""The drift of a run and the floor over HTTP: made, kept, held against, refused."""

from __future__ import annotations

import json
import math
from typing import Any

import numpy as np
import pytest
from starlette.testclient import TestClient

from readout.logbook import LogReader
from readout.model import Quality, Reading
from readout.service.drift_routes import FLOOR_FILE
from readout.stability import drift_document, drift_of, floor_document, floor_of_null_test
from tests.logbook.made import STARTED_UTC_NS, new_run, reading
from tests.service.conftest import Rig, small_calibration


def logged(rig: Rig, readings: list[Reading]) -> int:
    """A run of these readings, a second apart, read with the rig's calibration."""
    run_id = rig.logbook.start(new_run())
    used = small_calibration().id
    rig.logbook.note_calibration(0, used, json.dumps({"id": used}))
    for second, one in enumerate(readings):
        rig.logbook.append(one, t_s=float(second))
    rig.logbook.end(STARTED_UTC_NS + len(readings) * 10**9)
    return run_id


def noise(seed: int, n: int, *, per_h: float = 0.0) -> list[Reading]:
    """Readings that scatter by 0.05", drifting in x."""
    x, y = 0.05 * np.random.default_rng(seed).standard_normal((2, n))
    return [reading(k, float(x[k] + per_h * k / 3600), float(y[k])) for k in range(n)]


def problem(answer: Any, status: int) -> str:
    assert answer.status_code == status
    assert answer.headers["content-type"] == "application/problem+json"
    detail = answer.json()["detail"]
    assert isinstance(detail, str)
    assert "\n" not in detail
    return detail


def test_the_drift_of_a_run(rig: Rig, client: TestClient) -> None:
    readings = noise(1, 600, per_h=6.0)
    readings[100] = reading(100, 99.0, 99.0, Quality.SATURATED)
    answer = client.get(f"/api/runs/{logged(rig, readings)}/drift")
    assert answer.status_code == 200
    found = answer.json()
    assert (found["n"], found["flagged"], found["gaps"]) == (600, 1, 0)
    sd = found["x_rate_sd_arcsec_per_h"]
    # A line through independent readings: sigma sqrt(12 / n) / T, known as sigma is.
    assert sd == pytest.approx(0.05 * math.sqrt(12 / 600) * 6, rel=4 / math.sqrt(2 * 600))
    assert abs(found["x_rate_arcsec_per_h"] - 6.0) < 4 * sd
    assert found["allan"]["tau_s"][:3] == [1, 2, 4]
    assert "claims" not in found


def test_a_floor_is_made_of_a_run_and_no_smaller_drift_is_claimed(
    rig: Rig, client: TestClient
) -> None:
    assert "clamp the mirror" in problem(client.get("/api/floor"), 404)
    null = logged(rig, noise(2, 1200))
    made = client.post("/api/floor", json={"run": null})
    assert made.status_code == 201
    assert made.json()["calibration_id"] == small_calibration().id
    assert made.json()["created_utc"].startswith("2023-11-14T22:13:20")
    assert client.get("/api/floor").json() == made.json()
    assert json.loads((rig.store.path.parent / FLOOR_FILE).read_text("utf-8")) == made.json()

    run_id = logged(rig, noise(3, 600, per_h=6.0))
    found = client.get(f"/api/runs/{run_id}/drift").json()
    assert [claim["verdict"] for claim in found["claims"]] == ["claimed", "within_floor"]
    assert "no drift is claimed" in found["claims"][1]["words"]

    assert client.delete("/api/floor").status_code == 204
    assert "claims" not in client.get(f"/api/runs/{run_id}/drift").json()
    problem(client.get("/api/floor"), 404)


def test_a_floor_made_elsewhere_is_kept(client: TestClient) -> None:
    x, y = np.random.default_rng(4).standard_normal((2, 600))
    floor = floor_document(floor_of_null_test(np.arange(600.0), x, y, created_utc="2026-01-01"))
    assert client.put("/api/floor", json=floor).json() == floor
    assert client.get("/api/floor").json() == floor
    refusals = [({"schema": "readout.floor/9"}, "no floor"), ({"tau_s": [1]}, "differ in length")]
    for change, words in refusals:
        assert words in problem(client.put("/api/floor", json=floor | change), 422)
    assert client.get("/api/floor").json() == floor
    text = json.dumps(floor | {"n": 1e400}).encode()
    answer = client.put("/api/floor", content=text, headers={"Content-Type": "application/json"})
    problem(answer, 422)


def test_a_damaged_floor_is_told_of(rig: Rig, client: TestClient) -> None:
    run_id = logged(rig, noise(5, 100))
    (rig.store.path.parent / FLOOR_FILE).write_text("{", "utf-8")
    for path in ("/api/floor", f"/api/runs/{run_id}/drift"):
        assert FLOOR_FILE in problem(client.get(path), 422)


def test_runs_without_a_drift(rig: Rig, client: TestClient) -> None:
    problem(client.get("/api/runs/7/drift"), 404)
    problem(client.post("/api/floor", json={"run": 7}), 404)
    problem(client.post("/api/floor", json={}), 422)
    short = logged(rig, noise(6, 2))
    assert "2 readings are no series" in problem(client.get(f"/api/runs/{short}/drift"), 422)
    assert "too few" in problem(client.post("/api/floor", json={"run": short}), 422)
    dim = logged(rig, [reading(k, quality=Quality.DIM) for k in range(9)])
    assert "9 have a caution" in problem(client.get(f"/api/runs/{dim}/drift"), 422)
    empty = logged(rig, [])
    assert "0 readings" in problem(client.get(f"/api/runs/{empty}/drift"), 422)


def test_angles_of_two_scales_have_no_common_drift(rig: Rig, client: TestClient) -> None:
    run_id = rig.logbook.start(new_run())
    for k, one in enumerate(noise(7, 20)):
        if k in (0, 10):
            rig.logbook.note_calibration(one.seq, f"c{k}", json.dumps({"id": f"c{k}"}))
        rig.logbook.append(one, t_s=float(k))
    rig.logbook.end(STARTED_UTC_NS + 20 * 10**9)
    assert "2 calibrations" in problem(client.get(f"/api/runs/{run_id}/drift"), 422)


def test_the_log_gives_the_columns_it_holds(rig: Rig) -> None:
    readings = noise(8, 50)
    run_id = logged(rig, readings)
    with LogReader(rig.logbook.path) as reader:
        series = reader.tilts(run_id)
    assert series.t_s == pytest.approx(np.arange(50.0))
    assert series.x_arcsec == pytest.approx([one.x_arcsec for one in readings])
    assert series.y_arcsec == pytest.approx([one.y_arcsec for one in readings])
    assert drift_document(drift_of(series))["n"] == 50
