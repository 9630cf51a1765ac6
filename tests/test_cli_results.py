"""Files that commands write: nothing that is there is lost, nothing that is read is replaced."""

from __future__ import annotations

import errno
import json
from collections.abc import Callable
from pathlib import Path
from typing import NamedTuple

import pytest

from readout.cli import results
from readout.cli.app import main
from readout.errors import NoRoom
from readout.files.frameset import write_frameset
from readout.logbook import FILE_NAME, Logbook, LogReader
from readout.simulation import simulate_frames
from tests.logbook.made import STARTED_UTC_NS, new_run, reading

SAMPLE = Path(__file__).parent.parent / "calib_images" / "bench_stage"


class Ended(NamedTuple):
    """What a command left behind."""

    status: int
    out: str
    err: str


Command = Callable[..., Ended]


@pytest.fixture
def readout(
    capsys: pytest.CaptureFixture[str], monkeypatch: pytest.MonkeyPatch, tmp_path: Path
) -> Command:
    monkeypatch.setenv("XDG_CONFIG_HOME", str(tmp_path / "config"))  # not the settings of a person

    def run(*arguments: object) -> Ended:
        monkeypatch.setattr("sys.argv", ["readout", *map(str, arguments)])
        with pytest.raises(SystemExit) as ended:
            main()
        return Ended(int(ended.value.code or 0), *capsys.readouterr())

    return run


@pytest.fixture
def frames(tmp_path: Path) -> Path:
    """Four simulated frames with their calibration; a folder of its own for each test."""
    folder = tmp_path / "frames"
    made = simulate_frames(frames=4, seed=4, width_px=320, height_px=240)
    write_frameset(folder, made, calibration=made.calibration, full_scale=made.full_scale)
    return folder


@pytest.fixture
def data(tmp_path: Path) -> Path:
    """A folder with one run of one reading."""
    path = tmp_path / "data" / FILE_NAME
    with Logbook(path) as log:
        log.start(new_run())
        log.append(reading(0), t_s=0.0)
        log.end(STARTED_UTC_NS + 10**9)
    return path.parent


def refused(ended: Ended, *words: str) -> None:
    assert (ended.status, ended.out) == (1, "")
    assert ended.err.count("\n") == 1
    for word in words:
        assert word in ended.err


def contents(folder: Path) -> dict[str, bytes]:
    return {path.name: path.read_bytes() for path in folder.iterdir()}


def test_a_table_that_holds_something_is_replaced_only_if_asked(
    readout: Command, frames: Path, tmp_path: Path
) -> None:
    kept = tmp_path / "keep.csv"
    kept.write_text("a night\n", "utf-8")
    measure = ("measure", frames, "--calibration", frames / "calibration.json", "--csv", kept)
    refused(readout(*measure), "keep.csv", "--overwrite")
    assert kept.read_text("utf-8") == "a night\n"
    assert readout(*measure, "--overwrite").status == 0
    assert len(kept.read_text("utf-8").splitlines()) == 1 + 4
    kept.write_text("", "utf-8")  # an empty one holds nothing to lose
    assert readout(*measure).status == 0


def test_a_measurement_that_cannot_begin_touches_no_file(
    readout: Command, frames: Path, tmp_path: Path
) -> None:
    kept, fresh = tmp_path / "keep.csv", tmp_path / "fresh.csv"
    kept.write_text("a night\n", "utf-8")
    calibration = ("--calibration", frames / "calibration.json")
    refused(readout("measure", "nothere", *calibration, "--csv", kept, "--overwrite"), "nothere")
    assert kept.read_text("utf-8") == "a night\n"
    refused(readout("measure", "nothere", *calibration, "--csv", fresh), "nothere")
    assert not fresh.exists()


@pytest.mark.parametrize("name", ["calibration.json", "frame_000001.png", "truth.csv"])
def test_what_is_measured_is_never_replaced(readout: Command, frames: Path, name: str) -> None:
    before = contents(frames)
    calibration = frames / "calibration.json"
    ended = readout(
        *("measure", frames, "--calibration", calibration, "--csv", frames / name, "--overwrite")
    )
    refused(ended, name, "another file")
    assert contents(frames) == before


def test_rows_of_two_kinds_do_not_mix_on_standard_output(readout: Command, frames: Path) -> None:
    ended = readout(
        *("measure", frames, "--calibration", frames / "calibration.json", "--json", "--csv", "-")
    )
    assert (ended.status, ended.out) == (2, "")
    assert "--csv" in ended.err


def test_a_full_disk_is_named_and_what_was_written_stays(
    readout: Command, frames: Path, tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    class Full(results.ReadingsWriter):
        """A writer on a disk with room for two rows."""

        rows = 0

        def write(self, reading: object) -> None:
            self.rows += 1
            if self.rows > 2:
                raise OSError(errno.ENOSPC, "No space left on device")
            super().write(reading)  # type: ignore[arg-type]  # as it came

    monkeypatch.setattr(results, "ReadingsWriter", Full)
    table = tmp_path / "angles.csv"
    ended = readout(
        *("measure", frames, "--calibration", frames / "calibration.json", "--csv", table)
    )
    refused(ended, str(table), "make room")
    assert "permissions" not in ended.err
    assert len(table.read_text("utf-8").splitlines()) == 1 + 2


def test_a_full_disk_under_standard_output_is_told_as_one(
    readout: Command, frames: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    def full(_row: object) -> None:
        raise OSError(errno.ENOSPC, "No space left on device")

    monkeypatch.setattr("readout.cli.measure.print_json", full)
    calibration = frames / "calibration.json"
    refused(readout("measure", frames, "--calibration", calibration, "--json"), "make room")


def test_a_calibration_is_replaced_only_if_asked(readout: Command, tmp_path: Path) -> None:
    out, page = tmp_path / "bench.json", tmp_path / "bench.html"
    out.write_text("{}", "utf-8")
    page.write_text("mine", "utf-8")
    refused(readout("calibrate", SAMPLE, "--out", out), "bench.json", "--overwrite")
    refused(readout("calibrate", SAMPLE, "--report", page), "bench.html", "--overwrite")
    before = contents(SAMPLE)
    inside = SAMPLE / "tilts.csv"
    refused(readout("calibrate", SAMPLE, "--out", inside, "--overwrite"), "tilts.csv")
    assert contents(SAMPLE) == before
    assert (out.read_text("utf-8"), page.read_text("utf-8")) == ("{}", "mine")
    assert readout("calibrate", SAMPLE, "--out", out, "--overwrite").status == 0
    assert json.loads(out.read_text("utf-8"))["n"] == 15


def test_an_export_is_replaced_only_if_asked(readout: Command, data: Path, tmp_path: Path) -> None:
    table, whole = tmp_path / "night.csv", tmp_path / "night.sqlite"
    for option, file in (("--out", table), ("--sqlite", whole)):
        export = ("runs", "export", 1, option, file, "--data", data)
        file.write_text("mine", "utf-8")
        refused(readout(*export), file.name, "--overwrite")
        assert file.read_text("utf-8") == "mine"
        assert readout(*export, "--overwrite") == (0, "", "")
        log = data / FILE_NAME
        refused(readout(*export[:4], log, "--data", data, "--overwrite"), FILE_NAME)
    assert len(table.read_text("utf-8").splitlines()) == 2
    for path in (whole, data / FILE_NAME):
        with LogReader(path) as reader:
            assert reader.run(1).readings == 1
    assert sorted(path.name for path in tmp_path.iterdir()) == ["data", table.name, whole.name]


def test_a_full_disk_is_told_apart_from_a_place_that_cannot_be_written() -> None:
    from readout.errors import BadInput, cannot_write

    full = cannot_write("a.csv", OSError(errno.ENOSPC, "No space left on device"))
    assert isinstance(full, NoRoom)
    assert isinstance(cannot_write("a.csv", PermissionError(errno.EACCES, "no")), BadInput)
