"""A table is read by the names of its columns, or refused in one line."""

from pathlib import Path

import pytest

from readout.errors import BadInput
from readout.files.csv_table import csv_rows, table_of


def test_rows_by_the_names_of_their_columns(tmp_path: Path) -> None:
    path = tmp_path / "a.csv"
    # A byte-order mark, blanks in the header, an empty line, a short row, the header again.
    path.write_bytes("\ufeffstep , x\r\nlow,1\r\n\r\nhigh\r\nstep , x\r\nlow,2\r\n".encode())
    with csv_rows(path) as (names, rows):
        assert names == ["step", "x"]
        assert [line for line, _ in rows][:2] == [2, 4]
    first, second, *_ = table_of(path)
    assert first == {"step": "low", "x": "1"}
    assert second == {"step": "high", "x": ""}


def test_a_header_that_comes_again_is_no_row(tmp_path: Path) -> None:
    path = tmp_path / "a.csv"
    path.write_text("t_s,x\n1,2\nt_s,x\n3,4\n", "utf-8")
    assert [row["t_s"] for row in table_of(path)] == ["1", "3"]


@pytest.mark.parametrize(
    ("content", "line"),
    [(None, "does not exist"), (b"", "is empty"), (b"\xff\xfe\x00", "cannot be read as CSV")],
)
def test_what_is_no_table(tmp_path: Path, content: bytes | None, line: str) -> None:
    path = tmp_path / "a.csv"
    if content is not None:
        path.write_bytes(content)
    with pytest.raises(BadInput, match=line) as refused:
        table_of(path)
    assert "\n" not in str(refused.value)


def test_what_is_missing_is_named(tmp_path: Path) -> None:
    path = tmp_path / "a.csv"
    path.write_text("t_s,x\n1,2\n", "utf-8")
    with pytest.raises(BadInput, match=r"a.csv has no column step nor y: name it in the header"):
        table_of(path, needs=("step", "x", "y"))
    with pytest.raises(BadInput, match=r"cannot read .*: check the name"):
        table_of(tmp_path)
