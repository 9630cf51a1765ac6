"""What every implementation of one interface must do, whatever it is made of."""

from __future__ import annotations

import itertools
import time

import numpy as np
import pytest

from readout.capture.source import Source
from readout.errors import SourceEnded, SourceLost
from readout.model import Frame

PROMPT_S = 2.0
"""A call that answers at once stays below this on any machine."""


def source_contract(source: Source, *, frames: int = 3, timeout_s: float = 5.0) -> list[Frame]:
    """Hold a fresh source against the interface; returns the frames read.

    Closed, it refuses at once; open, it gives frames in order with rising time; a folder or
    video ends and stays ended; closed again, it refuses again.
    """
    refuses_when_closed(source)
    with source as opened:
        assert opened is source
        got = [source.read(timeout_s) for _ in range(frames)]
        if not source.live:
            got += read_to_end(source)
            with pytest.raises(SourceEnded) as caught:
                source.read(timeout_s)
            one_line(caught.value)
    refuses_when_closed(source)
    assert [frame.seq for frame in got] == list(range(len(got)))
    for frame in got:
        sound_frame(frame)
    for earlier, later in itertools.pairwise(got):
        assert later.t_mono_ns >= earlier.t_mono_ns
        assert later.t_utc_ns - earlier.t_utc_ns == later.t_mono_ns - earlier.t_mono_ns
    return got


def read_to_end(
    source: Source, until: type[Exception] = SourceEnded, *, timeout_s: float = 5.0
) -> list[Frame]:
    """Every frame an open source still gives before it says ``until``."""
    frames: list[Frame] = []
    while len(frames) < 100_000:
        try:
            frames.append(source.read(timeout_s))
        except until:
            return frames
    raise AssertionError("the source gives frames without end")


def sound_frame(frame: Frame) -> None:
    """Grey pixels in rows, 8 or 16 bits, none beyond the full scale."""
    assert frame.pixels.ndim == 2
    assert min(frame.pixels.shape) > 1
    assert frame.pixels.dtype in (np.uint8, np.uint16)
    assert frame.pixels.flags.c_contiguous
    assert frame.pixels.max() <= frame.full_scale <= np.iinfo(frame.pixels.dtype).max


def refuses_when_closed(source: Source) -> None:
    began = time.monotonic()
    with pytest.raises(SourceLost) as caught:
        source.read(30.0)
    one_line(caught.value)
    assert time.monotonic() - began < PROMPT_S


def one_line(error: Exception) -> None:
    """A message for a person: one line, with something to do after the colon."""
    text = str(error)
    assert text
    assert "\n" not in text
