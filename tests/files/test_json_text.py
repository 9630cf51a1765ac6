"""JSON from outside is read as it stands, or refused as a ValueError of one line."""

from __future__ import annotations

import json

import pytest
from hypothesis import given
from hypothesis import strategies as st

from readout.files.json_text import DEEPEST, read_json, refuse_odd

plain = st.recursive(
    st.none()
    | st.booleans()
    | st.integers(-(2**53), 2**53)
    | st.floats(allow_nan=False, allow_infinity=False)
    | st.text(st.characters(codec="utf-8")),
    lambda inner: st.lists(inner) | st.dictionaries(st.text(st.characters(codec="utf-8")), inner),
    max_leaves=20,
)


@given(plain)
def test_what_json_can_say_is_read(value: object) -> None:
    assert read_json(json.dumps(value).encode()) == value


@pytest.mark.parametrize(
    ("text", "words"),
    [
        (b"", "Expecting value"),
        (b"\xff", "decode"),
        (b"NaN", "infinite or none"),
        (b"[1e999]", "infinite or none"),
        (b"9007199254740993", "too large"),
        (b'["\\ud800"]', "half a character"),
        (b'{"\\udfff": 1}', "half a character"),
        (b"[" * 100_000, "nested"),
        (b"[" * (DEEPEST + 1) + b"]" * (DEEPEST + 1), "nested"),
    ],
)
def test_what_is_refused(text: bytes, words: str) -> None:
    with pytest.raises(ValueError, match=words) as raised:
        read_json(text)
    assert "\n" not in str(raised.value)


def test_as_deep_as_is_allowed() -> None:
    refuse_odd(json.loads("[" * DEEPEST + "]" * DEEPEST))
