"""Prints how well, how honestly and how fast the crosshair is placed, on named kinds of frames.

    python -m tests.bench.bench_sighting [--only PART...] [--frames N] [--kinds NAME...]
        [--seeds 0 1 2] [--processes 2] [--tracked] [--markdown]

Parts: kinds, phases, light, gross, time. Every figure carries its own standard error or the number
behind it, every seed is printed. `kinds`: rms against the Cramér-Rao bound where there is one, over
all frames in which something was found; µpx: a millionth of a pixel; gross: wrong by more than
0.1 px without a word.
"""

from __future__ import annotations

import argparse
import multiprocessing
import os
import sys
from collections.abc import Iterator
from concurrent.futures import Executor, ProcessPoolExecutor

import cv2

from readout.model import Target
from tests.bench import gross, light, phases, placing, rivals, tables
from tests.bench.placing import KINDS

PARTS = ("kinds", "phases", "light", "gross", "time")
PHASE_FRAMES = 64
LIGHT_FRAMES = 100
MIXED_FRAMES = 5001
TIMED_FRAMES = 40


def chosen(names: list[str] | None) -> list[str]:
    """Names of kinds that begin with any of ``names``; all without."""
    if not names:
        return list(KINDS)
    found = [kind for kind in KINDS if kind.startswith(tuple(names))]
    if not found:
        sys.exit(f"no kind begins with any of {names}: choose from {', '.join(KINDS)}")
    return found


def kinds_rows(pool: Executor, options: argparse.Namespace) -> Iterator[tuple[str, ...]]:
    """Each kind and seed, each kind, and the honesty of all with a bound together."""
    bounded = []
    for name in chosen(options.kinds):
        if KINDS[name].target not in set(Target):
            print(f"{name}: left out, there is no method for a {KINDS[name].target}")
            continue
        by_seed = placing.run_kind(pool, name, options.seeds, options.frames, options.tracked)
        whole = placing.pooled(by_seed)
        for seed, placed in zip(options.seeds, by_seed, strict=True):
            yield tables.placing_row(KINDS[name], str(seed), placed)
        yield tables.placing_row(KINDS[name], "all", whole)
        if KINDS[name].has_bound:
            bounded.append(whole)
    if bounded:
        yield tables.honesty_row(placing.pooled(bounded))


def phases_rows(pool: Executor, frames: int) -> Iterator[tuple[str, ...]]:
    for name in phases.RETICLES:
        for quiet, each in ((False, frames), (True, max(frames // 8, 2))):
            errors = phases.phase_errors(pool, name, each, quiet=quiet)
            yield tables.phases_row(name, each, errors, quiet=quiet)


def light_rows(pool: Executor, frames: int) -> Iterator[tuple[str, ...]]:
    for line, camera, shifts in light.all_shifts(pool, frames):
        yield tables.light_row(line, camera, frames, shifts)


def time_rows(pool: Executor, frames: int) -> Iterator[tuple[str, ...]]:
    for turn_deg in rivals.TURN_DEG:
        for row in pool.submit(rivals.compare, frames, turn_deg).result():
            yield tables.time_row(turn_deg, row)


def options() -> argparse.Namespace:
    parser = argparse.ArgumentParser(description=__doc__.splitlines()[0])
    parser.add_argument("--only", nargs="+", choices=PARTS, metavar="PART", help=", ".join(PARTS))
    parser.add_argument("--frames", type=int, default=1400, help="of each kind and seed")
    parser.add_argument("--kinds", nargs="+", metavar="NAME", help="beginnings of their names")
    parser.add_argument("--seeds", nargs="+", type=int, default=[0, 1, 2])
    parser.add_argument("--processes", type=int, default=2)
    parser.add_argument("--tracked", action="store_true", help="each sighting from the one before")
    parser.add_argument("--markdown", action="store_true")
    parser.add_argument("--mixed", type=int, default=MIXED_FRAMES, help="mixed frames in all")
    chosen_options = parser.parse_args()
    chosen_options.only = chosen_options.only or (["kinds"] if chosen_options.kinds else PARTS)
    return chosen_options


def main() -> None:
    given = options()
    # read by numpy where it is first imported, in the processes that are started below
    os.environ["OPENBLAS_NUM_THREADS"] = "1"
    print(
        f"seeds {given.seeds}, phases {phases.SEED}, time {rivals.SEED}; OpenCV {cv2.__version__}"
    )
    with ProcessPoolExecutor(
        given.processes,
        multiprocessing.get_context("spawn"),
        initializer=cv2.setNumThreads,
        initargs=(1,),
    ) as pool:
        if "kinds" in given.only:
            rows = kinds_rows(pool, given)
            tables.print_table(tables.PLACING_HEAD, rows, markdown=given.markdown)
        if "phases" in given.only:
            rows = phases_rows(pool, PHASE_FRAMES)
            tables.print_table(tables.PHASES_HEAD, rows, markdown=given.markdown)
        if "light" in given.only:
            rows = light_rows(pool, LIGHT_FRAMES)
            tables.print_table(tables.LIGHT_HEAD, rows, markdown=given.markdown)
        if "gross" in given.only:
            tally, wrong = gross.run_mixed(pool, given.seeds, given.mixed)
            rows = iter(tables.gross_rows(tally))
            tables.print_table(tables.GROSS_HEAD, rows, markdown=given.markdown)
            print(*wrong, sep="\n", end="\n" if wrong else "", file=sys.stderr)
        if "time" in given.only:
            rows = time_rows(pool, TIMED_FRAMES)
            tables.print_table(tables.TIME_HEAD, rows, markdown=given.markdown)


if __name__ == "__main__":
    main()
