"""The Watch view, from the service's readings to what a person sees."""

from __future__ import annotations

import re
import subprocess
import sys
from collections.abc import Callable
from pathlib import Path
from typing import TYPE_CHECKING, Any

import pytest

if TYPE_CHECKING:
    from playwright.sync_api import Locator, Page

pytestmark = pytest.mark.browser

SIGNED = re.compile(r"^X [+−][\d\u2009]+(\.\d+)? seconds of arc$")


def expect(what: Any) -> Any:
    from playwright.sync_api import expect as playwright_expect

    playwright_expect.set_options(timeout=15_000)
    return playwright_expect(what)


def number(page: Page, axis: str) -> Locator:
    return page.locator(f"section[data-axis={axis}] [role=img]")


def notices(page: Page) -> Locator:
    return page.get_by_role("status", name="State of the source")


def test_numbers_move_and_the_unit_stays(serve: Any, look: Callable[..., Any]) -> None:
    with serve() as service:
        service.wait("/api/health", 200)
        watched = look()
        page: Page = watched.page
        page.goto(service.address)

        expect(notices(page)).to_contain_text("SIMULATED")
        x = number(page, "x")
        expect(x).to_have_attribute("aria-label", SIGNED)
        first = x.get_attribute("aria-label") or ""
        expect(x).not_to_have_attribute("aria-label", first)

        strip = page.locator(".uplot canvas")
        box = strip.bounding_box()
        assert box is not None
        assert box["width"] > 600
        assert box["height"] > 100
        expect(page.get_by_role("img", name="The camera's picture with")).to_be_visible()

        page.get_by_label("unit").select_option("urad")
        expect(x).to_have_attribute("aria-label", re.compile("microradians$"))
        page.reload()
        expect(x).to_have_attribute("aria-label", re.compile("microradians$"))
        expect(page.get_by_label("unit")).to_have_value("urad")

        assert page.evaluate("document.documentElement.scrollHeight") <= 900
        assert watched.errors == []
        assert watched.outside == []


def test_zero_is_set_and_taken_back(serve: Any, look: Callable[..., Any]) -> None:
    with serve() as service:
        service.wait("/api/health", 200)
        watched = look()
        page: Page = watched.page
        page.goto(service.address)
        expect(page.get_by_text("no zero set")).to_be_visible()
        page.get_by_role("button", name="Set zero here").click()
        # A zero is refused while the mirror moves: then the service's own line stands there.
        refused = page.get_by_role("alert").filter(has_text=re.compile(r"\w"))
        expect(page.get_by_role("button", name="Take zero back").or_(refused)).to_be_visible()
        page.get_by_role("button", name="Hold").click()
        expect(page.get_by_text("HELD at")).to_have_count(2)
        held = number(page, "x").get_attribute("aria-label")
        page.wait_for_timeout(500)
        assert number(page, "x").get_attribute("aria-label") == held
        page.get_by_role("button", name="Follow").click()
        expect(number(page, "x")).not_to_have_attribute("aria-label", held or "")


def test_phone_is_as_wide_as_its_screen(serve: Any, look: Callable[..., Any]) -> None:
    with serve() as service:
        service.wait("/api/health", 200)
        watched = look(390, 844)
        page: Page = watched.page
        page.goto(service.address)
        expect(number(page, "y")).to_have_attribute("aria-label", re.compile("seconds of arc$"))
        assert page.evaluate("document.documentElement.scrollWidth") <= 390
        zero = page.get_by_role("button", name="Set zero here").bounding_box()
        assert zero is not None
        assert 844 / 2 < zero["y"] < 844 - zero["height"]  # in the half thumbs reach
        assert zero["height"] >= 44
        for axis in "xy":
            box = number(page, axis).bounding_box()
            assert box is not None
            assert box["y"] + box["height"] < 844 / 2  # the numbers come first
        assert watched.errors == []
        assert watched.outside == []


def test_what_has_ended_does_not_look_alive(
    serve: Any, look: Callable[..., Any], tmp_path: Path
) -> None:
    folder = tmp_path / "frames"
    simulate = [sys.executable, "-m", "readout", "simulate", str(folder)]
    subprocess.run([*simulate, "--frames", "20", "--seed", "4"], check=True, timeout=50)
    calibration = str(folder / "calibration.json")
    with serve("--source", str(folder), "--calibration", calibration) as service:
        watched = look()
        page: Page = watched.page
        page.goto(service.address)
        expect(notices(page)).to_contain_text("ENDED")
        expect(number(page, "x")).to_have_attribute("aria-label", re.compile("no longer measured$"))
        assert "SIMULATED" not in notices(page).inner_text()
        assert watched.errors == []


def test_without_a_calibration_there_are_pixels_and_a_way_to_angles(
    serve: Any, look: Callable[..., Any], tmp_path: Path
) -> None:
    folder = tmp_path / "frames"
    simulate = [sys.executable, "-m", "readout", "simulate", str(folder)]
    subprocess.run([*simulate, "--frames", "5", "--seed", "4"], check=True, timeout=50)
    with serve("--source", str(folder)) as service:
        watched = look()
        page: Page = watched.page
        page.goto(service.address)
        expect(number(page, "x")).to_have_attribute("aria-label", re.compile("pixels"))
        page.get_by_role("button", name="Give a scale").click()
        page.get_by_label("Focal length of the objective, mm").fill("300")
        page.get_by_label("Pixel pitch of the camera, µm").fill("3.45")
        page.get_by_role("button", name="Keep this scale").click()
        expect(page.get_by_text("Kept.")).to_be_visible()
        kept = page.request.get(service.address + "api/settings").json()["optics"]
        assert kept == {"focal_length_mm": 300, "pitch_um": 3.45, "mounting": "straight"}
        # The folder has been read to its end: the last picture is read anew.
        last = re.compile(r"seconds of arc, .*no longer measured$")
        expect(number(page, "x")).to_have_attribute("aria-label", last)
        assert watched.errors == []


def test_a_page_cut_off_strikes_the_last_value(serve: Any, look: Callable[..., Any]) -> None:
    with serve() as service:
        service.wait("/api/health", 200)
        page: Page = look().page
        page.goto(service.address)
        x = number(page, "x")
        expect(x).to_have_attribute("aria-label", SIGNED)
        service.stop()
        expect(notices(page)).to_contain_text("PAGE CUT OFF")
        expect(x).to_have_attribute("aria-label", re.compile("no longer measured$"))
        expect(page.get_by_text(re.compile(r"last read [\d.]+ s ago")).first).to_be_visible()
        expect(page.get_by_role("button", name="Set zero here")).to_be_disabled()
