"""The nudge test and the foil test, asked as the page asks."""

from __future__ import annotations

from collections.abc import Callable
from typing import Any

import pytest
from starlette.testclient import TestClient

from readout.angle import Calibration, Mounting, nominal_calibration
from readout.model import Quality, Sighting
from tests.instrument.fakes import HEIGHT_PX, WIDTH_PX, sighting
from tests.service.conftest import Rig

REST = 14


def calibration(mounting: Mounting = Mounting.STRAIGHT) -> Calibration:
    return nominal_calibration(
        focal_length_mm=300.0,
        pitch_um=3.45,
        image_width_px=WIDTH_PX,
        image_height_px=HEIGHT_PX,
        mounting=mounting,
    )


def seen_at(truth: Calibration, x_arcsec: float, y_arcsec: float) -> Sighting:
    x, y = (float(v) for v in truth.position(x_arcsec, y_arcsec))
    return sighting(x, y)


def push(truth: Calibration, x_arcsec: float, y_arcsec: float) -> list[Sighting]:
    """At rest, pressed for half a second, at rest again."""
    rest = [seen_at(truth, 2.0, -1.0)] * REST
    pressed = [seen_at(truth, 2.0 + x_arcsec, -1.0 + y_arcsec)] * 5
    return [*rest, *pressed, *rest]


class Asked:
    """Answers of the service to what is asked in the middle of a script."""

    def __init__(self, client: TestClient) -> None:
        self.client = client
        self.answers: list[Any] = []

    def post(self, path: str, body: dict[str, Any] | None = None) -> Callable[[], None]:
        return lambda: self.answers.append(self.client.post(f"/api/signs/{path}", json=body or {}))

    @property
    def last(self) -> dict[str, Any]:
        return dict(self.answers[-1].json())


def nudged(rig: Rig, client: TestClient, truth: Calibration) -> Asked:
    """Both edges pressed, of a mirror in an instrument that is truly so."""
    asked = Asked(client)
    for edge, tilt in (("top", (1.0, 15.0)), ("right", (12.0, -1.0))):
        acts = {
            REST - 1: asked.post("rest"),
            REST + 10: asked.post("pressed", {"edge": edge}),
        }
        rig.play(push(truth, *tilt), acts)
    return asked


def from_parts(rig: Rig) -> None:
    """The scale comes from the parts, as the settings name them."""
    rig.fix_calibration(None)
    rig.control.change({"optics": {"focal_length_mm": 300.0, "pitch_um": 3.45}})


def test_both_edges_prove_the_signs_and_the_proof_is_kept(rig: Rig, client: TestClient) -> None:
    from_parts(rig)
    asked = nudged(rig, client, calibration())
    assert [answer.status_code for answer in asked.answers] == [200] * 4
    assert asked.last["outcome"] == "proven"
    assert asked.last["top"]["y_arcsec"] == pytest.approx(15.0, abs=1e-3)
    assert asked.last["right"]["x_arcsec"] == pytest.approx(12.0, abs=1e-3)
    answer = client.post("/api/signs/keep", json={"name": "bench"})
    assert answer.status_code == 201, answer.text
    finished = answer.json()
    assert finished["used"] is True
    assert (finished["kept"]["signs"], finished["kept"]["method"]) == ("proven", "nominal")
    rig.measure()
    status = client.get("/api/status").json()["calibration"]
    assert (status["id"], status["signs"]) == (finished["kept"]["id"], "proven")
    again = client.post("/api/signs/keep", json={"name": "bench"})
    assert again.status_code == 409


@pytest.mark.parametrize(
    ("mounting", "outcome"),
    [
        (Mounting.SWAPPED_SIDES, "mirrored"),
        (Mounting.UPSIDE_DOWN, "mirrored"),
        (Mounting.HALF_TURN, "mirrored"),
    ],
)
def test_a_mirrored_picture_is_named_and_what_is_kept_reads_right(
    rig: Rig, client: TestClient, mounting: Mounting, outcome: str
) -> None:
    from_parts(rig)
    truth = calibration(mounting)
    asked = nudged(rig, client, truth)
    assert asked.last["outcome"] == outcome
    assert "mirror image" in asked.last["text"]
    assert client.get("/api/status").json()["calibration"]["signs"] == "unproven"
    assert client.post("/api/signs/keep", json={}).status_code == 201
    rig.measure([seen_at(truth, 7.0, -4.0)])
    shown = client.get("/api/reading").json()
    assert (shown["x_arcsec"], shown["y_arcsec"]) == pytest.approx((7.0, -4.0), abs=1e-3)


def test_a_push_needs_a_rest_a_mirror_at_rest_and_something_to_be_seen(
    rig: Rig, client: TestClient
) -> None:
    from_parts(rig)
    asked = Asked(client)
    still = [seen_at(calibration(), 2.0, -1.0)] * 30
    swinging = [seen_at(calibration(), 3.0 * k, 0.0) for k in range(12)]
    rig.play(swinging, {11: asked.post("rest")})
    rig.play(still, {5: asked.post("pressed", {"edge": "top"}), 14: asked.post("rest")})
    rig.play(
        still,
        {14: asked.post("rest"), 20: asked.post("pressed", {"edge": "top"})},
    )
    assert [answer.status_code for answer in asked.answers] == [409, 409, 200, 200, 422]
    assert "moving" in asked.answers[0].json()["detail"]
    assert "rest" in asked.answers[1].json()["detail"]
    assert "harder" in asked.answers[4].json()["detail"]
    assert client.get("/api/signs").json()["top"] is None


def test_one_bad_picture_is_no_push(rig: Rig, client: TestClient) -> None:
    from_parts(rig)
    asked = Asked(client)
    script = [seen_at(calibration(), 2.0, -1.0)] * 30
    script[18] = seen_at(calibration(), 2.0, 19.0)
    script[22] = sighting(60.0, 40.0, Quality.SATURATED)
    rig.play(script, {14: asked.post("rest"), 28: asked.post("pressed", {"edge": "top"})})
    assert asked.answers[-1].status_code == 422


def test_the_foil_shows_sign_and_scale(rig: Rig, client: TestClient) -> None:
    from_parts(rig)
    truth = calibration()
    asked = Asked(client)
    foil = {"thickness_mm": 0.01, "base_mm": 100.0, "thickness_sd_mm": 0.0002}
    script = [*[seen_at(truth, 0.0, -10.0)] * REST, *[seen_at(truth, 0.0, 10.63)] * REST]
    rig.play(script, {REST - 1: asked.post("rest"), 2 * REST - 1: asked.post("foil", foil)})
    shown = asked.last["foil"]
    # By hand: 0.01/100 rad = 20.626 arcsec.
    assert shown["expected_arcsec"] == pytest.approx(20.626, abs=1e-3)
    assert shown["scale"] == "agrees"
    assert shown["ratio"] == pytest.approx(1.0, abs=1e-3)
    # The foil's own 2 % and the one per cent of a nominal focal length.
    assert shown["ratio_u"] == pytest.approx((0.02**2 + 0.01**2) ** 0.5, rel=0.02)
    assert shown["change"]["y_arcsec"] == pytest.approx(20.63, abs=1e-2)
    assert asked.last["outcome"] == "unproven"
    assert "right edge" in asked.last["text"]


def test_without_a_scale_there_is_nothing_to_prove(rig: Rig, client: TestClient) -> None:
    rig.fix_calibration(None)
    rig.measure()
    answer = client.post("/api/signs/rest")
    assert answer.status_code == 409
    assert "scale" in answer.json()["detail"]
    assert client.get("/api/signs").json()["calibration_id"] is None


def test_what_was_seen_with_another_scale_counts_no_more(rig: Rig, client: TestClient) -> None:
    from_parts(rig)
    nudged(rig, client, calibration())
    rig.control.change({"optics": {"focal_length_mm": 310.0}})
    rig.measure()
    now = client.get("/api/signs").json()
    assert (now["top"], now["right"], now["outcome"]) == (None, None, "unproven")
