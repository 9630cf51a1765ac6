"""Observing in a child process: its errors, its silence, its death, and ours."""

from __future__ import annotations

import os
import signal
import subprocess
import sys
import time
from pathlib import Path

import numpy as np
import pytest

from readout.errors import BadInput, SourceLost, SourceStalled
from readout.files.preparation_file import CameraKnowledge, save_knowledge
from readout.instrument.acquisition import Acquisition, State
from readout.instrument.child import ChildObserver
from readout.instrument.kept_frame import KeptFor
from readout.instrument.observer import Observer
from readout.model import Observation, Quality, Target
from readout.sighting.prepare import Preparation
from tests.instrument.fakes import HEIGHT_PX, WIDTH_PX, open_driver

ROOT = Path(__file__).parents[2]


def child(manner: str, **bounds: float) -> ChildObserver:
    return ChildObserver(
        f"usb:{manner}", target=Target.CROSSHAIR, open_source=open_driver, **bounds
    )


def next_of(observer: ChildObserver, within_s: float = 20.0) -> Observation:
    deadline_s = time.monotonic() + within_s
    while time.monotonic() < deadline_s:
        try:
            return observer.observe(0.2)
        except SourceStalled:
            continue
    pytest.fail("no observation from the child")


def pid_of(observer: ChildObserver) -> int:
    assert observer._process is not None
    assert observer._process.pid is not None
    return observer._process.pid


def gone(pid: int) -> bool:
    try:
        os.kill(pid, 0)
    except ProcessLookupError:
        return True
    stat = Path(f"/proc/{pid}/stat")
    return stat.exists() and stat.read_text().rpartition(")")[2].split()[0] == "Z"


def test_observations_come_in_order_then_the_loss_by_its_own_words() -> None:
    with child("frames") as observer:
        seen = [next_of(observer) for _ in range(10)]
        with pytest.raises(SourceLost, match="the cable was pulled"):
            next_of(observer)
    assert [o.seq for o in seen] == list(range(10))
    assert (seen[0].width_px, seen[0].height_px) == (WIDTH_PX, HEIGHT_PX)
    assert Quality.NO_IMAGE in seen[0].sighting.quality  # even pictures hold no crosshair


def test_what_cannot_be_opened_says_so() -> None:
    with child("absent") as observer, pytest.raises(SourceLost, match="not connected"):
        next_of(observer)


def test_opening_never_blocks_the_caller() -> None:
    begin_s = time.monotonic()
    with child("hang-in-open") as observer, pytest.raises(SourceStalled):
        observer.observe(0.05)
    # spawning, one short wait, and ending a child deaf to everything but SIGKILL (3 x 0.3 s)
    assert time.monotonic() - begin_s < 5.0


@pytest.mark.parametrize(
    ("manner", "bounds"),
    [("hang", {"silent_at_most_s": 0.5}), ("hang-in-open", {"open_within_s": 1.0})],
)
def test_a_hanging_driver_is_given_up_and_killed(manner: str, bounds: dict[str, float]) -> None:
    with child(manner, **bounds) as observer:
        pid = pid_of(observer)
        with pytest.raises(SourceLost, match="has not answered"):
            while True:
                next_of(observer)
        begin_s = time.monotonic()
    assert time.monotonic() - begin_s < 2.0
    assert gone(pid)


def test_what_is_known_of_the_camera_is_read_in_the_child_and_anew_on_a_word(
    tmp_path: Path,
) -> None:
    kept = KeptFor(tmp_path, "usb:slow")
    path = kept.path_for((WIDTH_PX, HEIGHT_PX), 255)
    observer = ChildObserver(
        "usb:slow", target=Target.CROSSHAIR, open_source=open_driver, preparing=kept
    )
    with observer:
        assert next_of(observer).prepared is None
        save_knowledge(path, CameraKnowledge(Preparation(), 255, "now"))
        observer.prepare_anew()
        prepared = [next_of(observer).prepared for _ in range(20)]
        assert prepared[-1] == "now"
        path.write_bytes(b"torn")
        observer.prepare_anew()
        with pytest.raises(BadInput, match="delete"):
            while True:
                next_of(observer)
    observer.prepare_anew()  # closed: nobody is left to tell


def test_a_crash_is_a_loss() -> None:
    with child("crash") as observer, pytest.raises(SourceLost, match="has died"):
        while True:
            next_of(observer)


@pytest.mark.skipif(sys.platform == "win32", reason="sends SIGINT")
def test_ctrl_c_in_the_terminal_does_not_reach_it(capfd: pytest.CaptureFixture[str]) -> None:
    with child("slow") as observer:
        pid = pid_of(observer)
        os.kill(pid, signal.SIGINT)  # while it starts
        next_of(observer)
        os.kill(pid, signal.SIGINT)
        assert next_of(observer).seq == 1
    assert capfd.readouterr().err == ""


def test_a_lost_camera_is_opened_in_a_new_process_and_seq_goes_on() -> None:
    """Three children one after the other, each giving ten frames before its cable is pulled."""
    seqs: list[int] = []
    states: list[State] = []

    def take(observation: Observation, observer: Observer) -> None:
        del observer
        seqs.append(observation.seq)
        if len(seqs) == 25:
            acquisition.stop()

    acquisition = Acquisition(
        lambda: child("frames"),
        on_observation=take,
        on_state=lambda state, _: states.append(state),
        wait=lambda _: False,
    )
    acquisition.run()
    assert seqs == list(range(25))
    assert states == [
        State.OPENING,
        *(State.MEASURING, State.LOST),
        *(State.MEASURING, State.LOST),
        State.MEASURING,
    ]


def test_a_picture_crosses_when_asked_for() -> None:
    from concurrent.futures import ThreadPoolExecutor

    with child("slow") as observer, ThreadPoolExecutor(1) as pool:
        next_of(observer)
        asked = pool.submit(observer.picture, 10.0)
        while not asked.done():
            next_of(observer)
        picture = asked.result()
    assert picture is not None
    assert picture.frame.pixels.shape == (HEIGHT_PX, WIDTH_PX)
    assert np.all(picture.frame.pixels == picture.frame.seq)  # as the driver fills them
    assert observer.picture(0.1) is None  # closed


PARENT = """
import time
from readout.model import Target
from readout.instrument.acquisition import Acquisition, State
from readout.instrument.child import ChildObserver
from readout.instrument.observer import Observer
from readout.errors import SourceStalled
from tests.instrument.fakes import open_driver

if __name__ == "__main__":
    with ChildObserver("usb:hang", target=Target.CROSSHAIR, open_source=open_driver) as observer:
        while True:
            try:
                observer.observe(0.2)
                break
            except SourceStalled:
                continue
        print(observer._process.pid, flush=True)
        time.sleep(60)
"""


@pytest.mark.skipif(sys.platform == "win32", reason="kills with SIGKILL")
def test_a_child_inside_a_hanging_driver_ends_with_its_parent(tmp_path: Path) -> None:
    script = tmp_path / "parent.py"
    script.write_text(PARENT, "utf-8")
    environment = {**os.environ, "PYTHONPATH": str(ROOT)}
    with subprocess.Popen(
        [sys.executable, str(script)], stdout=subprocess.PIPE, text=True, env=environment
    ) as parent:
        assert parent.stdout is not None
        pid = int(parent.stdout.readline())
        assert not gone(pid)
        parent.send_signal(signal.SIGKILL)
        parent.wait(5.0)
    deadline_s = time.monotonic() + 5.0
    while not gone(pid) and time.monotonic() < deadline_s:
        time.sleep(0.02)
    assert gone(pid)
