"""A floor is kept in a file and comes back as it was."""

from pathlib import Path

import numpy as np
import pytest

from readout.errors import BadInput
from readout.files.floor_file import load_floor, save_floor
from readout.stability import floor_of_null_test


def test_it_comes_back_as_it_was(tmp_path: Path) -> None:
    rng = np.random.default_rng(1)
    t = np.arange(600.0)
    made = floor_of_null_test(t, *rng.standard_normal((2, 600)), created_utc="2026-12-01T09:00:00Z")
    path = tmp_path / "kept" / "floor.json"
    save_floor(path, made)
    assert load_floor(path) == made


@pytest.mark.parametrize(
    ("content", "line"),
    [
        (None, "does not exist"),
        (b"{", "floor.json cannot be used: it holds no JSON"),
        (b'{"schema": "readout.calibration/1"}', "floor.json cannot be used: this is no floor"),
    ],
)
def test_what_is_no_floor(tmp_path: Path, content: bytes | None, line: str) -> None:
    path = tmp_path / "floor.json"
    if content is not None:
        path.write_bytes(content)
    with pytest.raises(BadInput, match=line) as refused:
        load_floor(path)
    assert "\n" not in str(refused.value)
