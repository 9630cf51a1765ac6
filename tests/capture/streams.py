"""Pictures, videos and an MJPEG server of the tests' own, on loopback."""

from __future__ import annotations

import contextlib
import threading
from collections.abc import Callable, Iterator
from http.server import BaseHTTPRequestHandler, ThreadingHTTPServer
from pathlib import Path

import cv2
import numpy as np

SHAPE = (48, 64)


def scene(number: int, shape: tuple[int, int] = SHAPE) -> np.ndarray:
    """A smooth picture that differs from number to number; mean level 40 + 10 * number."""
    y, x = np.mgrid[0 : shape[0], 0 : shape[1]]
    waves = 30 * np.sin(2 * np.pi * (x / 16 + number / 7)) * np.cos(2 * np.pi * y / 24)
    return np.clip(40 + 10 * number + waves, 0, 255).astype(np.uint8)


def jpeg(number: int) -> bytes:
    return cv2.imencode(".jpg", scene(number), [cv2.IMWRITE_JPEG_QUALITY, 95])[1].tobytes()


def write_avi(path: Path, numbers: range, frames_per_s: float = 25.0) -> None:
    """Motion JPEG in AVI by OpenCV's own writer."""
    height, width = SHAPE
    code = cv2.VideoWriter.fourcc(*"MJPG")
    writer = cv2.VideoWriter(str(path), cv2.CAP_FFMPEG, code, frames_per_s, (width, height), False)
    assert writer.isOpened()
    for number in numbers:
        writer.write(scene(number))
    writer.release()


def part(data: bytes, length: int | None = -1) -> bytes:
    """One part of the stream; ``length`` -1 states the true length, None states none."""
    head = b"--picture\r\nContent-Type: image/jpeg\r\n"
    if length is not None:
        head += b"Content-Length: %d\r\n" % (len(data) if length < 0 else length)
    return head + b"\r\n" + data + b"\r\n"


class Client:
    """What a script of the server may do with the one who asked."""

    def __init__(self, handler: BaseHTTPRequestHandler, release: threading.Event) -> None:
        self.handler, self._release = handler, release

    def begin(self, kind: str = "multipart/x-mixed-replace; boundary=picture") -> None:
        self.handler.send_response(200)
        self.handler.send_header("Content-Type", kind)
        self.handler.end_headers()

    def send(self, data: bytes) -> None:
        self.handler.wfile.write(data)
        self.handler.wfile.flush()

    def hang(self) -> None:
        """Say nothing more until the test is over."""
        self._release.wait(20.0)


@contextlib.contextmanager
def serving(script: Callable[[Client], None]) -> Iterator[str]:
    """An HTTP server on a free port of loopback that answers each request by ``script``."""
    release = threading.Event()

    class Handler(BaseHTTPRequestHandler):
        def do_GET(self) -> None:
            with contextlib.suppress(ConnectionError):
                script(Client(self, release))

        def log_message(self, *args: object) -> None:
            pass

    server = ThreadingHTTPServer(("127.0.0.1", 0), Handler)
    thread = threading.Thread(target=server.serve_forever, args=(0.02,), daemon=True)
    thread.start()
    try:
        yield f"http://127.0.0.1:{server.server_port}/camera"
    finally:
        release.set()
        server.shutdown()
        server.server_close()
        thread.join(5.0)
