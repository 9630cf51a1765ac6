"""What the log costs and how fast it answers: ``python -m tests.bench.bench_logbook``.

Prints the length of commits at live rates, then a night in fast time: a run of a million readings
written, listed, plotted and exported. ``--day`` adds a day at 60 readings a second (5.2 million,
half a gigabyte in the folder for temporary files).
"""

from __future__ import annotations

import argparse
import shutil
import statistics
import tempfile
import time
from collections.abc import Callable, Iterator
from pathlib import Path

import numpy as np

from readout.errors import NotRecorded
from readout.logbook import FILE_NAME, Logbook, LogReader
from readout.logbook.export import csv_of, ndjson_of
from readout.logbook.writer import CAPACITY
from tests.logbook.made import new_run, reading

SEED = 20261205
NIGHT, NIGHT_PER_S = 1_000_000, 30
DAY, DAY_PER_S = 24 * 3600 * 60, 60
REPEATS = 7


def values(n: int) -> Iterator[tuple[float, ...]]:
    """Numbers that need all their bits, as measured ones do; made in pieces."""
    rng = np.random.default_rng(SEED)
    for begin in range(0, n, 10_000):
        yield from rng.normal(100.0, 1.0, (min(10_000, n - begin), 8)).tolist()


def write(path: Path, n: int, per_s: int) -> float:
    """A run of ``n`` readings as fast as they can be written; seconds it took."""
    begin_s = time.perf_counter()
    with Logbook(path) as log:
        log.start(new_run(title=f"{n} readings"))
        for seq, (x, y, x_sd, y_sd, x_u, y_u, x_px, y_px) in enumerate(values(n)):
            each = reading(
                seq, x, y, x_sd_arcsec=x_sd, y_sd_arcsec=y_sd, x_u_arcsec=x_u, y_u_arcsec=y_u,
                x_px=x_px, y_px=y_px,
            )  # fmt: skip
            log.append(each, t_s=seq / per_s)
            if seq % (CAPACITY // 2) == 0:
                log.flush()  # not faster than the queue takes it
        log.end(0)
    return time.perf_counter() - begin_s


def median_ms(work: Callable[[], object]) -> str:
    """Median and longest of some runs."""
    spent_ms = []
    for _ in range(REPEATS):
        begin_s = time.perf_counter()
        work()
        spent_ms.append(1e3 * (time.perf_counter() - begin_s))
    return f"median {statistics.median(spent_ms):7.1f} ms, longest {max(spent_ms):7.1f} ms"


def report_commits(folder: Path) -> None:
    """Commits of a quarter of a second, as they come live, one after the other."""
    for per_s in (60, 200, 500):
        with Logbook(folder / f"{per_s}.sqlite", commit_every_s=3600.0) as log:
            log.start(new_run())
            spent_ms = []
            for commit in range(400):
                for k in range(per_s // 4):
                    seq = commit * (per_s // 4) + k
                    log.append(reading(seq), t_s=seq / per_s)
                begin_s = time.perf_counter()
                log.flush()
                spent_ms.append(1e3 * (time.perf_counter() - begin_s))
        spent_ms.sort()
        print(
            f"commit of {per_s // 4:3} readings ({per_s}/s): median {spent_ms[200]:5.2f} ms, "
            f"99 % within {spent_ms[395]:6.2f} ms, longest {spent_ms[-1]:6.2f} ms"
        )


def report_append() -> None:
    """What the acquisition's thread spends on a reading."""
    with tempfile.TemporaryDirectory() as folder, Logbook(Path(folder) / FILE_NAME) as log:
        log.start(new_run())
        each = [reading(seq) for seq in range(5000)]
        begin_s = time.perf_counter()
        for one in each:
            log.append(one, t_s=one.t_s)
        print(f"append: {1e6 * (time.perf_counter() - begin_s) / len(each):.1f} µs a reading")


def report_run(folder: Path, n: int, per_s: int, *, export: bool) -> None:
    path = folder / f"{n}.sqlite"
    try:
        took_s = write(path, n, per_s)
    except NotRecorded as error:
        print(error)
        return
    print(f"\nrun of {n} readings, {per_s}/s, {n / per_s / 3600:.1f} h")
    print(f"  written in {took_s:.1f} s, {path.stat().st_size / n:.2f} bytes a reading")
    with LogReader(path) as reader:
        length_s = reader.run(1).duration_s
        print(f"  listed               {median_ms(reader.runs)}")
        print(f"  plotted, all         {median_ms(lambda: reader.series(1))}")
        for part_s in (3600.0, 1200.0, 900.0, 60.0):
            begin_s = length_s / 3
            text = median_ms(lambda b=begin_s, p=part_s: reader.series(1, b, b + p))
            print(f"  plotted, {part_s:6.0f} s    {text}")
        if export:
            for name, pieces in (("CSV", csv_of), ("NDJSON", ndjson_of)):
                begin_s = time.perf_counter()
                size = sum(len(piece) for piece in pieces(reader, 1))
                took_s = time.perf_counter() - begin_s
                print(f"  exported, {name:6}     {took_s:.1f} s, {size / 1e6:.0f} MB")


def main() -> None:
    parser = argparse.ArgumentParser(description=__doc__)
    parser.add_argument("--day", action="store_true", help="a day of 5.2 million readings too")
    day = parser.parse_args().day
    print(f"seed {SEED}")
    folder = Path(tempfile.mkdtemp())
    try:
        report_append()
        report_commits(folder)
        report_run(folder, NIGHT, NIGHT_PER_S, export=True)
        if day:
            report_run(folder, DAY, DAY_PER_S, export=False)
    finally:
        shutil.rmtree(folder)


if __name__ == "__main__":
    main()
