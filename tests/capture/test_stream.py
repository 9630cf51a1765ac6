"""Streams through the video library. RTSP itself needs a server: not tested; HTTP stands in."""

from __future__ import annotations

import time
from pathlib import Path

import numpy as np
import pytest

from readout.capture.stream import StreamSource
from readout.errors import SourceLost
from tests.capture.streams import SHAPE, Client, scene, serving, write_avi
from tests.contracts import one_line


def test_frames_of_a_video_sent_over_http(tmp_path: Path):
    write_avi(tmp_path / "a.avi", range(4))
    data = (tmp_path / "a.avi").read_bytes()

    def script(client: Client) -> None:
        client.begin("video/x-msvideo")
        client.send(data)

    with serving(script) as url, StreamSource(url) as source:
        frames = [source.read(5.0) for _ in range(4)]
        with pytest.raises(SourceLost, match="no more frames") as caught:
            source.read(5.0)
        one_line(caught.value)
    assert [f.seq for f in frames] == [0, 1, 2, 3]
    for number, frame in enumerate(frames):
        assert frame.pixels.shape == SHAPE
        assert np.abs(frame.pixels - scene(number).astype(float)).mean() < 3


def test_a_silent_server_is_given_up_in_time():
    with serving(lambda client: client.hang()) as url:
        began = time.monotonic()
        with pytest.raises(SourceLost, match="cannot be opened") as caught:
            StreamSource(url, open_timeout_s=0.3).__enter__()
        assert time.monotonic() - began < 5.0
    one_line(caught.value)


def test_nobody_there(unused_tcp_port: int, capfd: pytest.CaptureFixture[str]):
    with pytest.raises(SourceLost, match="cannot be opened"):
        StreamSource(f"rtsp://127.0.0.1:{unused_tcp_port}/x").__enter__()
    assert capfd.readouterr().err == ""
