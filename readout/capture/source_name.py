"""What a source is called in everything people and files get to see.

An address may hold a password, before its host or in its query, and a path may hold bytes that
are no text. Events, logs, pages and answers carry the name made here; the source itself alone
knows what was typed.
"""

from __future__ import annotations

import re
from urllib.parse import SplitResult, urlsplit

HIDDEN = "…"
_ADDRESS = re.compile(r"\s*([a-zA-Z][a-zA-Z0-9+.-]*)://")


def source_name(text: str) -> str:
    """``text``, what names a source, as it may be shown and kept.

    Of an address, user and password are left out and a query is hidden, whatever its parts are
    called. Where a password may have torn the address apart, only its scheme is left.
    """
    address = _ADDRESS.match(text)
    if address is None:
        return encodable(text)
    parts = split_address(text)
    if parts is None or _torn(parts):
        return f"{address[1]}://{HIDDEN}"
    host = parts.netloc.rpartition("@")[2]
    shown = parts._replace(netloc=host, query=HIDDEN if parts.query else "", fragment="")
    return encodable(shown.geturl())


def encodable(text: str) -> str:
    """``text`` with what UTF-8 cannot carry (bytes of a name that are no text) spelt out."""
    return text.encode("utf-8", "backslashreplace").decode("utf-8")


def split_address(text: str) -> SplitResult | None:
    """The parts of an address; None where it has no host or its port is no number."""
    try:
        parts = urlsplit(text.strip())
        fits = bool(parts.hostname) and (parts.port is None or parts.port > 0)
    except ValueError:
        return None
    return parts if fits else None


def _torn(parts: SplitResult) -> bool:
    """True if an "@" behind the host looks like the end of a password with a / ? or # in it."""
    behind = parts.path + parts.query + parts.fragment
    return "@" in behind and ":" in parts.netloc and "@" not in parts.netloc
