"""Prepare, walked through before a simulated mirror that is tilted on command."""

from __future__ import annotations

import re
import time
from collections.abc import Callable, Iterator
from typing import TYPE_CHECKING, Any

import cv2
import numpy as np
import pytest

from readout.simulation import Autocollimator, LiveRenderer
from tests.browser.test_watch import expect
from tests.capture.streams import Client, part, serving

if TYPE_CHECKING:
    from playwright.sync_api import Page

pytestmark = pytest.mark.browser

SEED = 29
FRAMES_PER_S = 12.0
JPEG = [cv2.IMWRITE_JPEG_QUALITY, 95]
TRUE = Autocollimator(rotation_deg=2.0)


class Mirror:
    """A source of pictures of a mirror at the ``tilt_arcsec`` it is given: a stream at ``url``."""

    def __init__(self) -> None:
        self.tilt_arcsec = (0.0, 0.0)
        self.url = ""
        self._rng = np.random.default_rng(SEED)
        self._renderer = LiveRenderer(TRUE, self._rng)

    def play(self, client: Client) -> None:
        client.begin()
        calibration = TRUE.calibration()
        while True:  # until the client leaves: writing then fails
            x_px, y_px = calibration.position(*self.tilt_arcsec)
            pixels = self._renderer.frame(float(x_px), float(y_px), self._rng)
            client.send(part(cv2.imencode(".jpg", pixels, JPEG)[1].tobytes()))
            time.sleep(1 / FRAMES_PER_S)


@pytest.fixture
def mirror() -> Iterator[Mirror]:
    made = Mirror()
    with serving(made.play) as made.url:
        yield made


def settle(page: Page) -> None:
    """Longer than the average, so that nothing of the tilt before is in it."""
    page.wait_for_timeout(1400)


def step(page: Page, name: str) -> None:
    page.get_by_role("navigation", name="What to prepare").get_by_text(name, exact=True).click()
    expect(
        page.get_by_role("heading", name=re.compile(name, re.IGNORECASE), level=2)
    ).to_be_visible()


def take_points(page: Page, mirror: Mirror, tilts: list[tuple[float, float]]) -> None:
    """The stage counts X the wrong way round: as the signs will show."""
    for number, (x, y) in enumerate(tilts, start=1):
        mirror.tilt_arcsec = (x, y)
        page.get_by_label("Known X, ″").fill(str(-x))
        page.get_by_label("Known Y, ″").fill(str(y))
        settle(page)
        page.get_by_role("button", name="Take this point").click()
        expect(page.get_by_role("row", name=re.compile(f"^{number} "))).to_be_visible()


def press(page: Page, mirror: Mirror, edge: str, by_arcsec: tuple[float, float]) -> None:
    section = page.get_by_role("region", name=edge)
    rest = mirror.tilt_arcsec
    settle(page)
    section.get_by_role("button", name=re.compile("rests")).click()
    expect(section.get_by_text("Press now").or_(section.get_by_text("X "))).to_be_visible()
    mirror.tilt_arcsec = (rest[0] + by_arcsec[0], rest[1] + by_arcsec[1])
    page.wait_for_timeout(700)
    mirror.tilt_arcsec = rest
    page.wait_for_timeout(300)
    section.get_by_role("button", name="I have pressed it").click()


def test_from_no_scale_at_all_to_proven_signs(
    serve: Any, look: Callable[..., Any], mirror: Mirror
) -> None:
    with serve("--source", mirror.url) as service:
        service.wait("/api/health", 200)
        watched = look()
        page: Page = watched.page
        page.goto(service.address)
        expect(page.get_by_text("No calibration: positions in pixels.")).to_be_visible()
        page.keyboard.press("p")
        expect(page.get_by_label("Width now")).to_contain_text("px")
        expect(page.get_by_text("the best so far")).to_be_visible()

        step(page, "Scale")
        expect(page.get_by_text("Expect u(f)/f")).to_be_visible()
        page.get_by_role("radio", name=re.compile("^Angles")).check()
        expect(page.get_by_text("from the scale of the stage")).to_be_visible()
        page.get_by_role("button", name="Begin", exact=True).click()
        tilts = [(0.0, 0.0), (120.0, 0.0), (-120.0, 0.0), (0.0, 90.0), (0.0, -90.0)]
        take_points(page, mirror, tilts[:2])
        expect(page.get_by_text("1 more point for residuals")).to_be_visible()
        # While the mirror moves nothing is taken, and the line says why.
        mirror.tilt_arcsec = (-110.0, 0.0)
        page.wait_for_timeout(200)
        page.get_by_role("button", name="Take this point").click()
        expect(page.get_by_role("alert")).to_contain_text("the mirror is moving")
        page.get_by_role("button", name="Take the last point back").click()
        expect(page.get_by_role("row", name=re.compile("^2 "))).to_have_count(0)
        page.get_by_role("button", name="Give up", exact=True).click()
        page.get_by_role("button", name=re.compile("for good")).click()
        page.get_by_role("button", name="Begin", exact=True).click()
        take_points(page, mirror, tilts)
        expect(page.get_by_text(re.compile(r"^f = .* px ± .* %"))).to_be_visible()
        page.get_by_label("Name").fill("Bench by the window")
        page.get_by_label("Conditions").fill("20.1 °C")
        page.get_by_role("button", name="Keep this calibration").click()
        expect(page.get_by_text("Bench by the window is kept.")).to_be_visible()
        expect(page.get_by_text("signs unproven", exact=True)).to_be_visible()

        page.get_by_role("link", name="Prove the signs").click()
        mirror.tilt_arcsec = (10.0, -5.0)
        press(page, mirror, "Top edge", (1.0, 25.0))
        expect(page.get_by_text("Still to be pressed: the right edge")).to_be_visible()
        press(page, mirror, "Right edge", (25.0, -2.0))
        expect(page.get_by_text("Mirrored", exact=True)).to_be_visible()
        page.get_by_role("button", name="Take the axes as the pushes showed them").click()
        expect(page.get_by_text("is kept.")).to_be_visible()
        expect(page.get_by_text("signs unproven", exact=True)).to_have_count(0)

        settle(page)
        shown = page.evaluate("fetch('/api/reading').then((answer) => answer.json())")
        assert shown["signs"] == "proven"
        # 300 mm in truth; the stage is good to 0.1 %, a crosshair in JPEG to 0.01 px or so.
        assert shown["average"]["x_arcsec"] == pytest.approx(10.0, abs=0.2)
        assert shown["average"]["y_arcsec"] == pytest.approx(-5.0, abs=0.2)

        step(page, "Uncertainty")
        expect(page.get_by_role("row", name=re.compile("^calibration "))).to_be_visible()
        expect(page.get_by_role("row", name=re.compile("^combined "))).to_be_visible()

        step(page, "Kept")
        kept = page.get_by_role("listitem").filter(has_text="Bench by the window")
        expect(kept).to_have_count(2)
        expect(kept.filter(has_text="signs unproven")).to_have_count(1)
        expect(page.get_by_text("in use", exact=True)).to_have_count(1)
        page.get_by_role("button", name="Note the change").click()
        expect(page.get_by_text("Set a new zero: lamp changed")).to_be_visible()
        kept.filter(has_text="signs unproven").get_by_role("button").click()
        expect(page.get_by_text("signs unproven", exact=True)).to_have_count(2)
        assert watched.errors == [
            error
            for error in watched.errors
            if "409" in error  # the browser logs the refusal
        ]
        assert watched.outside == []


@pytest.mark.parametrize("name", ["focus", "scale", "signs", "uncertainty", "kept"])
def test_each_step_fits_a_phone(serve: Any, look: Callable[..., Any], name: str) -> None:
    with serve() as service:
        service.wait("/api/health", 200)
        watched = look(390, 844)
        page: Page = watched.page
        page.goto(f"{service.address}#prepare/{name}")
        expect(page.locator("article h2")).to_be_visible()
        page.wait_for_timeout(600)
        assert page.evaluate("document.documentElement.scrollWidth") <= 390
        buttons = page.locator("article button:visible:not(.word)")
        for i in range(buttons.count()):
            box = buttons.nth(i).bounding_box()
            assert box is not None
            assert box["height"] >= 44
        assert watched.errors == []
        assert watched.outside == []
