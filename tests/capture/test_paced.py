"""A recording at its own speed, on a clock that only moves when told to."""

from __future__ import annotations

from pathlib import Path

import pytest

from readout.capture.folder import FolderSource
from readout.capture.paced import PacedSource
from readout.errors import SourceEnded, SourceStalled
from readout.files.pictures import write_picture
from tests.capture.fakes import FakeClock
from tests.capture.streams import scene

T_S = [0.0, 0.5, 0.6, 4.0]


@pytest.fixture
def folder(tmp_path: Path) -> Path:
    rows = []
    for number, t_s in enumerate(T_S):
        write_picture(tmp_path / f"{number}.png", scene(number))
        rows.append(f"{number}.png,{t_s}")
    (tmp_path / "times.csv").write_text("file,t_s\n" + "\n".join(rows), encoding="utf-8")
    return tmp_path


def test_frames_come_at_their_own_times(folder: Path):
    clock = FakeClock()
    with PacedSource(FolderSource(folder), clock=clock, sleep=clock.sleep) as source:
        start_ns = clock.now_ns
        for number, t_s in enumerate(T_S):
            frame = source.read(10.0)
            assert clock.now_ns - start_ns == pytest.approx(t_s * 1e9, abs=2)
            assert frame.t_mono_ns - start_ns == pytest.approx(t_s * 1e9, abs=2)
            assert frame.name == f"{number}.png"
        with pytest.raises(SourceEnded):
            source.read(10.0)
    assert not source.live


def test_a_frame_due_later_than_the_wait_is_kept(folder: Path):
    clock = FakeClock()
    with PacedSource(FolderSource(folder), clock=clock, sleep=clock.sleep) as source:
        source.read(1.0)
        for _ in range(2):
            with pytest.raises(SourceStalled):
                source.read(0.2)
        frame = source.read(0.2)
        assert (frame.seq, frame.name) == (1, "1.png")
        assert sum(clock.slept_s) == pytest.approx(0.5)


def test_a_late_reader_gets_every_frame_without_a_wait(folder: Path):
    clock = FakeClock()
    with PacedSource(FolderSource(folder), clock=clock, sleep=clock.sleep) as source:
        first = source.read(1.0)
        clock.now_ns += 60 * 10**9
        later = [source.read(1.0) for _ in T_S[1:]]
    assert clock.slept_s == []
    assert [f.seq for f in later] == [1, 2, 3]
    due_s = [(f.t_mono_ns - first.t_mono_ns) * 1e-9 for f in later]
    assert due_s == pytest.approx(T_S[1:])
