"""What the page makes of a source that is gone, blind or long of name, and what a hold keeps."""

from __future__ import annotations

import re
import subprocess
import sys
import threading
import time
from collections.abc import Callable
from pathlib import Path
from typing import TYPE_CHECKING, Any
from urllib.parse import urlsplit

import cv2
import numpy as np
import pytest

from tests.browser.test_watch import expect, notices, number
from tests.capture.streams import Client, part, serving

if TYPE_CHECKING:
    from playwright.sync_api import Page

pytestmark = pytest.mark.browser

LONG = "a_folder_with_quite_a_long_name_as_people_give_them_on_their_discs_without_a_space"


def blank() -> bytes:
    """A dark picture without anything in it."""
    return cv2.imencode(".jpg", np.full((480, 640), 6, np.uint8))[1].tobytes()


FITS = """width => {
  const {scrollWidth, clientWidth} = document.documentElement;
  const beyond = [...document.querySelectorAll('body *')].filter(
    part => !part.closest('svg') && part.getBoundingClientRect().right > clientWidth + 0.5);
  const lists = [...document.querySelectorAll('ol')];
  return clientWidth === width && scrollWidth === clientWidth && beyond.length === 0
    && lists.every(list => list.scrollWidth === list.clientWidth);
}"""


def fits(page: Page, *widths: int) -> None:
    """Nothing reaches beyond the screen at these widths, nor beyond the list of events.

    Drawings follow a new width one screen frame later: this is waited for, and fails if it
    does not come to be.
    """
    for width in widths:
        page.set_viewport_size({"width": width, "height": 844})
        page.wait_for_function(FITS, arg=width)


def zeroed(page: Page, address: str) -> None:
    """A zero is refused while the simulated mirror shakes: asked for until it is taken."""
    until = time.monotonic() + 30.0
    while not (answer := page.request.post(f"{address}api/zero")).ok:
        assert time.monotonic() < until, answer.text()
        page.wait_for_timeout(250)


def test_a_long_name_that_has_ended_fits(
    serve: Any, look: Callable[..., Any], tmp_path: Path
) -> None:
    folder = tmp_path / LONG
    simulate = [sys.executable, "-m", "readout", "simulate", str(folder)]
    subprocess.run([*simulate, "--frames", "20", "--seed", "4"], check=True, timeout=50)
    with serve("--source", str(folder)) as service:
        watched = look()
        page: Page = watched.page
        page.goto(service.address)
        expect(notices(page)).to_contain_text("ENDED")
        # What came before the page was opened is there, and how long ago it was.
        expect(page.get_by_role("img", name="The camera's picture with")).to_be_visible()
        expect(page.get_by_text(re.compile(r"last read [\d.]+ (s|min) ago")).first).to_be_visible()
        fits(page, 1440, 390, 360)
        page.goto(f"{service.address}#runs")
        expect(page.get_by_role("link", name="Runs")).to_have_attribute("aria-current", "page")
        fits(page, 390, 360)
        assert watched.errors == []


def test_no_image_and_a_lost_stream_fit(serve: Any, look: Callable[..., Any]) -> None:
    gone = threading.Event()

    def camera(client: Client) -> None:
        if gone.is_set():
            client.handler.send_error(503)
            return
        client.begin()
        while not gone.wait(0.05):
            client.send(part(blank()))

    with serving(camera) as address, serve("--source", address + "/" + LONG) as service:
        watched = look()
        page: Page = watched.page
        page.goto(service.address)
        expect(page.get_by_text("no image").first).to_be_visible()
        # Nothing to show: the field is drawn whole, instead of a window around nowhere.
        field = page.get_by_role("figure", name="The field")
        expect(field).to_contain_text("all of 640 px × 480 px")
        fits(page, 1440, 390, 360)
        gone.set()
        expect(notices(page)).to_contain_text("SOURCE LOST")
        fits(page, 1440, 390, 360)
        page.reload()
        expect(notices(page)).to_contain_text("SOURCE LOST")
        expect(page.get_by_role("figure", name="The camera's picture")).to_contain_text("lost")
        fits(page, 1440, 390, 360)


def test_what_is_held_stays_and_says_what_has_changed(serve: Any, look: Callable[..., Any]) -> None:
    with serve() as service:
        service.wait("/api/health", 200)
        address = service.address
        watched = look()
        page: Page = watched.page
        page.goto(address)
        x = number(page, "x")
        expect(x).to_have_attribute("aria-label", re.compile("seconds of arc$"))
        zeroed(page, address)
        expect(page.get_by_role("button", name="Take zero back")).to_be_visible()
        page.get_by_role("button", name="Hold").click()
        expect(page.get_by_text("HELD at")).to_have_count(2)
        section = page.locator("section[data-axis=x]")
        held = [x.get_attribute("aria-label"), section.inner_text()]
        assert "than at zero" in held[1]

        assert page.request.delete(f"{address}api/zero").ok
        expect(page.get_by_text("Held against a zero that no longer exists.")).to_be_visible()
        assert page.request.put(f"{address}api/settings", data={"unit": "urad"}).ok
        expect(page.locator("footer")).to_contain_text("last 30 s in arcsec")
        expect(page.get_by_label("unit")).to_be_disabled()
        page.wait_for_timeout(500)
        assert [x.get_attribute("aria-label"), section.inner_text()] == held
        fits(page, 390, 360)
        page.set_viewport_size({"width": 1440, "height": 900})
        assert watched.errors == []

    with serve("--port", str(urlsplit(address).port)) as service:
        service.wait("/api/health", 200)
        expect(page.get_by_text("before the service was started again")).to_be_visible()
        assert [x.get_attribute("aria-label"), section.inner_text()] == held
        page.get_by_role("button", name="Follow").click()
        expect(x).to_have_attribute("aria-label", re.compile("microradians$"))
        expect(page.get_by_text("before the service was started again")).to_have_count(0)


def test_the_rule_begins_anew_at_a_zero(serve: Any, look: Callable[..., Any]) -> None:
    with serve() as service:
        service.wait("/api/health", 200)
        page: Page = look().page
        page.goto(service.address)
        ends = page.locator("section[data-axis=x] .rule text")
        expect(ends.last).to_have_text("+50")
        zeroed(page, service.address)
        expect(page.get_by_role("button", name="Take zero back")).to_be_visible()
        # Sooner than a rule closes by itself, which takes 4 s.
        from playwright.sync_api import expect as at_once

        at_once(ends.last).to_have_text(re.compile(r"^\+[125](\.0)?$"), timeout=2000)


def test_settings_changed_elsewhere_reach_an_open_page(
    serve: Any, look: Callable[..., Any]
) -> None:
    with serve() as service:
        service.wait("/api/health", 200)
        settings = f"{service.address}api/settings"
        page: Page = look().page
        page.goto(service.address)
        expect(number(page, "x")).to_have_attribute("aria-label", re.compile("seconds of arc$"))
        assert page.request.put(settings, data={"unit": "urad"}).ok
        expect(number(page, "x")).to_have_attribute("aria-label", re.compile("microradians$"))
        expect(page.get_by_label("unit")).to_have_value("urad")

        page.get_by_role("button", name="Settings").click()
        focal = page.get_by_label("Focal length of the objective, mm")
        focal.fill("123.4")
        assert page.request.put(settings, data={"average_s": 5}).ok
        expect(page.get_by_label("Average over")).to_have_value("5")
        expect(focal).to_have_value("123.4")  # what is being typed stays
