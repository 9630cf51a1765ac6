"""A stream of JPEG pictures over HTTP (multipart/x-mixed-replace), as network cameras send it.

Read by a thread of its own, for three reasons: the stamp is that of the arrival, not of the
moment somebody asked; a wait can end without harm to the connection; and what comes in faster
than it is measured is dropped, oldest first, instead of growing old in a buffer.
"""

from __future__ import annotations

import base64
import contextlib
import http.client
import queue
import socket
import ssl
import threading
import time
from collections.abc import Iterator
from types import TracebackType
from typing import Self
from urllib.parse import SplitResult, unquote

from readout import __version__
from readout.capture.damaged import blank
from readout.capture.multipart import MultipartReader
from readout.capture.repeats import RepeatWatch
from readout.capture.source_name import source_name, split_address
from readout.capture.timebase import Clock, TimeBase
from readout.errors import BadInput, SourceLost, SourceStalled
from readout.files.pictures import decode_jpeg
from readout.model import Frame, Pixels, Quality

_QUEUE_FRAMES = 8
SILENCE_S = 30.0
_BLOCK_BYTES = 65536

_Arrival = tuple[int, int, bytes]
"""Number, monotonic time in nanoseconds and content of a picture."""


class MjpegSource:
    """Frames of one MJPEG stream, in grey, stamped when their last byte arrived.

    ``seq`` counts pictures as they arrive: one that was dropped is a gap. A damaged picture
    becomes a black frame marked ``damaged``; one that comes before any sound one is dropped,
    for its size is not known yet.
    """

    live = True

    def __init__(
        self,
        url: str,
        *,
        connect_timeout_s: float = 5.0,
        silence_s: float = SILENCE_S,
        clock: Clock = time.monotonic_ns,
    ) -> None:
        """Nothing is opened yet. A stream silent for ``silence_s`` counts as lost.

        Raises BadInput if ``url`` names no host.
        """
        self._url, parts = source_name(url), split_address(url)
        if parts is None or parts.scheme not in ("http", "https"):
            raise BadInput(
                f"{self._url} is no address of a stream: give http://host:port/path (/, ? and # "
                "in a password as %2F, %3F and %23)"
            )
        self._parts = parts
        self._connect_timeout_s, self._silence_s = connect_timeout_s, silence_s
        self._clock = clock
        self._timebase = TimeBase(0, 0)
        self._link: _Link | None = None
        self._repeats = RepeatWatch()
        self._like: tuple[tuple[int, ...], int] | None = None

    def __enter__(self) -> Self:
        self._timebase = TimeBase.now(self._clock)
        self._repeats, self._like = RepeatWatch(), None
        link, response = _connect(self._url, self._parts, self._connect_timeout_s)
        link.settimeout(self._silence_s)
        self._link = _Link(self._url, link, response, self._clock)
        return self

    def __exit__(
        self,
        exc_type: type[BaseException] | None,
        exc: BaseException | None,
        tb: TracebackType | None,
    ) -> None:
        if self._link is not None:
            self._link.close()
        self._link = None

    def read(self, timeout_s: float) -> Frame:
        """The next frame; see `readout.capture.source.Source`."""
        if self._link is None:
            raise SourceLost(f"{self._url} is not open: open it first")
        deadline_ns = time.monotonic_ns() + round(timeout_s * 1e9)
        decoded = None
        while decoded is None:
            left_s = max(0.0, (deadline_ns - time.monotonic_ns()) * 1e-9)
            seq, t_mono_ns, data = self._link.next(left_s)
            decoded = self._decoded(data)
        pixels, full_scale, quality = decoded
        return Frame(
            pixels, seq, t_mono_ns, self._timebase.utc_ns(t_mono_ns), full_scale, quality=quality
        )

    def _decoded(self, data: bytes) -> tuple[Pixels, int, Quality] | None:
        """Pixels, full scale and flags; None for a damaged picture of unknown size."""
        try:
            pixels, full_scale = decode_jpeg(data)
        except BadInput:
            if self._like is None:
                return None
            return blank(*self._like), self._like[1], Quality.DAMAGED
        self._like = pixels.shape, full_scale
        return pixels, full_scale, self._repeats.quality_of(pixels)


class _Link:
    """The connection and the thread that empties it."""

    def __init__(
        self, url: str, link: socket.socket, response: http.client.HTTPResponse, clock: Clock
    ) -> None:
        self._url, self._clock = url, clock
        self._end = "ended by the server"
        self._items: queue.Queue[_Arrival | None] = queue.Queue(_QUEUE_FRAMES + 1)
        self._socket, self._response = link, response
        kind = self._response.headers.get_content_type()
        boundary = self._response.headers.get_param("boundary")
        if not kind.startswith("multipart/") or not isinstance(boundary, str):
            self._response.close()
            self._socket.close()
            raise BadInput(f"{url} sends {kind}, no MJPEG stream: check the path of the address")
        self._parser = MultipartReader(boundary)
        self._thread = threading.Thread(target=self._run, name="mjpeg", daemon=True)
        self._thread.start()

    def next(self, timeout_s: float) -> _Arrival:
        """The next picture."""
        try:
            item = self._items.get(timeout=timeout_s)
        except queue.Empty:
            raise SourceStalled(f"{self._url}: no frame within {timeout_s:.3g} s") from None
        if item is None:
            self._items.put(None)  # and so it stays
            raise SourceLost(f"{self._url}: {self._end}")
        return item

    def close(self) -> None:
        with contextlib.suppress(OSError):  # it may have been closed by the other side
            self._socket.shutdown(socket.SHUT_RDWR)
        self._thread.join(timeout=5.0)
        self._response.close()
        self._socket.close()

    def _run(self) -> None:
        seq = 0
        try:
            while data := self._response.read1(_BLOCK_BYTES):
                t_mono_ns = self._clock()
                for part in self._parser.feed(data):
                    self._offer((seq, t_mono_ns, part))
                    seq += 1
        except TimeoutError:
            self._end = f"silent for {self._socket.gettimeout():g} s"
        except (OSError, ValueError, http.client.HTTPException) as error:
            self._end = f"broken off ({error})"
        self._offer(None)

    def _offer(self, item: _Arrival | None) -> None:
        if item is not None and self._items.qsize() >= _QUEUE_FRAMES:
            with contextlib.suppress(queue.Empty):
                self._items.get_nowait()
        self._items.put(item)


def _connect(
    url: str, parts: SplitResult, timeout_s: float
) -> tuple[socket.socket, http.client.HTTPResponse]:
    """The socket and the answer, of which only the head has been read, within ``timeout_s``."""
    kind = http.client.HTTPSConnection if parts.scheme == "https" else http.client.HTTPConnection
    connection = kind(parts.hostname or "", parts.port, timeout=timeout_s)
    target = (parts.path or "/") + (f"?{parts.query}" if parts.query else "")
    late = threading.Event()
    try:
        link = socket.create_connection((connection.host, connection.port), timeout_s)
        with _shut_after(link, timeout_s, late):
            if parts.scheme == "https":
                context = ssl.create_default_context()
                link = context.wrap_socket(link, server_hostname=connection.host)
            connection.sock = link  # which the connection gives up once the answer has begun
            connection.request("GET", target, headers=_headers(parts))
            response = connection.getresponse()
    except (http.client.InvalidURL, UnicodeError) as error:
        connection.close()
        raise BadInput(
            f"{url} holds characters no address can: write them as % and two digits"
        ) from error
    except (OSError, http.client.HTTPException) as error:
        connection.close()
        reason = "no answer" if late.is_set() or isinstance(error, TimeoutError) else error
        raise SourceLost(f"{url} cannot be reached ({reason}): check address and camera") from error
    if late.is_set():
        response.close()
        link.close()
        raise SourceLost(f"{url} cannot be reached (no answer): check address and camera")
    if response.status != http.client.OK:
        response.close()
        link.close()
        message = f"{url} answers {response.status} {response.reason}: check the address"
        raise (SourceLost if response.status >= 500 else BadInput)(message)
    return link, response


@contextlib.contextmanager
def _shut_after(link: socket.socket, seconds: float, late: threading.Event) -> Iterator[None]:
    """Shut ``link`` down after so long, and set ``late``.

    A time limit of the socket bounds each wait, and a server that sends a byte now and then would
    never exceed it. A copy is shut, for TLS takes the socket over.
    """
    copy = link.dup()

    def shut() -> None:
        late.set()
        with contextlib.suppress(OSError):  # the other side may have closed it
            copy.shutdown(socket.SHUT_RDWR)

    timer = threading.Timer(seconds, shut)
    timer.daemon = True
    timer.start()
    try:
        yield
    finally:
        timer.cancel()
        timer.join()
        copy.close()


def _headers(parts: SplitResult) -> dict[str, str]:
    headers = {"User-Agent": f"readout/{__version__}"}
    if parts.username is not None:
        pair = f"{unquote(parts.username)}:{unquote(parts.password or '')}"
        headers["Authorization"] = "Basic " + base64.b64encode(pair.encode()).decode()
    return headers
