"""A measurement that is kept: calibrated, zeroed, recorded, looked into, exported."""

from __future__ import annotations

import csv
import json
import re
import subprocess
import sys
from collections.abc import Callable
from pathlib import Path
from typing import TYPE_CHECKING, Any

import pytest

from readout.capture.timebase import TimeBase
from readout.logbook import FILE_NAME, Logbook, NewRun
from readout.model import Quality, Reading

if TYPE_CHECKING:
    from playwright.sync_api import Locator, Page

pytestmark = pytest.mark.browser

SET = Path(__file__).parents[2] / "calib_images" / "bench_stage"
COLUMNS = [
    *("t_utc", "t_s", "x_arcsec", "y_arcsec", "x_sd_arcsec", "y_sd_arcsec"),
    *("x_u_arcsec", "y_u_arcsec", "quality", "x_px", "y_px", "signs"),
]


def expect(what: Any) -> Any:
    from playwright.sync_api import expect as playwright_expect

    playwright_expect.set_options(timeout=15_000)
    return playwright_expect(what)


@pytest.fixture(scope="module")
def calibration(tmp_path_factory: pytest.TempPathFactory) -> Path:
    """The sample set's calibration; its pictures are as large as the simulator's."""
    path = tmp_path_factory.mktemp("calibration") / "bench.json"
    command = [sys.executable, "-m", "readout", "calibrate", str(SET), "--out", str(path)]
    subprocess.run(command, check=True, timeout=50, stdout=subprocess.DEVNULL)
    return path


def band(page: Page) -> Locator:
    return page.get_by_role("complementary", name="Being recorded")


def rows_recorded(page: Page) -> int:
    found = re.search(r"([\d\u2009]+)\s+readings", band(page).inner_text())
    assert found, band(page).inner_text()
    return int(found[1].replace("\u2009", ""))


def overflow_px(page: Page) -> int:
    root = "document.documentElement"
    return int(page.evaluate(f"{root}.scrollWidth - {root}.clientWidth"))


def test_a_measurement_is_calibrated_zeroed_recorded_seen_and_exported(
    serve: Any, look: Callable[..., Any], calibration: Path, tmp_path: Path
) -> None:
    with serve() as service:
        service.wait("/api/health", 200)
        watched = look()
        page: Page = watched.page
        page.goto(service.address)

        page.keyboard.press("s")
        page.get_by_label("Add a file").set_input_files(calibration)
        name = json.loads(calibration.read_text("utf-8"))["id"]
        expect(page.get_by_role("radio", name=name)).to_be_checked()
        expect(page.get_by_text("Used from now on.")).to_be_visible()
        page.get_by_role("button", name="Close").click()
        expect(page.locator("footer")).to_contain_text(name)
        status = page.request.get(service.address + "api/status").json()
        assert status["calibration"]["id"] == name

        # A zero is refused while the mirror moves, as the simulated one does now and then.
        taken_back = page.get_by_role("button", name="Take zero back")
        expect(page.get_by_role("button", name="Set zero here")).to_be_enabled()
        for _ in range(40):
            page.keyboard.press("z")
            page.wait_for_timeout(250)
            if taken_back.is_visible():
                break
        expect(taken_back).to_be_visible()
        expect(page.get_by_text("against the zero of")).to_be_visible()
        page.keyboard.press("t")
        expect(page.get_by_text("no zero set")).to_be_visible()

        page.get_by_role("button", name="Start a run").click()
        page.get_by_label("Title").fill("Bed, line 1")
        page.get_by_label("Note").fill("carriage not turned")
        page.get_by_role("button", name="Start the run").click()
        expect(band(page)).to_contain_text(re.compile(r"Recording\s+Bed, line 1\s+since \d\d:\d\d"))
        before = rows_recorded(page)
        page.wait_for_function(
            "before => Number(document.querySelector('aside').innerText"
            ".match(/([\\d\\u2009]+)\\s+readings/)[1].replace('\\u2009', '')) > before + 20",
            arg=before,
        )
        page.keyboard.press("r")
        page.get_by_role("dialog").get_by_role("button", name="Stop the run").click()
        expect(band(page)).to_have_count(0)

        page.get_by_role("link", name="Runs").click()
        page.get_by_role("link", name="Bed, line 1").click()
        assert page.url.endswith("#runs/1")
        expect(page.get_by_role("heading", name="Bed, line 1")).to_be_visible()
        expect(page.get_by_role("article")).to_contain_text("carriage not turned")
        expect(page.get_by_role("article")).to_contain_text(name)
        expect(page.get_by_role("img", name="X and Y of the run")).to_be_visible()

        run = page.request.get(service.address + "api/runs/1").json()
        for link, read in (("Export CSV", csv_rows), ("Export NDJSON", ndjson_rows)):
            with page.expect_download() as download:
                page.get_by_role("link", name=link).click()
            path = tmp_path / download.value.suggested_filename
            download.value.save_as(path)
            rows = read(path)
            assert len(rows) == run["readings"] > 20
            assert list(rows[0]) == COLUMNS
            assert float(rows[0]["t_s"]) < float(rows[-1]["t_s"])

        page.go_back()
        page.go_back()
        expect(page.get_by_role("button", name="Start a run")).to_be_visible()
        # The browser also writes down that a zero was refused.
        assert [error for error in watched.errors if "409 (Conflict)" not in error] == []
        assert watched.outside == []


def csv_rows(path: Path) -> list[dict[str, Any]]:
    with path.open(encoding="utf-8", newline="") as file:
        return list(csv.DictReader(file))


def ndjson_rows(path: Path) -> list[dict[str, Any]]:
    return [json.loads(line) for line in path.read_text("utf-8").splitlines()]


def test_a_calibration_that_does_not_fit_is_refused_in_words(
    serve: Any, look: Callable[..., Any], calibration: Path, tmp_path: Path
) -> None:
    document = json.loads(calibration.read_text("utf-8"))
    other = tmp_path / "other.json"
    other.write_text(json.dumps(document | {"id": "wide", "image_width_px": 1280}), "utf-8")
    broken = tmp_path / "broken.json"
    broken.write_text("{", "utf-8")
    with serve() as service:
        service.wait("/api/health", 200)
        page: Page = look().page
        page.goto(service.address)
        page.get_by_role("button", name="Settings").click()
        refusal = page.get_by_role("dialog").get_by_role("alert").filter(has_text="Not used")
        page.get_by_label("Add a file").set_input_files(broken)
        expect(refusal).to_contain_text("no calibration file")
        page.get_by_label("Add a file").set_input_files(other)
        expect(refusal).to_contain_text("1280 × 480 px, these are 640 × 480 px")
        expect(page.get_by_role("radio", name="wide")).to_be_disabled()
        expect(page.get_by_role("radio", name="Use none")).to_be_checked()


def keep_a_long_run(path: Path) -> None:
    """Two hours, a reading a second, twenty minutes of them missing."""
    start = TimeBase.now().t_utc_ns - 7200 * 10**9
    with Logbook(path) as book:
        book.start(NewRun(title="two hours", started_utc_ns=start, version="test"))
        for second in range(7200):
            if not 3000 <= second < 4200:
                book.append(reading(second, start), t_s=float(second))
        book.end(start + 7200 * 10**9)


def reading(second: int, start_utc_ns: int) -> Reading:
    return Reading(
        seq=second,
        t_s=float(second),
        t_utc_ns=start_utc_ns + second * 10**9,
        x_arcsec=10.0 + second / 3600,
        y_arcsec=-5.0,
        x_sd_arcsec=0.01,
        y_sd_arcsec=0.01,
        x_u_arcsec=0.05,
        y_u_arcsec=0.05,
        x_px=320.0,
        y_px=240.0,
        x_sd_px=0.01,
        y_sd_px=0.01,
        quality=Quality.OK,
    )


def test_a_long_run_is_looked_into_part_by_part(
    serve: Any, look: Callable[..., Any], tmp_path: Path
) -> None:
    (tmp_path / "data").mkdir()
    keep_a_long_run(tmp_path / "data" / FILE_NAME)
    with serve() as service:
        service.wait("/api/health", 200)
        watched = look()
        page: Page = watched.page
        asked: list[str] = []
        page.on("request", lambda r: asked.append(r.url) if "/series" in r.url else None)
        page.goto(service.address + "#runs/1")
        whole = page.get_by_role("button", name="whole run")
        expect(whole).to_have_attribute("aria-pressed", "true")
        chart = page.locator(".plot .u-over")
        box = chart.bounding_box()
        assert box is not None
        y = box["y"] + box["height"] / 2
        with page.expect_response(lambda r: "from_s" in r.url) as answer:
            page.mouse.move(box["x"] + 0.25 * box["width"], y)
            page.mouse.down()
            page.mouse.move(box["x"] + 0.5 * box["width"], y, steps=3)
            page.mouse.up()
        part = answer.value.json()
        # A quarter of two hours from a half hour on; one pixel is ten seconds.
        assert part["t_s"][0] == pytest.approx(1800, abs=30)
        assert part["t_s"][-1] == pytest.approx(3600, abs=30)
        gap = [n for n, t_s in zip(part["n"], part["t_s"], strict=True) if 3010 < t_s < 4190]
        assert gap
        assert not any(gap)
        expect(whole).to_have_attribute("aria-pressed", "false")
        page.keyboard.press("0")
        expect(whole).to_have_attribute("aria-pressed", "true")
        page.keyboard.press("+")
        expect(whole).to_have_attribute("aria-pressed", "false")
        page.mouse.move(box["x"] + 10, y)
        for _ in range(4):
            page.mouse.wheel(0, 100)
        expect(whole).to_have_attribute("aria-pressed", "true")
        assert "from_s" not in asked[0]
        assert watched.errors == []


def test_on_a_phone_the_list_comes_first_and_nothing_is_cut_off(
    serve: Any, look: Callable[..., Any]
) -> None:
    with serve() as service:
        service.wait("/api/health", 200)
        watched = look(390, 844)
        page: Page = watched.page
        page.goto(service.address + "#runs")
        expect(page.get_by_text("No run yet.")).to_be_visible()
        page.get_by_role("button", name="Start a run").click()
        page.get_by_label("Title").fill("A title that is far longer than a phone is wide, and more")
        page.get_by_role("button", name="Start the run").click()
        stop = band(page).get_by_role("button", name="Stop the run")
        expect(stop).to_be_visible()
        assert (stop.bounding_box() or {"height": 0})["height"] >= 44
        link = page.get_by_role("main").get_by_role("link", name="A title that is far longer")
        expect(link).to_be_visible()
        assert overflow_px(page) == 0
        link.click()
        expect(page.get_by_role("img", name="X and Y of the run")).to_be_visible()
        expect(link).to_be_hidden()
        assert overflow_px(page) == 0
        page.get_by_role("link", name="Watch").click()
        expect(page.get_by_role("button", name="Set zero here")).to_be_visible()
        assert overflow_px(page) == 0
        stop.click()
        page.get_by_role("dialog").get_by_role("button", name="Stop the run").click()
        expect(band(page)).to_have_count(0)
        assert overflow_px(page) == 0
        page.get_by_role("link", name="Runs").click()
        expect(link).to_be_visible()
        assert watched.errors == []
