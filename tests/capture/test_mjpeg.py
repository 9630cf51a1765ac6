"""MJPEG over HTTP, from a server of the tests' own, with the faults such servers have."""

from __future__ import annotations

import base64
import contextlib
import socket
import threading
import time

import cv2
import numpy as np
import pytest

from readout.capture.mjpeg import MjpegSource
from readout.errors import BadInput, SourceLost, SourceStalled
from readout.files.pictures import decode_picture
from readout.model import Quality
from tests.capture.streams import SHAPE, Client, jpeg, part, scene, serving
from tests.contracts import PROMPT_S, one_line, read_to_end

WAIT_S = 5.0


def same_as(number: int, pixels: np.ndarray) -> bool:
    return bool(np.array_equal(pixels, decode_picture(jpeg(number))[0]))


@pytest.mark.parametrize("length", [-1, None, 10, 10_000], ids=["true", "none", "short", "long"])
def test_every_frame_in_order_whatever_the_stated_length(length: int | None):
    def script(client: Client) -> None:
        client.begin()
        for number in range(5):
            client.send(part(jpeg(number), length))
        client.send(b"--picture--\r\n")

    with serving(script) as url, MjpegSource(url) as source:
        for number in range(5):
            frame = source.read(WAIT_S)
            assert frame.seq == number
            assert same_as(number, frame.pixels)
            assert frame.quality is Quality.OK


def test_chunked_transfer():
    """HTTP/1.1 (RFC 9112, 7.1): the body in chunks whose edges fall anywhere."""

    def script(client: Client) -> None:
        client.handler.wfile.write(
            b"HTTP/1.1 200 OK\r\nTransfer-Encoding: chunked\r\n"
            b"Content-Type: multipart/x-mixed-replace;boundary=picture\r\n\r\n"
        )
        stream = b"".join(part(jpeg(number)) for number in range(3))
        for at in range(0, len(stream), 777):
            piece = stream[at : at + 777]
            client.send(b"%x\r\n%s\r\n" % (len(piece), piece))
        client.hang()

    with serving(script) as url, MjpegSource(url) as source:
        assert all(same_as(k, source.read(WAIT_S).pixels) for k in range(3))


def test_a_stall_is_told_in_time_and_reading_goes_on_after_it():
    go_on = threading.Event()

    def script(client: Client) -> None:
        client.begin()
        client.send(part(jpeg(0)) + part(jpeg(1))[:300])  # it stops in the middle of a picture
        go_on.wait(WAIT_S)
        client.send(part(jpeg(1))[300:])
        client.hang()

    with serving(script) as url, MjpegSource(url) as source:
        source.read(WAIT_S)
        for _ in range(2):
            began = time.monotonic()
            with pytest.raises(SourceStalled, match="no frame within") as caught:
                source.read(0.2)
            assert 0.15 < time.monotonic() - began < PROMPT_S
            one_line(caught.value)
        go_on.set()
        frame = source.read(WAIT_S)
        assert (frame.seq, same_as(1, frame.pixels)) == (1, True)


def test_closed_by_the_server_is_lost_and_stays_lost():
    def script(client: Client) -> None:
        client.begin()
        client.send(part(jpeg(0)) + part(jpeg(1))[:300])

    with serving(script) as url, MjpegSource(url) as source:
        source.read(WAIT_S)
        for _ in range(2):
            with pytest.raises(SourceLost, match="ended by the server") as caught:
                source.read(WAIT_S)
            one_line(caught.value)


def test_a_damaged_picture_keeps_its_row_and_the_next_is_sound():
    half = jpeg(1)[: len(jpeg(1)) // 2]

    def script(client: Client) -> None:
        client.begin()
        client.send(part(half) + part(jpeg(0)) + part(half) + part(b"junk") + part(jpeg(2)))
        client.send(b"--picture\r\n")
        client.hang()

    with serving(script) as url, MjpegSource(url) as source:
        frames = [source.read(WAIT_S) for _ in range(4)]
        assert [f.seq for f in frames] == [1, 2, 3, 4]  # not 0: no size was known yet
        assert [f.quality for f in frames] == [
            Quality.OK,
            Quality.DAMAGED,
            Quality.DAMAGED,
            Quality.OK,
        ]
        assert frames[1].pixels.shape == SHAPE
        assert frames[1].pixels.max() == 0
        assert same_as(2, frames[3].pixels)


def test_a_picture_sent_twice_is_a_duplicate():
    def script(client: Client) -> None:
        client.begin()
        for number in (0, 0, 0, 1, 0):
            client.send(part(jpeg(number)))
        client.hang()

    with serving(script) as url, MjpegSource(url) as source:
        flags = [source.read(WAIT_S).quality for _ in range(5)]
    assert [f is Quality.DUPLICATE for f in flags] == [False, True, True, False, False]


def test_what_nobody_reads_is_dropped_oldest_first_and_leaves_a_gap():
    sent = threading.Event()

    def script(client: Client) -> None:
        client.begin()
        for number in range(20):
            client.send(part(jpeg(number)))
        client.send(b"--picture--\r\n")
        sent.set()

    with serving(script) as url, MjpegSource(url) as source:
        assert sent.wait(WAIT_S)
        source._link._thread.join(WAIT_S)
        frames = read_to_end(source, SourceLost)
        assert [frame.seq for frame in frames] == list(range(12, 20))
        assert same_as(19, frames[-1].pixels)
        assert same_as(12, frames[0].pixels)


def test_closing_ends_the_thread_though_the_server_hangs():
    def script(client: Client) -> None:
        client.begin()
        client.send(part(jpeg(0)))
        client.hang()

    with serving(script) as url:
        source = MjpegSource(url)
        with source:
            source.read(WAIT_S)
            thread = source._link._thread
            began = time.monotonic()
        assert not thread.is_alive()
        assert time.monotonic() - began < PROMPT_S


@pytest.mark.parametrize(
    ("status", "kind", "error", "message"),
    [
        (200, "text/html", BadInput, "sends text/html, no MJPEG stream"),
        (200, "multipart/x-mixed-replace", BadInput, "no MJPEG stream"),
        (404, "text/html", BadInput, "answers 404"),
        (503, "text/html", SourceLost, "answers 503"),
    ],
)
def test_an_answer_that_is_no_stream(status: int, kind: str, error: type, message: str):
    def script(client: Client) -> None:
        client.handler.send_response(status)
        client.handler.send_header("Content-Type", kind)
        client.handler.end_headers()

    with serving(script) as url, pytest.raises(error, match=message) as caught:
        MjpegSource(url).__enter__()
    one_line(caught.value)


def test_a_server_that_never_answers_is_given_up():
    with serving(lambda client: client.hang()) as url:
        began = time.monotonic()
        with pytest.raises(SourceLost, match="no answer"):
            MjpegSource(url, connect_timeout_s=0.2).__enter__()
        assert time.monotonic() - began < PROMPT_S


def test_nobody_listens(unused_tcp_port: int):
    with pytest.raises(SourceLost, match="cannot be reached") as caught:
        MjpegSource(f"http://127.0.0.1:{unused_tcp_port}/x").__enter__()
    one_line(caught.value)


@pytest.mark.parametrize("url", ["http://", "http:///path", "ftp://host/x", "http://host:99999/"])
def test_an_address_that_cannot_be(url: str):
    with pytest.raises(BadInput, match="no address of a stream"):
        MjpegSource(url)


def test_name_and_password_are_sent_and_not_shown():
    """Basic authentication (RFC 7617)."""
    seen = []

    def script(client: Client) -> None:
        seen.append(client.handler.headers["Authorization"])
        client.begin()
        client.send(part(jpeg(0)))

    with serving(script) as url:
        with MjpegSource(url.replace("//", "//user:s%40fe@")) as source:
            source.read(WAIT_S)
            with pytest.raises(SourceLost) as caught:
                source.read(WAIT_S)
        assert "s%40fe" not in str(caught.value)
    assert base64.b64decode(seen[0].removeprefix("Basic ")) == b"user:s@fe"


def test_the_stamp_is_that_of_the_arrival():
    """The thread stamps with the clock it is given, before anybody asks for the frame."""
    times = iter(range(0, 10**9, 1000))
    sent = threading.Event()

    def script(client: Client) -> None:
        client.begin()
        client.send(part(jpeg(0)))
        sent.set()
        client.hang()

    with serving(script) as url, MjpegSource(url, clock=lambda: next(times)) as source:
        assert sent.wait(WAIT_S)
        frame = source.read(WAIT_S)
        assert frame.t_mono_ns < next(times)
        assert frame.t_utc_ns - frame.t_mono_ns == source._timebase.utc_ns(0)


def test_an_address_that_is_none_is_refused_without_its_password():
    for url in ("http://user:hu/sh@cam/x", "http://cam:port/", "http://"):
        with pytest.raises(BadInput, match="is no address") as raised:
            MjpegSource(url)
        assert "sh@" not in str(raised.value)
        assert "hu/" not in str(raised.value)


def test_a_part_that_is_no_jpeg_is_damaged():
    """Whatever else could be decoded: a stream of motion JPEG holds JPEG alone."""
    odd = cv2.imencode(".png", scene(1))[1].tobytes()

    def script(client: Client) -> None:
        client.begin()
        for data in (jpeg(0), odd, jpeg(2)):
            client.send(part(data))

    with serving(script) as url, MjpegSource(url) as source:
        flags = [source.read(WAIT_S).quality for _ in range(3)]
    assert flags == [Quality.OK, Quality.DAMAGED, Quality.OK]


@pytest.mark.parametrize("begin", [b"HTTP/1.1 200 OK\r\nX: ", b"HTTP/1.1 200 OK\r\nA: b\r\n", b""])
def test_a_head_that_drips_is_given_up_in_time(begin: bytes):
    """A byte each twentieth of a second never exceeds a time limit of single waits."""
    done = threading.Event()
    with socket.create_server(("127.0.0.1", 0)) as server:

        def drip() -> None:
            link, _ = server.accept()
            with link, contextlib.suppress(OSError):
                link.recv(4096)
                link.sendall(begin)
                while not done.wait(0.05):
                    link.sendall(b"h")

        thread = threading.Thread(target=drip, daemon=True)
        thread.start()
        url = f"http://127.0.0.1:{server.getsockname()[1]}/"
        begin_s = time.monotonic()
        with pytest.raises(SourceLost, match="no answer") as raised:
            MjpegSource(url, connect_timeout_s=0.3).__enter__()
        assert 0.25 < time.monotonic() - begin_s < 0.3 + PROMPT_S
        one_line(raised.value)
        done.set()
        thread.join(10.0)


def test_a_stream_that_falls_silent_is_lost():
    def script(client: Client) -> None:
        client.begin()
        client.send(part(jpeg(0)))
        client.hang()

    with serving(script) as url, MjpegSource(url, silence_s=0.2) as source:
        source.read(WAIT_S)
        with pytest.raises(SourceLost, match=r"silent for 0\.2 s"):
            source.read(WAIT_S)


@pytest.mark.parametrize("path", ["ä.cgi", "a b", "x?pwd=hu sh"])
def test_characters_no_address_can_hold(path: str):
    with serving(Client.begin) as url:
        with pytest.raises(BadInput, match="write them as %") as raised:
            MjpegSource(f"{url}{path}").__enter__()
        assert "hu" not in str(raised.value)
