"""The two things about a PNG file that a decoder keeps to itself: its soundness and its depth.

A sample of 10 or 12 bits is stored in 16, shifted to the top, and the chunk ``sBIT`` says how
many bits are meant (PNG Specification, third edition, W3C 2025, 11.3.2.7 and 12.4).
"""

from __future__ import annotations

import struct
import zlib
from collections.abc import Iterator

SIGNATURE = b"\x89PNG\r\n\x1a\n"
_HEADER_END = len(SIGNATURE) + 25  # IHDR comes first: 4 length, 4 type, 13 data, 4 checksum


def _chunks(data: bytes) -> Iterator[tuple[bytes, bytes]]:
    """Type and content of each chunk. Raises ValueError where the file is broken."""
    at = len(SIGNATURE)
    while True:
        if at + 12 > len(data):
            raise ValueError("the file ends early")
        (length,) = struct.unpack_from(">I", data, at)
        body = data[at + 4 : at + 8 + length]
        checksum = data[at + 8 + length : at + 12 + length]
        if len(checksum) < 4:
            raise ValueError("the file ends early")
        if zlib.crc32(body) != int.from_bytes(checksum, "big"):
            raise ValueError("a checksum does not agree")
        yield body[:4], body[4:]
        if body[:4] == b"IEND":
            return
        at += 12 + length


def check(data: bytes) -> int | None:
    """The significant bits a sample has by ``sBIT`` (the least of all channels), None without it.

    Raises ValueError, with the reason, if the file is cut short or a checksum does not agree.
    """
    bits = None
    for kind, content in _chunks(data):
        if kind == b"sBIT" and content:
            bits = min(content)
    return bits


def with_significant_bits(data: bytes, bits: int) -> bytes:
    """The grey-scale PNG ``data`` with a chunk that says how many bits of a sample are meant."""
    body = b"sBIT" + bytes([bits])
    chunk = struct.pack(">I", 1) + body + struct.pack(">I", zlib.crc32(body))
    return data[:_HEADER_END] + chunk + data[_HEADER_END:]
