"""The fixed frame over HTTP: taken, told of by the status, forgotten, refused with a line."""

from __future__ import annotations

import threading
from collections.abc import Callable
from pathlib import Path

import pytest
from starlette.testclient import TestClient

from readout.instrument.observer import DirectObserver
from readout.model import Target
from readout.sighting import locate
from tests.instrument.test_fixed_frame import WITHIN_S, Bench
from tests.service.conftest import Rig


@pytest.fixture
def bench(rig: Rig) -> Bench:
    """The rig measures, in the acquisition's thread, a bench with a mirror to cover."""
    bench = Bench()

    def observe(source: str, target: Target) -> DirectObserver:
        kept = rig.control.kept_for(source)
        return DirectObserver(bench, target=target, locate=locate, preparing=kept)

    rig.fix_calibration(None)
    rig.instrument._observe = observe
    return bench


def test_taken_kept_beside_the_settings_and_forgotten(
    rig: Rig, bench: Bench, client: TestClient
) -> None:
    bench.covered = True
    acquisition = rig.instrument.use("bench")
    acquisition.start()
    try:
        wait_until(rig, lambda: True)
        answer = client.post("/api/fixed-frame", json={"frames": 6})
        assert answer.status_code == 201
        taken = answer.json()
        assert (taken["frames"], taken["image_width_px"], taken["image_height_px"]) == (6, 128, 96)
        assert taken["target_seen"] is True  # the crosshair of the instrument's own
        (kept,) = (rig.store.path.parent / "fixed-frames").iterdir()
        assert kept.suffix == ".npz"

        def prepared() -> str | None:
            return client.get("/api/status").json()["prepared_utc"]

        wait_until(rig, lambda: prepared() == taken["taken_utc"])
        assert client.get("/api/sighting").json()["quality"] == ["no_image"]
        assert client.delete("/api/fixed-frame").status_code == 204
        wait_until(rig, lambda: prepared() is None)
        assert not kept.exists()
        again = client.delete("/api/fixed-frame")
        assert again.status_code == 409
        assert again.headers["content-type"] == "application/problem+json"
        assert "no fixed frame" in again.json()["detail"]
        bench.drift_px = 0.2
        moved = client.post("/api/fixed-frame", json={"frames": 16})
        assert moved.status_code == 409
        assert "cover the mirror" in moved.json()["detail"]
    finally:
        bench.ended.set()
        acquisition.stop()


def wait_until(rig: Rig, true: Callable[[], bool]) -> None:
    """Look again with each reading."""
    come = threading.Event()
    rig.instrument.on_reading.append(lambda _: come.set())
    for _ in range(400):
        assert come.wait(WITHIN_S)
        come.clear()
        if true():
            return
    raise AssertionError("it did not come about within 400 readings")


@pytest.mark.parametrize("body", [{"frames": 1}, {"frames": 9999}, {"frames": "8"}, {"n": 8}])
def test_nonsense_is_refused(client: TestClient, body: dict[str, object]) -> None:
    answer = client.post("/api/fixed-frame", json=body)
    assert answer.status_code == 422
    assert answer.json()["detail"]


def test_not_before_there_is_a_picture(client: TestClient, tmp_path: Path) -> None:
    for answer in (client.post("/api/fixed-frame"), client.delete("/api/fixed-frame")):
        assert answer.status_code == 409
        assert "wait for the first" in answer.json()["detail"]
    assert not (tmp_path / "fixed-frames").exists()
