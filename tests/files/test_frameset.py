"""A folder of frames with their truth, written and read back."""

from __future__ import annotations

import csv
from collections.abc import Iterator
from pathlib import Path

import numpy as np
import pytest

from readout.errors import BadInput
from readout.files.calibration_file import load_calibration
from readout.files.frameset import write_frameset
from readout.files.pictures import read_picture
from readout.model import Pixels
from readout.simulation import SimulatedFrames, Truth, simulate_frames


def small(bits: int = 8) -> SimulatedFrames:
    return simulate_frames(frames=3, width_px=64, height_px=48, bits=bits, seed=5)


def write(folder: Path, frames: SimulatedFrames) -> int:
    return write_frameset(
        folder, frames, calibration=frames.calibration, full_scale=frames.full_scale
    )


@pytest.mark.parametrize("bits", [8, 10, 12, 16])
def test_what_is_written_is_read_back(tmp_path: Path, bits: int) -> None:
    frames, folder = small(bits), tmp_path / "above" / "set"
    assert write(folder, frames) == 3
    with (folder / "truth.csv").open(encoding="utf-8", newline="") as file:
        rows = list(csv.DictReader(file))
    assert list(rows[0]) == ["file", "t_s", "x_px", "y_px", "x_arcsec", "y_arcsec"]
    assert len(rows) == 3
    for row, (pixels, truth) in zip(rows, frames, strict=True):
        read, full_scale = read_picture(folder / row["file"])
        np.testing.assert_array_equal(read, pixels)
        assert read.dtype == pixels.dtype
        assert full_scale == 2**bits - 1
        numbers = [float(row[name]) for name in list(row)[1:]]
        assert numbers == [
            truth.t_s,
            truth.x_px,
            truth.y_px,
            truth.x_arcsec,
            truth.y_arcsec,
        ]
    assert load_calibration(folder / "calibration.json") == frames.calibration


def test_the_same_seed_writes_the_same_bytes(tmp_path: Path) -> None:
    for name in ("a", "b"):
        write(tmp_path / name, small())
    names = sorted(path.name for path in (tmp_path / "a").iterdir())
    assert len(names) == 5
    for name in names:
        assert (tmp_path / "a" / name).read_bytes() == (tmp_path / "b" / name).read_bytes()


def test_a_folder_with_anything_in_it_is_refused_and_left_alone(tmp_path: Path) -> None:
    kept = tmp_path / "notes.txt"
    kept.write_text("mine")
    with pytest.raises(BadInput, match="not empty: name a new folder, nothing was written"):
        write(tmp_path, small())
    assert [path.name for path in tmp_path.iterdir()] == ["notes.txt"]
    assert kept.read_text() == "mine"


def test_a_file_in_place_of_the_folder_is_refused(tmp_path: Path) -> None:
    file = tmp_path / "set"
    file.write_text("mine")
    with pytest.raises(BadInput, match="is a file: name a new or empty folder"):
        write(file, small())
    with pytest.raises(BadInput, match="choose another place"):
        write(file / "below", small())
    assert file.read_text() == "mine"


def test_an_interrupted_set_has_a_row_for_every_picture(tmp_path: Path) -> None:
    class Interrupted(Exception):
        pass

    def two_frames_and_no_more() -> Iterator[tuple[Pixels, Truth]]:
        frames = iter(small())
        yield next(frames)
        yield next(frames)
        raise Interrupted

    whole = small()
    with pytest.raises(Interrupted):
        write_frameset(
            tmp_path / "set",
            two_frames_and_no_more(),
            calibration=whole.calibration,
            full_scale=whole.full_scale,
        )
    pictures = sorted(path.name for path in (tmp_path / "set").glob("*.png"))
    rows = (tmp_path / "set" / "truth.csv").read_text().splitlines()[1:]
    assert [row.split(",")[0] for row in rows] == pictures
    assert len(pictures) == 2


def test_progress_is_told_after_each_frame(tmp_path: Path) -> None:
    told: list[int] = []
    frames = small()
    write_frameset(
        tmp_path / "set",
        frames,
        calibration=frames.calibration,
        full_scale=frames.full_scale,
        on_frame=told.append,
    )
    assert told == [1, 2, 3]
