"""The real service on a free loopback port, and a real browser that looks at its page."""

from __future__ import annotations

import http.client
import os
import re
import shutil
import subprocess
import sys
import time
from collections.abc import Callable, Iterator
from contextlib import AbstractContextManager, contextmanager
from pathlib import Path
from typing import TYPE_CHECKING
from urllib.parse import urlsplit

import pytest

if TYPE_CHECKING:
    from playwright.sync_api import Browser, Page

REQUIRED = os.environ.get("READOUT_REQUIRE_BROWSER") == "1"
READY_S = 30.0
QUIET = [
    "--no-first-run",
    "--disable-gpu",
    "--disable-background-networking",
    "--disable-component-update",
    "--disable-sync",
    "--disable-dev-shm-usage",
]

Serve = Callable[..., AbstractContextManager["Service"]]


class Service:
    """A running ``readout live``; ``address`` ends with a slash."""

    def __init__(self, process: subprocess.Popen[str], address: str) -> None:
        self.process = process
        self.address = address

    def answers(self, path: str) -> int | None:
        """Status of a GET, None if nobody answers."""
        parts = urlsplit(self.address)
        connection = http.client.HTTPConnection(parts.hostname or "", parts.port, timeout=2)
        try:
            connection.request("GET", path)
            return connection.getresponse().status
        except OSError:
            return None
        finally:
            connection.close()

    def wait(self, path: str, status: int) -> None:
        until = time.monotonic() + READY_S
        while (answer := self.answers(path)) != status:
            if time.monotonic() > until:
                pytest.fail(f"{path} answered {answer}, not {status}, for {READY_S:g} s")
            time.sleep(0.05)

    def stop(self) -> None:
        self.process.terminate()
        try:
            self.process.wait(timeout=10)
        except subprocess.TimeoutExpired:
            self.process.kill()
            self.process.wait(timeout=10)
            raise


@pytest.fixture
def serve(tmp_path: Path) -> Serve:
    """Starts the service with further options of ``readout live`` and stops it at the end."""

    @contextmanager
    def started(*options: str) -> Iterator[Service]:
        command = [sys.executable, "-m", "readout", "live", "--no-browser", "--port", "0"]
        command += ["--data", str(tmp_path / "data"), "--settings", str(tmp_path / "settings.json")]
        process = subprocess.Popen([*command, *options], stdout=subprocess.PIPE, text=True)
        try:
            assert process.stdout is not None
            first = process.stdout.readline()
            found = re.search(r"http://\S+", first)
            assert found, f"no address in the first line printed: {first!r}"
            service = Service(process, found[0])
            service.wait("/api/status", 200)
            yield service
        finally:
            if process.poll() is None:
                Service(process, "").stop()
            if process.stdout is not None:
                process.stdout.close()

    return started


@pytest.fixture(scope="session")
def browser() -> Iterator[Browser]:
    if REQUIRED:
        import playwright.sync_api as api  # a missing library is a failure here, not a skip
    else:
        api = pytest.importorskip("playwright.sync_api", reason="playwright is not installed")
    program = os.environ.get("READOUT_CHROMIUM") or shutil.which("chromium")
    with api.sync_playwright() as playwright:
        try:
            opened = playwright.chromium.launch(executable_path=program, args=QUIET)
        except api.Error as error:
            if REQUIRED:
                raise
            pytest.skip(f"no browser could be started: {str(error).splitlines()[0]}")
        yield opened
        opened.close()


class Watched:
    """A page, and what went wrong in it: errors it wrote, addresses it asked beyond loopback."""

    def __init__(self, page: Page) -> None:
        self.page = page
        self.errors: list[str] = []
        self.outside: list[str] = []
        page.on("pageerror", lambda error: self.errors.append(str(error)))
        page.on("console", lambda m: self.errors.append(m.text) if m.type == "error" else None)
        page.on("request", lambda request: self._asked(request.url))
        page.on("websocket", lambda socket: self._asked(socket.url))

    def _asked(self, url: str) -> None:
        parts = urlsplit(url)
        if parts.scheme not in ("data", "blob") and parts.hostname != "127.0.0.1":
            self.outside.append(url)


@pytest.fixture
def look(browser: Browser) -> Iterator[Callable[..., Watched]]:
    """Opens an empty page of a size; each has its own storage."""
    contexts = []

    def opened(width: int = 1440, height: int = 900) -> Watched:
        context = browser.new_context(viewport={"width": width, "height": height})
        context.set_default_timeout(15_000)
        contexts.append(context)
        return Watched(context.new_page())

    yield opened
    for context in contexts:
        context.close()
