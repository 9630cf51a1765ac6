"""Prints how often the standard error of an average covers the truth, the naive one beside it.

    python -m tests.bench.bench_average [--repeats N]

Series: first-order autoregressive, mean 0, variance 1, correlation rho from reading to reading.
An honest standard error covers 68.3 % of normal errors.
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
    print(f"{'rho':>4s} {'readings':>9s} {'covered':>9s} {'naive s/sqrt(n)':>16s}")
    for rho in (0.0, 0.5, 0.9):
        for n in (30, 100, 300, 1000):
            series = ar1(np.random.default_rng(SEED), rho, (repeats, n))
            error = np.abs(series.mean(axis=1))
            ours = np.array([standard_error(row) for row in series])
            naive = series.std(axis=1, ddof=1) / np.sqrt(n)
            covered, plain = np.mean(error < ours), np.mean(error < naive)
            print(f"{rho:4.1f} {n:9d} {covered:9.1%} {plain:16.1%}")


if __name__ == "__main__":
    main()
