"""Rows and tables of the bench: every figure with its own standard error."""

from __future__ import annotations

import math

import numpy as np

from readout.model import F64
from tests.bench.kinds import Kind
from tests.bench.placing import Placed

PLACING_HEAD = (
    "kind", "seed", "frames", "rms/bound x", "rms/bound y", "rms x µpx", "rms y µpx",
    "bias x µpx", "bias y µpx", "within 1 sd", "within 2 sd", "flagged", "lost", "gross",
)  # fmt: skip


def rms_of(error: F64) -> tuple[float, float]:
    """Root mean square and its standard error, from the spread of the squares."""
    squares = error**2
    rms = math.sqrt(squares.mean())
    return rms, float(squares.std() / math.sqrt(squares.size) / (2 * rms)) if rms > 0 else 0.0


def placing_row(kind: Kind, seed: str, placed: Placed) -> tuple[str, ...]:
    """One kind and seed as text; statistics over all frames in which something was found."""
    found = placed.found
    error = placed.error_px[found]
    start = (kind.name, seed, str(found.size))
    counts = (
        str(int(placed.flagged[found].sum())),
        str(int((~found).sum())),
        str(int(placed.gross.sum())),
    )
    if len(error) < 2:
        return (*start, *([""] * 8), *counts)
    bound = kind.bound_px() if kind.light is None and kind.finish is None else None
    rms = [rms_of(error[:, axis]) for axis in (0, 1)]
    ratio = [""] * 2
    if bound is not None:
        ratio = [
            f"{value / least:.3f} ±{se / least:.3f}"
            for (value, se), least in zip(rms, bound, strict=True)
        ]
    se = error.std(axis=0) / math.sqrt(len(error))
    return (
        *start,
        *ratio,
        *(f"{1e6 * value:.0f} ±{1e6 * se:.0f}" for value, se in rms),
        *(f"{1e6 * value:+.0f} ±{1e6 * s:.0f}" for value, s in zip(error.mean(axis=0), se)),
        *within(placed),
        *counts,
    )


def within(placed: Placed) -> tuple[str, str]:
    """Shares of the errors within one and two claimed sd."""
    z = np.abs(placed.error_px[placed.found] / placed.sd_px[placed.found])
    return tuple(
        f"{100 * share:.1f} ±{100 * math.sqrt(max(share * (1 - share), 1 / z.size) / z.size):.1f} %"
        for share in (np.mean(z <= 1), np.mean(z <= 2))
    )


def honesty_row(placed: Placed) -> tuple[str, ...]:
    """All kinds with a bound together."""
    n = str(len(placed.error_px))
    return ("all with a bound", "all", n, *([""] * 6), *within(placed), "", "", "")


def print_table(
    head: tuple[str, ...] | None, rows: list[tuple[str, ...]], *, markdown: bool = False
) -> None:
    """A table in fixed columns, or as Markdown."""
    if markdown:
        for row in (head or (), ["---"] * len(head or ()), *rows):
            print("| " + " | ".join(row) + " |")
        return
    widths = (28, 4, 6, 13, 13, 12, 12, 12, 12, 11, 11, 7, 6, 6)
    for row in ([head] if head else []) + rows:
        first, *others = row
        cells = [text.rjust(width) for text, width in zip(others, widths[1:], strict=True)]
        print(first.ljust(widths[0]), *cells, flush=True)
