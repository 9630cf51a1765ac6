"""Prints how well, how honestly and how fast the crosshair is placed, on named kinds of frames.

    python -m tests.bench.bench_sighting [--frames N] [--kinds NAME...] [--seeds 0 1 2]
                                         [--processes 2] [--tracked] [--markdown]

Every figure carries its own standard error or the number behind it; all seeds are printed.
"""

from __future__ import annotations

import argparse
import sys
from concurrent.futures import ProcessPoolExecutor

import cv2

from tests.bench.kinds import KINDS
from tests.bench.placing import Placed, pooled, run_kind
from tests.bench.tables import PLACING_HEAD, honesty_row, placing_row, print_table


def chosen(names: list[str] | None) -> list[str]:
    """Names of kinds that begin with any of ``names``; all without."""
    if not names:
        return list(KINDS)
    found = [kind for kind in KINDS if kind.startswith(tuple(names))]
    if not found:
        sys.exit(f"no kind begins with any of {names}: choose from {', '.join(KINDS)}")
    return found


def main() -> None:
    parser = argparse.ArgumentParser(description=__doc__.splitlines()[0])
    parser.add_argument("--frames", type=int, default=1400, help="of each kind and seed")
    parser.add_argument("--kinds", nargs="+", metavar="NAME", help="beginnings of their names")
    parser.add_argument("--seeds", nargs="+", type=int, default=[0, 1, 2])
    parser.add_argument("--processes", type=int, default=2)
    parser.add_argument("--tracked", action="store_true", help="each sighting from the one before")
    parser.add_argument("--markdown", action="store_true")
    options = parser.parse_args()
    rows, all_placed = [], []
    with ProcessPoolExecutor(
        options.processes, initializer=cv2.setNumThreads, initargs=(1,)
    ) as pool:
        for name in chosen(options.kinds):
            by_seed: list[Placed] = run_kind(
                pool, name, options.seeds, options.frames, options.tracked
            )
            rows += [
                placing_row(KINDS[name], str(seed), placed)
                for seed, placed in zip(options.seeds, by_seed, strict=True)
            ]
            whole = pooled(by_seed)
            rows.append(placing_row(KINDS[name], "all", whole))
            if KINDS[name].ratio is not None:
                all_placed.append(whole)
            if not options.markdown:
                print_table(
                    PLACING_HEAD if len(rows) == len(by_seed) + 1 else None,
                    rows[-len(by_seed) - 1 :],
                )
    if all_placed:
        rows.append(honesty_row(pooled(all_placed)))
        if not options.markdown:
            print_table(None, rows[-1:])
    if options.markdown:
        print_table(PLACING_HEAD, rows, markdown=True)


if __name__ == "__main__":
    main()
