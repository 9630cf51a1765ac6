"""What the service says of the readings: shapes of the contract, null for what is missing."""

from __future__ import annotations

import json
import math
from dataclasses import replace
from typing import Any

import cv2
import numpy as np
import pytest
from httpx2 import Response
from hypothesis import given
from hypothesis import strategies as st
from starlette.testclient import TestClient

from readout.errors import SourceLost
from readout.instrument import Reference, State, Statistic, Zero
from readout.model import Arm, Quality, Reading, Sighting, no_sighting
from readout.service.feed import Feed
from readout.service.messages import (
    encode,
    reading_message,
    readings_message,
    recent_message,
    sighting_message,
)
from tests.instrument.fakes import FakeClock, observation
from tests.service.conftest import STREAM, Rig, small_calibration

FORBIDDEN = ("NaN", "Infinity")


def strict(text: str) -> object:
    """JSON without the constants that no other language reads."""

    def refuse(constant: str) -> object:
        raise AssertionError(f"{constant} on the wire")

    return json.loads(text, parse_constant=refuse)


number = st.floats(allow_nan=True, allow_infinity=True)


def scale_cov(rel_sd: float) -> tuple[tuple[float, ...], ...]:
    """Covariance of the parameters where only the scale is uncertain."""
    gradient = np.array([*np.ravel(small_calibration().matrix), 0.0, 0.0, 0.0]) * rel_sd
    return tuple(tuple(row) for row in np.outer(gradient, gradient).tolist())


def some_zero() -> Zero:
    return Zero(1.0, 2.0, 0.1, 0.1, 30, 1.0, Statistic.MEAN, 0)


@given(values=st.lists(number, min_size=11, max_size=11), flags=st.integers(0, 2**13 - 1))
def test_no_number_that_is_none_ever_reaches_the_wire(values: list[float], flags: int) -> None:
    reading = Reading(7, values[0], 10**18, *values[1:], quality=Quality(flags))
    feed = Feed(capacity=4)
    feed.append(reading)
    clock = FakeClock()
    arm = Arm(*values[:4])
    seen = Sighting(values[0], values[1], (1.0, 0.0, 1.0), Quality(flags), arm, None, values[2])
    messages = [
        encode(reading_message(reading, None, None, state=State.MEASURING, age_s=values[0])),
        encode(readings_message([reading], dropped=0, average=None)),
        encode(recent_message(feed.rows(), None, Reference(some_zero(), small_calibration(), 0))),
        encode(recent_message(feed.rows(), None)),
        encode(sighting_message(observation(0, clock, seen=seen))),
    ]
    for message in messages:
        strict(message)
    sent = json.loads(messages[0])
    assert (sent["x_arcsec"] is None) == (not math.isfinite(values[1]))
    assert sent["quality"] == Quality(flags).words()


def test_status_says_what_is_going_on(rig: Rig, client: TestClient) -> None:
    status = client.get("/api/status").json()
    assert (status["source"], status["state"], status["calibration"]) == (None, "opening", None)
    assert status["session_start_utc"] == "2023-11-14T22:13:20.000Z"  # 1.7e9 s after 1970
    rig.measure([None, no_sighting(Quality.NO_IMAGE)])
    status = client.get("/api/status").json()
    assert (status["source"], status["simulated"]) == ("simulated", True)
    assert (status["state"], status["frames"], status["frames_unusable"]) == ("ended", 2, 1)
    assert (status["image_width_px"], status["image_height_px"]) == (64, 48)
    assert status["calibration"]["signs"] == "unproven"
    assert (status["zero"], status["run"]) == (None, None)


def test_the_field_is_what_the_corners_of_the_picture_mean(rig: Rig, client: TestClient) -> None:
    rig.measure()
    field = client.get("/api/status").json()["calibration"]["field_arcsec"]
    # 32 px to a side and 24 px up, each 206264.806 * pitch / (2 f) arcsec (small angles)
    scale = 206264.806 * 3.45e-3 / (2 * 300.0)
    expected = [(-32, 24), (32, 24), (32, -24), (-32, -24)]
    assert np.array(field) == pytest.approx(np.array(expected) * scale, rel=1e-5)


def test_reading_and_zero(rig: Rig, client: TestClient) -> None:
    assert client.get("/api/reading").status_code == 404
    answers: list[Response] = []
    rig.at_reading(9, lambda: answers.append(client.post("/api/zero")))
    rig.measure()
    (set_to,) = answers
    reading = client.get("/api/reading").json()
    assert reading["seq"] == 9
    assert reading["t_s"] == pytest.approx(1.0)
    assert reading["t_utc"] == "2023-11-14T22:13:21.000Z" or reading["t_utc"].endswith("Z")
    assert reading["x_rel_arcsec"] == pytest.approx(0.0, abs=1e-6)
    assert reading["average"]["n"] == 10
    assert set_to.status_code == 200
    assert set_to.json()["x_arcsec"] == pytest.approx(reading["x_arcsec"])
    assert client.get("/api/status").json()["zero"]["n"] == 10
    assert client.delete("/api/zero").status_code == 204
    assert client.get("/api/reading").json()["x_rel_arcsec"] is None


def test_the_uncertainty_of_a_relative_reading_is_that_of_the_difference(
    rig: Rig, client: TestClient
) -> None:
    """A scale known to 1 %: of 9.5" and 0.12" beside it, 0.0012", not 0.095"."""
    rig.fix_calibration(replace(small_calibration(), param_cov=scale_cov(0.01)))
    still, beside = (40.0, 24.0), (40.1, 24.0)
    seen = [Sighting(*place, (1e-8, 0.0, 1e-8), Quality.OK) for place in [still] * 10 + [beside]]
    rig.at_reading(9, lambda: client.post("/api/zero"))
    rig.measure(seen)
    reading = client.get("/api/reading").json()
    scale = 206264.806 * 3.45e-3 / (2 * 300.0)
    assert reading["x_rel_arcsec"] == pytest.approx(0.1 * scale, rel=1e-3)
    assert reading["x_u_arcsec"] == pytest.approx(0.01 * 8.6 * scale, rel=0.01)
    assert reading["x_rel_u_arcsec"] == pytest.approx(0.01 * 0.1 * scale, rel=0.01)
    recent = client.get("/api/recent").json()
    assert recent["x_rel_u_arcsec"][10] == reading["x_rel_u_arcsec"]
    assert recent["y_rel_u_arcsec"][0] < reading["y_u_arcsec"]
    with client.websocket_connect(STREAM) as session:
        session.receive_json()
        rig.feed.append(rig.instrument.newest[1])
        while (message := session.receive_json())["kind"] != "readings":
            pass
    assert message["x_rel_u_arcsec"] == [reading["x_rel_u_arcsec"]]
    client.delete("/api/zero")
    assert client.get("/api/reading").json()["x_rel_u_arcsec"] is None


def test_rows_of_another_source_have_no_uncertainty_against_the_zero(
    rig: Rig, client: TestClient
) -> None:
    rig.measure([None] * 4)
    rig.at_reading(12, lambda: client.post("/api/zero"))
    rig.measure([None] * 10)
    recent = client.get("/api/recent").json()
    assert [u is None for u in recent["x_rel_u_arcsec"]] == [True] * 4 + [False] * 10


def test_zero_is_refused_of_a_source_that_has_ended(rig: Rig, client: TestClient) -> None:
    rig.measure()
    rig.clock.advance(3600.0)
    refused = client.post("/api/zero")
    assert refused.status_code == 409
    assert "ended" in refused.json()["detail"]


def test_readings_of_another_source_are_not_shown(rig: Rig, client: TestClient) -> None:
    rig.measure()
    assert client.get("/api/reading").json()["state"] == "ended"
    assert client.get("/api/sighting").status_code == 200
    rig.measure([SourceLost("camera 77 is not connected")])
    for path in ("/api/reading", "/api/sighting"):
        answer = client.get(path)
        assert answer.status_code == 404
        assert "camera 77 is not connected" in answer.json()["detail"]


def test_a_lost_source_has_no_reading_until_it_is_back(rig: Rig, client: TestClient) -> None:
    seen: dict[State, int] = {}

    def look(state: State, _: str) -> None:
        seen[state] = client.get("/api/reading").status_code
        if state is State.LOST:
            rig.instrument.stop()

    rig.instrument.on_state.append(look)
    rig.measure([None, None, SourceLost("gone")])
    assert seen[State.MEASURING] == 200
    assert seen[State.LOST] == 404


def test_a_reading_says_how_old_it_is_and_a_stalled_source_has_no_average(
    rig: Rig, client: TestClient
) -> None:
    seen: dict[State, dict[str, Any]] = {}

    def look(state: State, _: str) -> None:
        if state is not State.OPENING:
            seen[state] = client.get("/api/reading").json()

    rig.instrument.on_state.append(look)
    rig.measure([*[None] * 5, 0.9])
    assert seen[State.MEASURING]["state"] == "measuring"
    assert seen[State.MEASURING]["age_s"] == pytest.approx(0.0)
    stalled = seen[State.STALLED]
    assert (stalled["seq"], stalled["state"], stalled["average"]) == (4, "stalled", None)
    assert 0.5 < stalled["age_s"] <= 0.9
    rig.clock.advance(3600.0)
    assert client.get("/api/reading").json()["age_s"] > 3600


def test_zero_is_refused_while_flagged(rig: Rig, client: TestClient) -> None:
    answers: list[Response] = []
    rig.at_reading(2, lambda: answers.append(client.post("/api/zero")))
    rig.measure([None, None, no_sighting(Quality.NO_IMAGE)])
    (refused,) = answers
    assert refused.status_code == 409
    assert refused.headers["content-type"] == "application/problem+json"
    assert "no image" in refused.json()["detail"]


def test_sighting(rig: Rig, client: TestClient) -> None:
    arm = Arm(angle_deg=0.5, width_px=4.0, contrast=100.0, background=10.0)
    seen = Sighting(30.5, 20.25, (1e-4, 0.0, 1e-4), Quality.AT_EDGE, arm, None, 110.0)
    assert client.get("/api/sighting").status_code == 404
    rig.measure([seen])
    assert client.get("/api/sighting").json() == {
        "seq": 0,
        "x_px": 30.5,
        "y_px": 20.25,
        "upright": {"angle_deg": 0.5, "width_px": 4.0, "contrast": 100.0, "background": 10.0},
        "level": None,
        "image_width_px": 64,
        "image_height_px": 48,
        "peak": 110.0,
        "quality": ["at_edge"],
    }


def test_recent_rows(rig: Rig, client: TestClient) -> None:
    rig.measure([None] * 5 + [no_sighting(Quality.DIM)])
    recent = client.get("/api/recent").json()
    assert recent["kind"] == "readings"
    assert recent["seq"] == [0, 1, 2, 3, 4, 5]
    assert recent["x_arcsec"][5] is None
    assert recent["quality"][4:] == [[], ["dim"]]
    lengths = {len(value) for value in recent.values() if isinstance(value, list)}
    assert lengths == {6}
    assert client.get("/api/recent?from_seq=4").json()["seq"] == [4, 5]
    assert client.get("/api/recent?points=1").status_code == 422


def test_the_picture(rig: Rig, client: TestClient) -> None:
    assert client.get("/api/frame.jpg").status_code == 503
    rig.measure()
    plain, drawn = client.get("/api/frame.jpg"), client.get("/api/frame.jpg?overlay=1")
    assert plain.headers["content-type"] == "image/jpeg"
    assert plain.headers["x-seq"] == "9"
    picture = cv2.imdecode(np.frombuffer(plain.content, np.uint8), cv2.IMREAD_GRAYSCALE)
    assert picture.shape == (48, 64)
    assert cv2.imdecode(np.frombuffer(drawn.content, np.uint8), cv2.IMREAD_COLOR).shape[2] == 3


@pytest.mark.parametrize(
    ("script", "state", "word"),
    [
        ([None], "ended", "end"),
        ([SourceLost("camera 7 is not connected")], "failed", "camera 7 is not connected"),
    ],
)
def test_health_gives_the_reason(
    rig: Rig, client: TestClient, script: list[None], state: str, word: str
) -> None:
    rig.measure(script)
    health = client.get("/api/health")
    assert health.status_code == 503
    assert word in health.json()["detail"]
    assert client.get("/api/status").json()["state"] == state


def test_health_is_good_while_readings_flow(rig: Rig, client: TestClient) -> None:
    answers = []
    rig.instrument.on_reading.append(lambda _: answers.append(client.get("/api/health")))
    rig.measure([None, None])
    assert answers[1].status_code == 200
    assert answers[1].json() == {"state": "measuring"}
