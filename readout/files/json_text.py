"""JSON from outside: whatever it holds, it is read or refused, and nothing else happens.

What is refused here could be read but not be written again, worked with or shown: numbers that
are infinite, none at all or beyond what JSON's readers agree on (RFC 8259, 6), nesting without
end, and half a character.
"""

from __future__ import annotations

import json
import math
from typing import Any

DEEPEST = 32
LARGEST_WHOLE = 2**53
_TOO_DEEP = f"it is nested more than {DEEPEST} levels deep"


def read_json(text: bytes) -> Any:
    """The value in ``text``. Raises ValueError, one line, for what is no JSON or refused here."""
    try:
        value = json.loads(text.decode("utf-8"))
    except RecursionError:
        raise ValueError(_TOO_DEEP) from None
    except ValueError as error:  # broken JSON and broken UTF-8
        raise ValueError(f"it holds no JSON: {error}") from error
    refuse_odd(value)
    return value


def refuse_odd(value: Any, depth: int = 0) -> None:
    """Raise ValueError, one line, for a value that can be in no document of ours."""
    match value:
        case str():
            if not value.isascii() and any("\ud800" <= sign <= "\udfff" for sign in value):
                raise ValueError("a text holds half a character")
        case int() if abs(value) > LARGEST_WHOLE:
            raise ValueError("a whole number is too large")
        case float() if not math.isfinite(value):
            raise ValueError("a number is infinite or none at all")
        case dict() | list() if depth >= DEEPEST:
            raise ValueError(_TOO_DEEP)
        case dict():
            for key, part in value.items():
                refuse_odd(key, depth)
                refuse_odd(part, depth + 1)
        case list():
            for part in value:
                refuse_odd(part, depth + 1)
