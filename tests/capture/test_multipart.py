"""Parts of a stream, cut at the right places however the bytes arrive (RFC 2046, 5.1)."""

from __future__ import annotations

import base64
import email.policy
import itertools
from email.mime.image import MIMEImage
from email.mime.multipart import MIMEMultipart

import pytest
from hypothesis import given
from hypothesis import strategies as st

from readout.capture.multipart import MultipartReader
from tests.capture.streams import jpeg, part

PICTURES = [jpeg(number) for number in range(4)]
LYING = {
    "true": lambda data: part(data),
    "none": lambda data: part(data, None),
    "short": lambda data: part(data, len(data) // 2),
    "long": lambda data: part(data, 2 * len(data)),
    "far": lambda data: part(data, 50_000_000),
}


def in_pieces(stream: bytes, cuts: list[int]) -> list[bytes]:
    reader = MultipartReader("picture")
    edges = [0, *sorted({cut % len(stream) for cut in cuts}), len(stream)]
    pieces = [stream[a:b] for a, b in itertools.pairwise(edges)]
    return [found for piece in pieces for found in reader.feed(piece)]


@pytest.mark.parametrize("length", sorted(LYING))
@given(cuts=st.lists(st.integers(0, 10**6), max_size=40))
def test_any_cutting_of_the_bytes_gives_the_same_parts(length: str, cuts: list[int]):
    stream = b"".join(LYING[length](data) for data in PICTURES) + b"--picture--\r\n"
    assert in_pieces(stream, cuts) == PICTURES


def test_one_byte_at_a_time():
    stream = b"".join(part(data) for data in PICTURES)
    assert in_pieces(stream, list(range(len(stream)))) == PICTURES


def test_a_true_length_hands_the_part_out_at_once():
    reader = MultipartReader("picture")
    whole = part(PICTURES[0])
    assert reader.feed(whole[: -len(b"\r\n")]) == [PICTURES[0]]


def test_without_a_length_the_next_boundary_ends_the_part():
    reader = MultipartReader("picture")
    assert reader.feed(part(PICTURES[0], None)) == []
    assert reader.feed(b"--picture\r\n") == [PICTURES[0]]


@pytest.mark.parametrize(
    ("parameter", "line"),
    [("--picture", b"--picture"), ('"picture"', b"--picture"), ("picture", b"----picture")],
)
def test_liberties_with_dashes_and_quotes(parameter: str, line: bytes):
    reader = MultipartReader(parameter)
    stream = line + b"\nContent-Type: image/jpeg\n\n" + PICTURES[0] + b"\n" + line
    assert reader.feed(stream) == [PICTURES[0]]


def test_reads_what_the_standard_library_writes():
    """Parts in base64 as the email package of Python lays them out."""
    message = MIMEMultipart("x-mixed-replace", boundary="picture")
    for data in PICTURES:
        message.attach(MIMEImage(data, "jpeg"))
    stream = message.as_bytes(policy=email.policy.SMTP)
    assert [base64.b64decode(found) for found in in_pieces(stream, [])] == PICTURES


def test_an_endless_part_is_an_error():
    reader = MultipartReader("picture")
    reader.feed(part(b"", None)[:-2])
    assert reader.feed(bytes(2**25)) == []
    with pytest.raises(ValueError, match="no end of a part"):
        reader.feed(bytes(2**25 + 1))


def test_a_head_without_an_end_is_given_up():
    """Or each piece of it would be searched from its beginning, 64 MiB long in the end."""
    reader = MultipartReader("picture")
    reader.feed(b"--picture\r\n")
    with pytest.raises(ValueError, match="head within 64 KiB"):
        for _ in range(70):
            reader.feed(b"X: " + b"x" * 1019 + b"\r\n")
