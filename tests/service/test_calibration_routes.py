"""Calibration files kept to choose from."""

from __future__ import annotations

import json
from dataclasses import replace
from pathlib import Path

import pytest
from starlette.testclient import TestClient

from readout.angle import Calibration
from readout.files.calibration_file import calibration_document, load_calibration
from tests.service.conftest import Rig, small_calibration


def text_of(calibration: Calibration) -> str:
    return json.dumps(calibration_document(calibration), indent=1)


def named(name: str, **changes: object) -> Calibration:
    return replace(small_calibration(), id=name, **changes)


def test_a_file_is_kept_to_the_letter_listed_and_put_to_use(
    rig: Rig, client: TestClient, tmp_path: Path
) -> None:
    assert client.get("/api/calibrations").json() == []
    rig.fix_calibration(None)
    rig.measure()
    bench = named("bench-1", created_utc="2026-11-12T08:00:00Z", n=15)
    text = text_of(bench)
    answer = client.post("/api/calibrations", content=text)
    assert answer.status_code == 201
    kept = answer.json()
    path = tmp_path / "calibrations" / "bench-1.json"
    assert kept["path"] == str(path)
    assert path.read_text("utf-8") == text
    assert (kept["id"], kept["n"], kept["active"]) == ("bench-1", 15, False)
    assert kept["focal_length_mm"] == pytest.approx(300.0)
    assert client.get("/api/calibrations").json() == [kept]

    assert client.put("/api/settings", json={"calibration": kept["path"]}).status_code == 200
    rig.measure()
    assert client.get("/api/calibrations").json() == [kept | {"active": True}]
    assert client.put("/api/settings", json={"calibration": None}).status_code == 200
    rig.measure()
    assert client.get("/api/calibrations").json() == [kept]


def test_the_youngest_comes_first_and_what_is_no_calibration_is_left_out(
    client: TestClient, tmp_path: Path
) -> None:
    for name, year in (("a", 2024), ("c", 2026), ("b", 2025)):
        calibration = named(name, created_utc=f"{year}-01-01T00:00:00Z")
        client.post("/api/calibrations", content=text_of(calibration))
    (tmp_path / "calibrations" / "notes.json").write_text("[]", "utf-8")
    assert [kept["id"] for kept in client.get("/api/calibrations").json()] == ["c", "b", "a"]


def test_the_same_twice_changes_nothing_another_of_the_same_id_is_refused(
    client: TestClient, tmp_path: Path
) -> None:
    first = named("bench")
    client.post("/api/calibrations", content=text_of(first))
    assert client.post("/api/calibrations", content=text_of(first)).status_code == 201
    refused = client.post("/api/calibrations", content=text_of(replace(first, k1=1e-3)))
    assert refused.status_code == 422
    assert "bench" in refused.json()["detail"]
    assert load_calibration(tmp_path / "calibrations" / "bench.json") == first


@pytest.mark.parametrize(
    ("text", "word"),
    [
        ("", "no JSON"),
        ("{", "no JSON"),
        (b"\xff\xfe", "no JSON"),
        ("[]", "schema"),
        ('{"schema": "other/1"}', "other/1"),
        ('{"schema": "readout.calibration/1"}', "id"),
        (text_of(named("../../over")), "name a file"),
        (text_of(named("a/b")), "name a file"),
        (text_of(named(".hidden")), "name a file"),
    ],
)
def test_what_cannot_be_kept_is_refused_in_one_line(
    client: TestClient, tmp_path: Path, text: str | bytes, word: str
) -> None:
    answer = client.post("/api/calibrations", content=text)
    assert answer.status_code == 422
    assert answer.headers["content-type"] == "application/problem+json"
    detail = answer.json()["detail"]
    assert word in detail
    assert "\n" not in detail
    assert not (tmp_path / "calibrations").exists()
    assert not (tmp_path.parent / "over.json").exists()


def test_a_file_larger_than_any_calibration_is_refused(client: TestClient) -> None:
    assert client.post("/api/calibrations", content=b" " * 5_000_001).status_code == 413


def test_one_for_other_pictures_is_kept_but_not_put_to_use(rig: Rig, client: TestClient) -> None:
    rig.fix_calibration(None)
    rig.measure()
    kept = client.post("/api/calibrations", content=text_of(named("wide", image_width_px=1280)))
    refused = client.put("/api/settings", json={"calibration": kept.json()["path"]})
    assert refused.status_code == 422
    assert "1280" in refused.json()["detail"]
    assert client.get("/api/settings").json()["calibration"] is None


@pytest.mark.parametrize("name", ["con", "NUL", "Com1", "lpt9.bench", "aux.a.b"])
def test_an_id_that_names_a_device_somewhere_is_refused(
    client: TestClient, tmp_path: Path, name: str
) -> None:
    answer = client.post("/api/calibrations", content=text_of(named(name)))
    assert answer.status_code == 422
    assert "device" in answer.json()["detail"]
    assert not list((tmp_path / "calibrations").glob("*"))


def test_two_ids_that_are_one_file_somewhere_are_refused(
    client: TestClient, tmp_path: Path
) -> None:
    assert client.post("/api/calibrations", content=text_of(named("console"))).status_code == 201
    answer = client.post("/api/calibrations", content=text_of(named("Console")))
    assert answer.status_code == 422
    assert "an id of its own" in answer.json()["detail"]
    assert client.post("/api/calibrations", content=text_of(named("console"))).status_code == 201
    assert [path.name for path in (tmp_path / "calibrations").iterdir()] == ["console.json"]


def test_a_file_nested_without_end_is_refused_and_harms_no_list(
    rig: Rig, client: TestClient, tmp_path: Path
) -> None:
    nested = "[" * 100_000
    answer = client.post("/api/calibrations", content=nested)
    assert answer.status_code == 422
    assert "nested" in answer.json()["detail"]
    (tmp_path / "calibrations").mkdir(exist_ok=True)
    (tmp_path / "calibrations" / "odd.json").write_text(nested)
    assert client.get("/api/calibrations").json() == []
