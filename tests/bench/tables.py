"""Rows and tables of the bench: every figure with its own standard error."""

from __future__ import annotations

import math
from collections import Counter
from collections.abc import Iterable
from itertools import chain

import numpy as np

from readout.model import F64
from tests.bench.gross import Tally, upper_limit
from tests.bench.kinds import Kind
from tests.bench.light import LIGHTS, Shifts
from tests.bench.phases import PHASES, QUIET_LIGHT, PhaseErrors
from tests.bench.placing import Placed
from tests.bench.rivals import Timed

PLACING_HEAD = (
    "kind", "seed", "frames", "aim", "rms/bound x", "rms/bound y", "rms x µpx", "rms y µpx",
    "bias x µpx", "bias y µpx", "within 1 sd", "within 2 sd", "flagged", "lost", "gross",
)  # fmt: skip


def rms_of(error: F64) -> tuple[float, float]:
    """Root mean square and its standard error, from the spread of the squares."""
    squares = error**2
    rms = math.sqrt(squares.mean())
    return rms, float(squares.std() / math.sqrt(squares.size) / (2 * rms)) if rms > 0 else 0.0


def aim_of(kind: Kind) -> str:
    """What a kind's rms is to stay below."""
    if kind.ratio is not None:
        return f"{kind.ratio:.2f} bound"
    return "" if kind.rms_px is None else f"{1e6 * kind.rms_px:.0f} µpx"


def placing_row(kind: Kind, seed: str, placed: Placed) -> tuple[str, ...]:
    """One kind and seed as text; statistics over all frames in which something was found."""
    found = placed.found
    error = placed.error_px[found]
    start = (kind.name, seed, str(found.size), aim_of(kind))
    counts = (
        str(int(placed.flagged[found].sum())),
        str(int((~found).sum())),
        str(int(placed.gross.sum())),
    )
    if len(error) < 2:
        return (*start, *([""] * 8), *counts)
    bound = kind.bound_px() if kind.has_bound else None
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
        *(
            f"{1e6 * value:+.0f} ±{1e6 * s:.0f}"
            for value, s in zip(error.mean(axis=0), se, strict=True)
        ),
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
    n = str(int(placed.found.sum()))
    return ("all with a bound", "all", n, *([""] * 7), *within(placed), "", "", "")


PHASES_HEAD = (
    "bias over 32 phases",
    "light",
    "frames",
    "largest x µpx",
    "largest y µpx",
    "se",
    "lost",
)


def phases_row(name: str, frames: int, errors: PhaseErrors, *, quiet: bool) -> tuple[str, ...]:
    """The largest mean error at any phase of either axis, and the usual error of such a mean."""
    start = (name, f"x{QUIET_LIGHT:.0f}" if quiet else "x1", str(PHASES * frames))
    if errors.lost == PHASES * frames:
        return (*start, "", "", "", str(errors.lost))
    largest = 1e6 * np.abs(errors.mean_px).max(axis=0)
    se = f"±{1e6 * float(np.median(errors.se_px)):.0f}"
    return (*start, *(f"{value:.0f}" for value in largest), se, str(errors.lost))


LIGHT_HEAD = (
    "shift with the light", "camera", "frames", "-30 % x µpx", "-30 % y µpx", "+30 % x µpx",
    "+30 % y µpx", "flagged", "lost",
)  # fmt: skip


def light_row(line: str, camera: str, frames: int, shifts: Shifts) -> tuple[str, ...]:
    """How far a change of light alone moves the place."""
    values = zip(1e6 * shifts.shift_px.ravel(), 1e6 * shifts.se_px.ravel(), strict=True)
    return (
        line,
        camera,
        str(len(LIGHTS) * frames),
        *(f"{value:+.0f} ±{se:.0f}" for value, se in values),
        str(shifts.flagged),
        str(shifts.lost),
    )


GROSS_HEAD = ("mixed frames", "frames", "good", "flagged", "no position", "gross unsaid", "at most")


def gross_rows(tally: Tally) -> list[tuple[str, ...]]:
    """A row a sort, and all together with the upper limit of the share of gross errors."""
    sorts = sorted({sort for sort, _ in tally})
    rows = [
        (sort, {outcome: n for (of, outcome), n in tally.items() if of == sort}) for sort in sorts
    ]
    whole: Counter[str] = Counter()
    for _, counts in rows:
        whole.update(counts)
    return [
        (
            sort,
            str(sum(counts.values())),
            *(str(counts.get(outcome, 0)) for outcome in ("good", "flagged", "none", "gross")),
            f"{100 * upper_limit(counts.get('gross', 0), sum(counts.values())):.3f} %",
        )
        for sort, counts in [*rows, ("all", dict(whole))]
    ]


TIME_HEAD = (
    "1280x720, 8 bit, one core",
    "turned",
    "frames",
    "ms least",
    "ms median",
    "rms x µpx",
    "rms y µpx",
)


def time_row(turn_deg: float, row: Timed) -> tuple[str, ...]:
    n = len(row.ms)
    known = row.error_px[np.isfinite(row.error_px).all(axis=1)]
    rms = ["", ""]
    if known.size:
        rms = [f"{1e6 * value:.0f} ±{1e6 * se:.0f}" for value, se in map(rms_of, known.T)]
    return (row.name, f"{turn_deg:g}°", str(n), f"{row.ms[0]:.2f}", f"{row.ms[n // 2]:.2f}", *rms)


def print_table(
    head: tuple[str, ...], rows: Iterable[tuple[str, ...]], *, markdown: bool = False
) -> None:
    """A table as its rows come, in columns or as Markdown."""
    widths = [max(len(text), 11) for text in head]
    widths[0] = 38
    if markdown:
        print("\n| " + " | ".join(head) + " |\n|" + "---|" * len(head))
    else:
        print()
        rows = chain([head], rows)
    for row in rows:
        if markdown:
            print("| " + " | ".join(row) + " |", flush=True)
        else:
            first, *others = row
            cells = [text.rjust(width) for text, width in zip(others, widths[1:], strict=True)]
            print(first.ljust(widths[0]), *cells, flush=True)
