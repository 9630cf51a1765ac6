"""Runs over HTTP: begun, seen, ended, plotted, exported; refused with a line."""

from __future__ import annotations

import contextlib
import csv
import io
import json
import signal
import sys
import time
import urllib.request
from pathlib import Path
from typing import Any

import pytest
from pyarrow import parquet
from starlette.testclient import TestClient

from readout.errors import NotRecorded
from readout.logbook import FILE_NAME, LogReader
from readout.model import Quality, no_sighting
from tests.service.conftest import STREAM, Rig
from tests.service.test_live import running
from tests.service.test_stream import messages_until


def begun(client: TestClient, **body: object) -> int:
    answer = client.post("/api/runs", json={"title": "night", **body})
    assert answer.status_code == 201
    run_id = int(answer.json()["id"])
    assert answer.headers["Location"] == f"/api/runs/{run_id}"
    return run_id


def problem(answer: Any, status: int) -> str:
    assert answer.status_code == status
    assert answer.headers["content-type"] == "application/problem+json"
    detail = answer.json()["detail"]
    assert isinstance(detail, str)
    assert "\n" not in detail
    return detail


def test_a_run_from_start_to_export(rig: Rig, client: TestClient) -> None:
    assert client.get("/api/runs").json() == []
    assert client.get("/api/status").json()["run"] is None
    client.put("/api/settings", json={"unit": "urad"})
    run_id = begun(client, note="door open", every_s=0)
    rig.measure([None, None, no_sighting(Quality.NO_IMAGE), None])
    assert client.get("/api/status").json()["run"] == {
        "id": run_id,
        "title": "night",
        "started_utc": "2023-11-14T22:13:20.000Z",
        "every_s": 0.0,
        "readings": 4,
    }
    stopped = client.post(f"/api/runs/{run_id}/stop").json()
    assert client.get("/api/status").json()["run"] is None
    assert client.get("/api/runs").json() == [stopped]
    assert stopped == {
        "id": run_id,
        "title": "night",
        "note": "door open",
        "source": "",  # it was begun before there was one
        "started_utc": "2023-11-14T22:13:20.000Z",
        "ended_utc": "2023-11-14T22:13:20.400Z",
        "ending": "stopped",
        "every_s": 0.0,
        "readings": 4,
        "duration_s": 0.4,
        "version": stopped["version"],
    }
    whole = client.get(f"/api/runs/{run_id}").json()
    assert whole | stopped == whole
    assert whole["settings"]["unit"] == "urad"
    [kept] = whole["calibrations"]
    assert kept["from_seq"] == 0
    assert kept["calibration"]["id"] == client.get("/api/status").json()["calibration"]["id"]
    assert [e["event"] for e in whole["events"]] == [
        "run_started",
        "opened",
        "ended",
        "run_stopped",
    ]
    lines = client.get(f"/api/runs/{run_id}/export", params={"format": "ndjson"})
    assert lines.headers["content-disposition"] == f'attachment; filename="run-{run_id}.ndjson"'
    rows = [json.loads(line) for line in lines.text.splitlines()]
    assert [row["t_s"] for row in rows] == [0.1, 0.2, 0.3, 0.4]
    assert (rows[2]["x_arcsec"], rows[2]["quality"]) == (None, ["no_image"])
    newest = client.get("/api/reading").json()
    assert {name: newest[name] for name in rows[3]} == rows[3] | {"t_utc": newest["t_utc"]}
    table = client.get(f"/api/runs/{run_id}/export")
    assert table.headers["content-type"].startswith("text/csv")
    assert len(list(csv.DictReader(io.StringIO(table.text)))) == 4


def test_columns_for_a_plot(rig: Rig, client: TestClient) -> None:
    run_id = begun(client)
    rig.measure([None] * 100 + [no_sighting(Quality.NO_IMAGE)] * 20 + [None] * 80)
    client.post(f"/api/runs/{run_id}/stop")
    series = client.get(f"/api/runs/{run_id}/series", params={"points": 40}).json()
    lengths = {len(column) for column in series.values() if isinstance(column, list)}
    assert len(lengths) == 1
    assert lengths.pop() <= 40
    assert sum(series["n"]) == 200
    assert sum(series["n_good"]) == 180
    for name in ("x_min", "x_max", "x_mean", "y_min", "y_max", "y_mean"):
        column = series[f"{name}_arcsec"]
        bare = [t for t, value in zip(series["t_s"], column, strict=True) if value is None]
        assert bare
        assert min(bare) > 10.0
        assert max(bare) < 12.0 + series["bin_s"]
    part = client.get(
        f"/api/runs/{run_id}/series", params={"from_s": 1.05, "to_s": 2.05, "points": 2000}
    ).json()
    assert part["t_s"] == pytest.approx([1.1 + 0.1 * k for k in range(10)])
    assert part["bin_s"] == 0.0


def test_means_over_every_s(rig: Rig, client: TestClient) -> None:
    run_id = begun(client, every_s=1.0)
    rig.measure([None] * 25)
    client.post(f"/api/runs/{run_id}/stop")
    table = client.get(f"/api/runs/{run_id}/export").text
    rows = list(csv.DictReader(io.StringIO(table)))
    assert [row["n"] for row in rows] == ["9", "10", "6"]  # the first frame came after 0.1 s
    assert all(float(row["x_scatter_arcsec"]) < 1e-9 for row in rows)  # the script does not move


def test_only_one_run_at_a_time(client: TestClient) -> None:
    run_id = begun(client)
    assert f"run {run_id} is being recorded" in problem(client.post("/api/runs", json={}), 409)
    client.post(f"/api/runs/{run_id}/stop")
    assert "not being recorded" in problem(client.post(f"/api/runs/{run_id}/stop"), 409)
    assert begun(client) == run_id + 1


@pytest.mark.parametrize("path", ["", "/series", "/export", "/stop"])
def test_a_run_that_is_none(client: TestClient, path: str) -> None:
    answer = client.request("POST" if path == "/stop" else "GET", f"/api/runs/7{path}")
    assert "there is no run 7" in problem(answer, 404)


@pytest.mark.parametrize(
    ("body", "word"),
    [
        ({"every_s": -1}, "every_s"),
        ({"every_s": "soon"}, "every_s"),
        ({"title": "x" * 201}, "title"),
        ({"interval": 5}, "interval"),
    ],
)
def test_a_run_that_cannot_be(client: TestClient, body: dict[str, object], word: str) -> None:
    assert word in problem(client.post("/api/runs", json=body), 422)
    assert client.get("/api/runs").json() == []


@pytest.mark.parametrize(
    ("query", "status", "word"),
    [
        ("series?points=5", 422, "points"),
        ("series?from_s=nan", 422, "from_s"),
        ("series?from_s=5&to_s=4", 422, "is empty"),
        ("export?format=xlsx", 422, "format"),
    ],
)
def test_what_cannot_be_given(client: TestClient, query: str, status: int, word: str) -> None:
    run_id = begun(client)
    assert word in problem(client.get(f"/api/runs/{run_id}/{query}"), status)


def test_a_log_that_cannot_be_written_is_told_of(rig: Rig, client: TestClient) -> None:
    rig.logbook._connection.execute("PRAGMA query_only = 1")
    assert "cannot be written" in problem(client.post("/api/runs", json={}), 503)


def test_viewers_hear_of_runs(rig: Rig, client: TestClient) -> None:
    with client.websocket_connect(STREAM) as session:
        run_id = begun(client)
        messages_until(session, "event", event="run_started")
        while (message := messages_until(session, "status")[-1])["run"] is None:
            pass
        assert message["run"]["id"] == run_id
        client.post(f"/api/runs/{run_id}/stop")
        messages_until(session, "event", event="run_stopped")
        messages_until(session, "status", run=None)


@pytest.mark.skipif(sys.platform == "win32", reason="ends by signals")
def test_the_end_of_the_service_is_the_end_of_the_run(tmp_path: Path) -> None:
    with running(tmp_path) as live:
        live.reading()
        request = urllib.request.Request(
            live.address + "api/runs",
            data=b'{"title": "until the end"}',
            headers={"Content-Type": "application/json"},
        )
        with urllib.request.urlopen(request, timeout=5.0) as answer:
            run_id = json.loads(answer.read())["id"]
        deadline_s = time.monotonic() + 20.0
        while live.get(f"api/runs/{run_id}")["readings"] < 10 and time.monotonic() < deadline_s:
            time.sleep(0.05)
        counted = live.get("api/status")["run"]["readings"]
        shown = live.get("api/recent?points=200000")["seq"]
        status, _, err = live.end(signal.SIGTERM)
    assert (status, err) == (0, "")
    with LogReader(tmp_path / "data" / FILE_NAME) as reader:
        run = reader.run(run_id)
        rows = [row for chunk in reader.readings(run_id) for row in chunk]
    assert run.ending == "readout was ended"
    assert len(rows) == run.readings >= counted >= 10
    kept = [row.seq for row in rows]
    of_run = [seq for seq in shown if seq >= kept[0]]
    assert kept[: len(of_run)] == of_run  # every reading, with the gaps of a busy machine
    assert kept == sorted(set(kept))
    assert run.ended_utc_ns is not None
    assert run.ended_utc_ns >= run.started_utc_ns + 1000 * rows[-1].t_us


def test_a_run_on_a_full_disk_has_ended_whatever_the_log_says(rig: Rig, client: TestClient) -> None:
    run_id = begun(client)
    rig.measure()
    rig.logbook.flush()
    rig.logbook._connection.execute("PRAGMA query_only = 1")  # as good as a full disk
    rig.measure()
    with contextlib.suppress(NotRecorded):
        rig.logbook.flush()
    rig.measure()
    assert client.get("/api/status").json()["run"] is None
    (listed,) = client.get("/api/runs").json()
    assert listed["ending"] == "the log could not be written"
    assert listed["ended_utc"] > listed["started_utc"]
    assert client.get(f"/api/runs/{run_id}").json()["ending"] == listed["ending"]


def test_numbers_beyond_all_measure_are_refused(rig: Rig, client: TestClient) -> None:
    run_id = begun(client)
    for odd in (0, -1, 2**27, 2**63, 10**30):
        assert "there is no run" in problem(client.get(f"/api/runs/{odd}"), 404)
    for part in ("from_s=-1e300", "to_s=1e300", "from_s=-1e300&to_s=1e300"):
        assert "give another part" in problem(client.get(f"/api/runs/{run_id}/series?{part}"), 422)
    assert client.get(f"/api/runs/{run_id}/series?from_s=-5&to_s=1e9").status_code == 200
    assert client.get(f"/api/recent?from_seq={10**30}").status_code == 200


def test_parquet_without_its_package_names_what_to_install(
    client: TestClient, monkeypatch: pytest.MonkeyPatch
) -> None:
    run_id = begun(client)
    monkeypatch.setitem(sys.modules, "pyarrow", None)  # as if it were not installed
    detail = problem(client.get(f"/api/runs/{run_id}/export?format=parquet"), 501)
    assert "pip install pyarrow" in detail
    assert "choose csv or ndjson" in detail


def test_a_run_as_parquet(rig: Rig, client: TestClient) -> None:
    run_id = begun(client)
    rig.measure()
    client.post(f"/api/runs/{run_id}/stop")
    answer = client.get(f"/api/runs/{run_id}/export?format=parquet")
    assert answer.headers["content-type"] == "application/vnd.apache.parquet"
    assert f"run-{run_id}.parquet" in answer.headers["content-disposition"]
    rows = parquet.read_table(io.BytesIO(answer.content)).to_pylist()
    lines = client.get(f"/api/runs/{run_id}/export?format=ndjson").text.splitlines()
    assert len(rows) == 10
    assert [row["x_arcsec"] for row in rows] == [json.loads(line)["x_arcsec"] for line in lines]
