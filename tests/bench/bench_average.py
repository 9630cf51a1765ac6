"""Prints how often the standard error of an average covers the truth, the naive one beside it.

    python -m tests.bench.bench_average [--repeats N]

Series: first-order autoregressive, mean 0, variance 1, correlation rho from reading to reading.
An honest standard error covers 68.3 % of normal errors. The history is ten windows or 300
readings, as of ten seconds at 30 a second.
"""

from __future__ import annotations

import argparse

import numpy as np

from readout.instrument.averaging import standard_error
from tests.instrument.test_averaging import SEED, ar1


def main() -> None:
    parser = argparse.ArgumentParser(description=__doc__.splitlines()[0])
    parser.add_argument("--repeats", type=int, default=2000)
    repeats = parser.parse_args().repeats
    print(f"seed {SEED}, {repeats} series each; binomial sd {100 * np.sqrt(0.22 / repeats):.1f} %")
    print(f"{'rho':>4s} {'readings':>9s} {'covered':>9s} {'window alone':>13s} {'s/sqrt(n)':>11s}")
    for rho in (0.0, 0.5, 0.9):
        for n in (15, 30, 60, 100, 300, 1000):
            series = ar1(np.random.default_rng(SEED), rho, (repeats, max(300, 10 * n)))
            windows = series[:, -n:]
            error = np.abs(windows.mean(axis=1))
            ours = np.array([standard_error(row[-n:], row) for row in series])
            alone = np.array([standard_error(row) for row in windows])
            naive = windows.std(axis=1, ddof=1) / np.sqrt(n)
            covered = [np.mean(error < claimed) for claimed in (ours, alone, naive)]
            print(f"{rho:4.1f} {n:9d} {covered[0]:9.1%} {covered[1]:13.1%} {covered[2]:11.1%}")


if __name__ == "__main__":
    main()
