"""``readout runs``: for people, for programs, and in one line for what goes wrong."""

from __future__ import annotations

import csv
import json
import sqlite3
from collections.abc import Callable
from contextlib import closing
from pathlib import Path

import pytest

from readout.cli.app import main
from readout.logbook import FILE_NAME, Logbook, LogReader, Spread
from readout.rows import reading_row
from tests.logbook.made import STARTED_UTC_NS, new_run, reading, unmeasured

Command = Callable[..., tuple[int, str, str]]


@pytest.fixture
def runs(capsys: pytest.CaptureFixture[str], monkeypatch: pytest.MonkeyPatch) -> Command:
    """``readout runs ARGUMENTS``: exit status, standard output, standard error."""

    def run(*arguments: object) -> tuple[int, str, str]:
        monkeypatch.setattr("sys.argv", ["readout", "runs", *map(str, arguments)])
        with pytest.raises(SystemExit) as ended:
            main()
        out, err = capsys.readouterr()
        return int(ended.value.code or 0), out, err

    return run


@pytest.fixture
def data(tmp_path: Path) -> Path:
    """A folder with three runs: every reading, means, and one that a crash has ended."""
    path = tmp_path / "data" / FILE_NAME
    with Logbook(path) as log:
        log.start(new_run(title="every reading", note="by the window"))
        log.note_calibration(0, "made-1", '{"id": "made-1"}')
        for each in (reading(0), unmeasured(1), reading(2)):
            log.append(each, t_s=each.t_s)
        log.note_event(STARTED_UTC_NS, "lost", "the cable was pulled")
        log.end(STARTED_UTC_NS + 10**9)
        log.start(new_run(title="means", every_s=10.0))
        for k in range(1500):
            log.append(reading(k), t_s=10.0 * k + 5.0, spread=Spread(100, 0.5, 0.25))
        log.end(STARTED_UTC_NS + 15_000 * 10**9)
        log.start(new_run(title="cut off"))
        log.append(reading(7), t_s=83.0)
    Logbook(path).close()
    return path.parent


def test_the_list_for_people_has_a_line_a_run(runs: Command, data: Path) -> None:
    status, out, err = runs("list", "--data", data)
    assert (status, err) == (0, "")
    head, *lines = out.splitlines()
    assert head.split()[:2] == ["id", "begun"]
    assert [line.split()[0] for line in lines] == ["3", "2", "1"]
    assert "1 min 23 s" in lines[0]
    assert lines[0].endswith("cut off  (ended by a crash)")
    assert "4 h 09 min" in lines[1]
    assert "10 s" in lines[1]
    assert lines[2].endswith("every reading")
    assert "2023-11-14 22:13:20" in lines[2]


def test_the_list_for_programs(runs: Command, data: Path) -> None:
    status, out, _ = runs("list", "--json", "--data", data)
    found = [json.loads(line) for line in out.splitlines()]
    assert status == 0
    assert [(r["id"], r["title"], r["every_s"], r["readings"]) for r in found] == [
        (3, "cut off", 0.0, 1),
        (2, "means", 10.0, 1500),
        (1, "every reading", 0.0, 3),
    ]
    assert [r["ending"] for r in found] == ["ended by a crash", "stopped", "stopped"]


def test_one_run_is_shown_with_what_belongs_to_it(runs: Command, data: Path) -> None:
    status, out, _ = runs("show", 1, "--data", data)
    assert status == 0
    for words in ("every reading", "by the window", "made-1 from reading 0", "the cable was pull"):
        assert words in out
    status, out, _ = runs("show", 1, "--json", "--data", data)
    [shown] = [json.loads(line) for line in out.splitlines()]
    assert shown["calibrations"] == [{"from_seq": 0, "calibration": {"id": "made-1"}}]


def test_export_to_standard_output_and_to_a_file(runs: Command, data: Path, tmp_path: Path) -> None:
    status, table, err = runs("export", 1, "--data", data)
    assert (status, err) == (0, "")
    assert [row["quality"] for row in csv.DictReader(table.splitlines())] == ["", "no_image", ""]
    file = tmp_path / "run.csv"
    assert runs("export", 1, "--out", file, "--data", data) == (0, "", "")
    assert file.read_text("utf-8") == table
    status, lines, _ = runs("export", 1, "--format", "ndjson", "--data", data)
    assert [json.loads(line) for line in lines.splitlines()] == [
        reading_row(each) | {"signs": "unproven"}  # the calibration kept does not say otherwise
        for each in (reading(0), unmeasured(1), reading(2))
    ]
    status, table, _ = runs("export", 2, "--data", data)
    rows = list(csv.DictReader(table.splitlines()))
    assert len(rows) == 1500
    assert rows[0]["n"] == "100"


def test_one_run_is_handed_over_as_a_file(runs: Command, data: Path, tmp_path: Path) -> None:
    file = tmp_path / "handed.sqlite"
    assert runs("export", 2, "--sqlite", file, "--data", data) == (0, "", "")
    with LogReader(file) as reader:
        assert [run.title for run in reader.runs()] == ["means"]
    with closing(sqlite3.connect(file)) as connection:  # plain SQL, without this program
        answer = connection.execute("SELECT count(*), min(t_s), max(n) FROM reading").fetchone()
    assert answer == (1500, 5.0, 100)


@pytest.mark.parametrize(
    ("arguments", "words"),
    [
        (("show", 9), "there is no run 9"),
        (("export", 9), "there is no run 9"),
        (("export", 1, "--out", "no such folder/x.csv"), "choose another place"),
        (("export", 9, "--sqlite", "new.sqlite"), "there is no run 9"),
    ],
)
def test_what_cannot_be_done_is_one_line(
    runs: Command,
    data: Path,
    tmp_path: Path,
    monkeypatch: pytest.MonkeyPatch,
    arguments: tuple[object, ...],
    words: str,
) -> None:
    monkeypatch.chdir(tmp_path)
    status, out, err = runs(*arguments, "--data", data)
    assert (status, out) == (1, "")
    assert words in err
    assert err.startswith("readout: ")
    assert err.count("\n") == 1


def test_no_log_yet(runs: Command, tmp_path: Path) -> None:
    status, out, err = runs("list", "--data", tmp_path)
    assert (status, out) == (1, "")
    assert "there is no logbook" in err


@pytest.mark.parametrize(
    "arguments", [("show",), ("show", "first"), ("export", 1, "--format", "xlsx"), ("forget", 1)]
)
def test_wrong_usage(runs: Command, data: Path, arguments: tuple[object, ...]) -> None:
    status, out, _ = runs(*arguments)
    assert (status, out) == (2, "")
