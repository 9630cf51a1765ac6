"""Instants in files and messages: ISO 8601, UTC, with Z and milliseconds."""

from __future__ import annotations

from datetime import UTC, datetime, timedelta

_EPOCH = datetime(1970, 1, 1, tzinfo=UTC)


def utc_text(t_utc_ns: int) -> str:
    """``t_utc_ns`` nanoseconds since 1970 as "2026-12-01T09:00:00.000Z", rounded down to 1 ms."""
    instant = _EPOCH + timedelta(milliseconds=t_utc_ns // 1_000_000)
    return instant.isoformat(timespec="milliseconds").replace("+00:00", "Z")
