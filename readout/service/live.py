"""``readout live``: the instrument and its service, from the first line to a clean end."""

from __future__ import annotations

import os
import signal
import socket
import sys
import webbrowser
from collections.abc import Callable, Iterator
from contextlib import contextmanager
from dataclasses import dataclass, field
from pathlib import Path
from types import FrameType

from readout import __version__
from readout.errors import BadInput, Busy
from readout.instrument import Instrument, State
from readout.instrument.opening import open_observer
from readout.service.control import Control, Options
from readout.service.feed import Feed
from readout.service.settings import SettingsStore

HOST = "127.0.0.1"


@dataclass(frozen=True, slots=True)
class Place:
    """Where the service is and where it keeps things. Port 0 takes any free one."""

    port: int
    data: Path
    settings: Path


@dataclass(slots=True)
class _Outcome:
    """Why the service has to end, if the source chosen on the command line failed at once."""

    measured: bool = False
    failure: str | None = None
    end: list[Callable[[], None]] = field(default_factory=list)


def run_live(
    options: Options, place: Place, *, browser: bool | None, say: Callable[[str], None]
) -> None:
    """Measure and serve until SIGINT or SIGTERM.

    ``browser``: open one; None: only from a terminal with a display. ``say`` prints a line.
    Raises BadInput or Busy, with one line, where it cannot begin.
    """
    store = SettingsStore(place.settings)
    _make_folder(place.data)
    with _listening(place.port) as listener:
        port = int(listener.getsockname()[1])
        feed = Feed()
        instrument = Instrument(observe=lambda s, t: open_observer(s, t, paced=True))
        control = Control(instrument, store, options)
        outcome = _Outcome()
        instrument.on_reading.append(feed.append)
        instrument.on_event.append(feed.announce)
        instrument.on_state.append(lambda *_: feed.announce())
        instrument.on_state.append(_watch_start(outcome, options))
        control.start()
        try:
            _serve(
                instrument,
                feed,
                control,
                listener,
                outcome,
                lambda: _welcome(port, place.data, instrument, browser=browser, say=say),
            )
        finally:
            instrument.stop()
    if outcome.failure is not None:
        raise BadInput(outcome.failure)


def _serve(
    instrument: Instrument,
    feed: Feed,
    control: Control,
    listener: socket.socket,
    outcome: _Outcome,
    on_ready: Callable[[], None],
) -> None:
    import uvicorn  # half a second: the acquisition has begun by now

    from readout.service.app import make_app

    app = make_app(instrument, feed, control, port=int(listener.getsockname()[1]))

    class Server(uvicorn.Server):
        """Tells when it is ready; ends on our signals instead of its own handling of them."""

        async def startup(self, sockets: list[socket.socket] | None = None) -> None:
            await super().startup(sockets)
            on_ready()

        async def shutdown(self, sockets: list[socket.socket] | None = None) -> None:
            feed.detach()  # lets the streams end by themselves
            await super().shutdown(sockets)

        @contextmanager
        def capture_signals(self) -> Iterator[None]:
            yield

    config = uvicorn.Config(
        app,
        log_level="warning",
        access_log=False,
        server_header=False,
        ws="websockets-sansio",
        ws_max_size=65_536,
        timeout_graceful_shutdown=1,
    )
    server = Server(config)

    def end(_signal: int = 0, _frame: FrameType | None = None) -> None:
        server.should_exit = True

    outcome.end.append(end)
    if outcome.failure is not None:  # while the server was being made
        return
    before = {s: signal.signal(s, end) for s in (signal.SIGINT, signal.SIGTERM)}
    try:
        server.run(sockets=[listener])
    finally:
        for number, handler in before.items():
            signal.signal(number, handler)


def _watch_start(outcome: _Outcome, options: Options) -> Callable[[State, str], None]:
    """A source named on the command line that fails before it gave a frame ends the command."""

    def watch(state: State, detail: str) -> None:
        if state is State.MEASURING:
            outcome.measured = True
        elif state is State.FAILED and options.source is not None and not outcome.measured:
            outcome.failure = detail
            for end in outcome.end:
                end()

    return watch


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


def _welcome(
    port: int,
    data: Path,
    instrument: Instrument,
    *,
    browser: bool | None,
    say: Callable[[str], None],
) -> None:
    address = f"http://{HOST}:{port}/"
    say(f"readout {__version__} at {address}")
    say(f"data in {data}")
    source = instrument.source
    say(f"source: {source}" if source != "simulated" else "source: SIMULATED, no real mirror")
    if browser if browser is not None else _at_a_screen():
        webbrowser.open(address)


def _at_a_screen() -> bool:
    """True in a terminal on a machine with a display."""
    display = sys.platform in ("win32", "darwin") or bool(
        os.environ.get("DISPLAY") or os.environ.get("WAYLAND_DISPLAY")
    )
    return display and sys.stdout.isatty()
