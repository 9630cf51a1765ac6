"""A folder of pictures as a source."""

from __future__ import annotations

import os
import shutil
from pathlib import Path

import numpy as np
import pytest

from readout.capture.folder import FolderSource
from readout.errors import BadInput
from readout.files.pictures import write_picture
from readout.model import Frame, Quality
from tests.capture.streams import SHAPE, scene
from tests.contracts import one_line, read_to_end

NAMES = ["a1.png", "a10.png", "a2.png", "b.tif"]  # sorted by name, as characters


@pytest.fixture
def folder(tmp_path: Path) -> Path:
    """Four pictures with modification times 0, 0.5, 1.5 and 1.0 s after 2001-09-09, and a note."""
    for number, name in enumerate(NAMES):
        write_picture(tmp_path / name, scene(number))
        t_ns = 10**18 + [0, 500_000_000, 1_500_000_000, 1_000_000_000][number]
        os.utime(tmp_path / name, ns=(t_ns, t_ns))
    (tmp_path / "note.txt").write_text("not a picture")
    (tmp_path / "c.png").mkdir()
    return tmp_path


def read_all(folder: Path) -> list[Frame]:
    with FolderSource(folder) as source:
        frames = read_to_end(source)
        assert len(source) == len(frames)
    return frames


def test_pictures_in_the_order_of_their_names(folder: Path):
    frames = read_all(folder)
    assert [frame.name for frame in frames] == NAMES
    for number, frame in enumerate(frames):
        np.testing.assert_array_equal(frame.pixels, scene(number))


def test_times_from_the_files_never_fall(folder: Path):
    frames = read_all(folder)
    assert [frame.t_mono_ns for frame in frames] == [0, 500_000_000, 1_500_000_000, 1_500_000_000]
    assert frames[0].t_utc_ns == 10**18


@pytest.mark.parametrize("table", ["times.csv", "truth.csv"])
def test_times_from_a_table(folder: Path, table: str):
    rows = [f"{0.1 * k + 7},{name},0" for k, name in enumerate(NAMES)]
    (folder / table).write_text("t_s,file,other\n" + "\n".join(reversed(rows)), encoding="utf-8")
    times = [frame.t_mono_ns for frame in read_all(folder)]
    assert times == pytest.approx([0, 1e8, 2e8, 3e8], abs=1)


def test_a_table_of_other_things_is_left_alone(folder: Path):
    (folder / "truth.csv").write_text("file,x_px\na1.png,3\n", encoding="utf-8")
    assert [frame.t_mono_ns for frame in read_all(folder)][1] == 500_000_000


@pytest.mark.parametrize(
    ("rows", "message"),
    [
        ("a1.png,0\n", "no row for a10.png"),
        ("a1.png,soon\n", "t_s of a1.png is no number"),
        ("a1.png,1e300\n", "t_s of a1.png is no number of seconds"),
        ("a1.png,5\na10.png,4\na2.png,4\nb.tif,4\n", "a10.png comes after a1.png by name"),
        ("a1.png\n", "t_s of a1.png is no number"),
        ("a1.png,0\xff\n", "cannot be read as CSV"),
    ],
)
def test_a_table_with_holes_is_refused(folder: Path, rows: str, message: str):
    (folder / "times.csv").write_text("file,t_s\n" + rows, encoding="latin-1")
    with pytest.raises(BadInput, match=message) as caught:
        FolderSource(folder).__enter__()
    one_line(caught.value)


@pytest.mark.parametrize("damaged", ["a1.png", "a2.png"])
def test_a_damaged_picture_keeps_its_row_and_says_so(folder: Path, damaged: str):
    (folder / damaged).write_bytes(b"")
    frames = read_all(folder)
    assert [frame.name for frame in frames] == NAMES
    for frame in frames:
        assert frame.pixels.shape == SHAPE
        assert frame.quality == (Quality.DAMAGED if frame.name == damaged else Quality.OK)
    (black,) = [frame for frame in frames if frame.name == damaged]
    assert black.pixels.max() == 0


def test_sixteen_bits_and_their_full_scale(tmp_path: Path):
    pixels = scene(1).astype(np.uint16) * 8
    write_picture(tmp_path / "a.png", pixels, full_scale=4095)
    (tmp_path / "b.png").write_bytes(b"broken")
    sound, broken = read_all(tmp_path)
    np.testing.assert_array_equal(sound.pixels, pixels)
    assert sound.full_scale == broken.full_scale == 4095
    assert broken.pixels.dtype == np.uint16


def test_refused_at_opening(folder: Path, tmp_path: Path):
    cases = {tmp_path / "nothere": "does not exist", folder / "note.txt": "is a file"}
    empty = tmp_path / "c.png"
    cases[empty] = "holds no picture"
    all_broken = tmp_path / "broken"
    all_broken.mkdir()
    for name in NAMES:
        (all_broken / name).write_bytes(b"broken")
    cases[all_broken] = r"a1\.png is no picture"
    for path, message in cases.items():
        with pytest.raises(BadInput, match=message) as caught:
            FolderSource(path).__enter__()
        assert str(path) in str(caught.value)
        one_line(caught.value)


def test_a_file_that_vanishes_while_reading_is_damaged(folder: Path):
    with FolderSource(folder) as source:
        source.read(0.0)
        shutil.move(folder / "a10.png", folder / "gone")
        assert source.read(0.0).quality is Quality.DAMAGED
        assert source.read(0.0).quality is Quality.OK
