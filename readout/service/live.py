"""``readout live``: the instrument and its service, from the first line to a clean end."""

from __future__ import annotations

import asyncio
import os
import socket
import sys
import threading
import webbrowser
from collections.abc import Callable, Iterator
from contextlib import contextmanager
from dataclasses import dataclass
from pathlib import Path
from typing import TYPE_CHECKING, Any

from readout import __version__
from readout.capture.compression import LOSSY, is_lossy
from readout.capture.open import describe_source
from readout.errors import BadInput, Busy
from readout.instrument import Instrument, State
from readout.instrument.opening import open_observer
from readout.instrument.recorder import Recorder
from readout.logbook import FILE_NAME, Logbook
from readout.service.control import Control, Options, kept_frames
from readout.service.feed import Feed
from readout.service.settings import SettingsStore

if TYPE_CHECKING:
    import uvicorn

HOST = "127.0.0.1"
BEGINS_WITHIN_S = 2.0


@dataclass(frozen=True, slots=True)
class Place:
    """Where the service is and where it keeps things. Port 0 takes any free one."""

    port: int
    data: Path
    settings: Path


class _Beginning:
    """How the source named on the command line begins: if it fails at once, so does the command.

    A source of the settings is waited for instead, or changed in the dashboard.
    """

    def __init__(self, source: str | None) -> None:
        self._named = source is not None
        self._known = threading.Event()
        self.failure: str | None = None
        if not self._named:
            self._known.set()

    def see(self, state: State, detail: str) -> None:
        """Listens to the instrument's states."""
        if state is State.FAILED and not self._known.is_set():
            self.failure = detail
        if state is not State.OPENING:
            self._known.set()

    async def known(self, within_s: float) -> None:
        """Wait until it is known, ``within_s`` at most."""
        await asyncio.to_thread(self._known.wait, within_s)


def run_live(
    options: Options,
    place: Place,
    ending: threading.Event,
    *,
    browser: bool | None,
    say: Callable[[str], None],
    warn: Callable[[str], None],
) -> None:
    """Measure and serve until ``ending`` is set.

    ``browser``: open one; None: only from a terminal with a display. ``say`` prints a
    line, ``warn`` one that tells of a failure while it goes on.
    Raises BadInput or Busy, with one line, where it cannot begin.
    """
    if options.source is not None:
        describe_source(options.source)
    store = SettingsStore(place.settings)
    _make_folder(place.data)
    kept_for = kept_frames(store, options)
    instrument = Instrument(
        observe=lambda s, t: open_observer(s, t, paced=True, preparing=kept_for(s))
    )

    def log_failed(line: str) -> None:
        instrument.tell("log_failed", line)
        warn(line)

    with (
        _listening(place.port) as listener,
        Logbook(place.data / FILE_NAME, on_failure=log_failed) as logbook,
    ):
        port = int(listener.getsockname()[1])
        feed = Feed()
        recorder = Recorder(instrument, logbook)
        control = Control(instrument, store, options)
        beginning = _Beginning(options.source)
        instrument.on_reading.append(feed.append)
        instrument.on_event.append(feed.announce)
        instrument.on_state.append(lambda *_: feed.announce())
        instrument.on_state.append(beginning.see)

        def welcome() -> None:
            address = f"http://{HOST}:{port}/"
            for line in _welcome(address, place.data, instrument):
                say(line)
            if is_lossy(control.source):
                warn(LOSSY)
            if browser if browser is not None else _at_a_screen():
                webbrowser.open(address)

        control.start()
        try:
            import uvicorn  # half a second: the acquisition has begun by now

            from readout.service.app import make_app

            app = make_app(instrument, feed, control, recorder, port=port)
            _serve(uvicorn.Config(app, **_SERVER), listener, feed, beginning, ending, welcome)
        finally:
            instrument.stop()
            recorder.close()
    if beginning.failure is not None:
        raise BadInput(beginning.failure)


_SERVER: dict[str, Any] = {
    "log_level": "critical",  # what concerns the user we say ourselves, in one line
    "access_log": False,
    "server_header": False,
    "ws": "websockets-sansio",
    "ws_max_size": 65_536,
    "timeout_graceful_shutdown": 1,
}


def _serve(
    config: uvicorn.Config,
    listener: socket.socket,
    feed: Feed,
    beginning: _Beginning,
    ending: threading.Event,
    welcome: Callable[[], None],
) -> None:
    import uvicorn

    class Server(uvicorn.Server):
        """Tells when it is ready, and leaves signals to the command."""

        async def startup(self, sockets: list[socket.socket] | None = None) -> None:
            await super().startup(sockets)
            await beginning.known(BEGINS_WITHIN_S)
            if beginning.failure is not None or ending.is_set():
                self.should_exit = True
            else:
                welcome()

        async def on_tick(self, counter: int) -> bool:
            over = ending.is_set() or beginning.failure is not None
            return over or await super().on_tick(counter)

        async def shutdown(self, sockets: list[socket.socket] | None = None) -> None:
            feed.detach()  # lets the streams end by themselves
            await super().shutdown(sockets)

        @contextmanager
        def capture_signals(self) -> Iterator[None]:
            yield

    Server(config).run(sockets=[listener])


@contextmanager
def _listening(port: int) -> Iterator[socket.socket]:
    """A socket bound to the loopback address; ours, so that a port in use is ours to report."""
    with socket.socket(socket.AF_INET, socket.SOCK_STREAM) as listener:
        if sys.platform == "win32":  # there, address reuse would let two programs share a port
            listener.setsockopt(socket.SOL_SOCKET, socket.SO_EXCLUSIVEADDRUSE, 1)
        else:
            listener.setsockopt(socket.SOL_SOCKET, socket.SO_REUSEADDR, 1)
        try:
            listener.bind((HOST, port))
            listener.listen(128)
        except OSError as error:
            raise Busy(
                f"port {port} cannot be used ({error.strerror}): end the program that uses it, "
                "or choose another with --port"
            ) from error
        yield listener


def _make_folder(folder: Path) -> None:
    try:
        folder.mkdir(parents=True, exist_ok=True)
    except OSError as error:
        raise BadInput(
            f"data folder {folder} cannot be made ({error.strerror}): choose another with --data"
        ) from error


def _welcome(address: str, data: Path, instrument: Instrument) -> list[str]:
    source = instrument.source or ""
    shown = "SIMULATED, no real mirror" if source == "simulated" else source
    return [f"readout {__version__} at {address}", f"data in {data}", f"source: {shown}"]


def _at_a_screen() -> bool:
    """True in a terminal on a machine with a display."""
    display = sys.platform in ("win32", "darwin") or bool(
        os.environ.get("DISPLAY") or os.environ.get("WAYLAND_DISPLAY")
    )
    return display and sys.stdout.isatty()
