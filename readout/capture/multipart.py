"""Pictures out of a multipart stream, whatever pieces its bytes arrive in.

The form is that of RFC 2046, 5.1: each part stands between lines "--boundary", headed by a few
lines and an empty one. Cameras take liberties: dashes doubled or left out, no Content-Length, or a
wrong one. So the boundary decides where a part ends; Content-Length only lets a part be
handed out at once instead of when the next one begins, and only if a JPEG really ends there.
"""

from __future__ import annotations

JPEG_END = b"\xff\xd9"
_PART_MAX = 64 * 2**20
_HEAD_MAX = 64 * 2**10


class MultipartReader:
    """Bytes in, whole parts out. No socket, no clock: the same bytes give the same parts."""

    def __init__(self, boundary: str) -> None:
        """``boundary``: the parameter of the Content-Type."""
        self._delimiter = b"--" + boundary.strip('"').lstrip("-").encode("latin-1")
        self._buffer = bytearray()
        self._in_body = False
        self._length: int | None = None
        self._searched = 0  # no delimiter begins before this place

    def feed(self, data: bytes) -> list[bytes]:
        """Take the next bytes of the stream; return the contents of the parts they complete."""
        self._buffer += data
        if len(self._buffer) > _PART_MAX:
            raise ValueError("no end of a part within 64 MiB")
        parts = []
        while (part := self._step()) is not None:
            if part:
                parts.append(part)
        return parts

    def _step(self) -> bytes | None:
        """One move on: a part, b"" for a move without one, None where more bytes are needed."""
        return self._body() if self._in_body else self._head()

    def _head(self) -> bytes | None:
        start = self._buffer.find(self._delimiter)
        if start < 0:
            del self._buffer[: max(0, len(self._buffer) - len(self._delimiter))]
            return None
        ends = [
            (at, len(e)) for e in (b"\r\n\r\n", b"\n\n") if (at := self._buffer.find(e, start)) >= 0
        ]
        if not ends:
            if len(self._buffer) - start > _HEAD_MAX:
                raise ValueError("no end of a part's head within 64 KiB")
            return None
        end, gap = min(ends)
        self._length = _content_length(bytes(self._buffer[start:end]))
        del self._buffer[: end + gap]
        self._in_body, self._searched = True, 0
        return b""

    def _body(self) -> bytes | None:
        end = self._buffer.find(self._delimiter, self._searched)
        if end < 0:
            self._searched = max(0, len(self._buffer) - len(self._delimiter))
            length = self._length
            if length is None or len(self._buffer) < length:
                return None
            if self._buffer[length - 2 : length] != JPEG_END:
                return None  # a wrong length: wait for the boundary
            end = length
        part = bytes(self._buffer[:end]).rstrip(b"\r\n-")
        del self._buffer[:end]
        self._in_body = False
        return part


def _content_length(head: bytes) -> int | None:
    for line in head.splitlines():
        name, _, value = line.partition(b":")
        if name.strip().lower() == b"content-length" and value.strip().isdigit():
            return int(value)
    return None
