"""``kill -9`` at a random moment: nothing that was acknowledged is lost.

One log goes through all the kills, so that each finds the file as the one before it left it.
"""

from __future__ import annotations

import random
import subprocess
import sys
import threading
from contextlib import closing
from pathlib import Path

import pytest

from readout.logbook import FILE_NAME, Logbook, LogReader
from readout.logbook.connection import open_reading
from readout.logbook.schema import LEVELS_S
from readout.logbook.statements import CRASHED
from tests.logbook.made import reading

ROOT = Path(__file__).parents[2]
SEED = 20261201


@pytest.mark.parametrize("kills", [3, pytest.param(20, marks=pytest.mark.slow)])
@pytest.mark.timeout(240)
def test_nothing_acknowledged_is_lost(tmp_path: Path, kills: int) -> None:
    print(f"seed {SEED}")
    rng = random.Random(SEED)
    path = tmp_path / FILE_NAME
    promised = [
        record_and_kill(path, acknowledgements=rng.randint(1, 8), pause_s=rng.uniform(0.0, 0.3))
        for _ in range(kills)
    ]
    assert [run_id for run_id, _ in promised] == list(range(1, kills + 1))
    with Logbook(path):
        pass
    for run_id, seq in promised:
        check_run(path, run_id, seq)
    with closing(open_reading(path)) as connection:
        assert connection.execute("PRAGMA integrity_check").fetchone() == ("ok",)
        assert connection.execute("PRAGMA foreign_key_check").fetchall() == []


def record_and_kill(path: Path, *, acknowledgements: int, pause_s: float) -> tuple[int, int]:
    """The run and the last number promised by a process killed a while after so many promises."""
    with subprocess.Popen(
        [sys.executable, "-m", "tests.logbook.writing_child", str(path)],
        cwd=ROOT,
        stdout=subprocess.PIPE,
        text=True,
    ) as child:
        assert child.stdout is not None
        lines = [child.stdout.readline() for _ in range(acknowledgements)]
        threading.Event().wait(pause_s)
        child.kill()  # SIGKILL
        lines += child.stdout.readlines()
    assert child.returncode == -9
    complete = [line.split() for line in lines if line.endswith("\n")]
    return int(complete[-1][0]), int(complete[-1][1])


def check_run(path: Path, run_id: int, promised: int) -> None:
    with LogReader(path) as reader:
        run = reader.run(run_id)
        rows = [row for chunk in reader.readings(run_id) for row in chunk]
    assert len(rows) > promised
    assert [row.seq for row in rows] == list(range(len(rows)))
    assert [row.x_arcsec for row in rows] == [reading(k).x_arcsec for k in range(len(rows))]
    assert (run.ending, run.readings, run.duration_s) == (CRASHED, len(rows), rows[-1].t_us * 1e-6)
    assert run.ended_utc_ns == run.started_utc_ns + 1000 * rows[-1].t_us
    with closing(open_reading(path)) as connection:
        sums = connection.execute(
            "SELECT level_s, sum(n) FROM summary WHERE run_id = ? GROUP BY level_s", (run_id,)
        ).fetchall()
    assert sums == [(level_s, len(rows)) for level_s in LEVELS_S]
