"""``readout drift``."""

from __future__ import annotations

import math
from pathlib import Path
from typing import TYPE_CHECKING, Annotated

import typer

from readout.cli.options import JsonOption
from readout.cli.say import print_json, print_line, progress
from readout.units import decimals_for, signed

if TYPE_CHECKING:
    from readout.stability import RecordDrift

EXAMPLE = "Example: `readout drift angles.csv --floor floor.json`"
FloorOption = Annotated[
    Path | None,
    typer.Option(metavar="FILE", help="The instrument's floor, as `readout check floor` keeps it."),
]


def drift(
    file: Annotated[
        Path, typer.Argument(metavar="FILE.csv", help="Readings, as `measure --csv` writes them.")
    ],
    floor: FloorOption = None,
    json: JsonOption = False,
) -> None:
    """Say how a record drifts, how it scatters, and what averaging would gain.

    Columns t_s or t_utc, x_arcsec and y_arcsec are needed. Rows with a word in quality are left
    out. With the instrument's floor it says too which drift may be claimed: one smaller than the
    instrument makes by itself is none.
    """
    from readout.files.floor_file import load_floor
    from readout.files.tilt_series_file import read_tilt_series
    from readout.stability import claims, drift_document, drift_of

    against = None if floor is None else load_floor(floor)
    with progress("rows") as tell:
        found = drift_of(read_tilt_series(file, tell))
    if json:
        print_json(drift_document(found, against))
        return
    for line in _lines(found):
        print_line(line)
    if against is not None:
        print_line("")
        for sentence in claims(found.change, against):
            print_line(sentence)


def _lines(found: RecordDrift) -> list[str]:
    from readout.stability.floor import spell_time

    left_out = f", {found.flagged} with a caution left out" if found.flagged else ""
    gaps = f"{found.gaps} longer than three steps" if found.gaps else "none"
    longest = f", the longest {spell_time(found.longest_gap_s)}" if found.gaps else ""
    x, y = found.x, found.y
    over, step = spell_time(found.over_s), f"{found.interval_s:.3g} s"
    lines = [
        f"rows           {found.n} over {over}, one every {step}{left_out}",
        f"gaps           {gaps}{longest}",
        "",
        f"{'':<14} {'X':>22} {'Y':>22}",
    ]
    rates = (_within(axis.rate_arcsec_per_h, axis.rate_sd_arcsec_per_h) for axis in (x, y))
    lines.append(_row("drift, ″/h", *rates))
    lines.append(_row("mean, ″", *(_plain(a.mean_arcsec, a.sd_arcsec, sign=True) for a in (x, y))))
    lines.append(_row("scatter, ″", *(_plain(a.sd_arcsec, a.sd_arcsec) for a in (x, y))))
    lines.append(_row("range, ″", *(_plain(a.range_arcsec, a.sd_arcsec) for a in (x, y))))
    return lines + _allan_lines(found)


def _allan_lines(found: RecordDrift) -> list[str]:
    from readout.stability import drift_document

    allan = drift_document(found)["allan"]
    if not allan["tau_s"]:
        return []
    lines = ["", "Allan deviation, ″, with the interval that holds the true one with 68 %", ""]
    for k, tau_s in enumerate(allan["tau_s"]):
        cells = []
        for axis in ("x", "y"):
            middle, low, high = (allan[f"{axis}{part}_arcsec"][k] for part in ("", "_lo", "_hi"))
            if middle is None:
                cells.append(_NOTHING)
                continue
            decimals = decimals_for(middle)
            cells.append(f"{middle:.{decimals}f} ({low:.{decimals}f} … {high:.{decimals}f})")
        lines.append(_row(f"{tau_s:.4g} s", *cells))
    return lines


_NOTHING = "\N{EN DASH}"


def _row(name: str, x: str, y: str) -> str:
    return f"{name:<14} {x:>22} {y:>22}"


def _within(value: float, sd: float) -> str:
    if not math.isfinite(value):
        return _NOTHING
    decimals = decimals_for(sd)
    return f"{signed(value, decimals)} ± {sd:.{decimals}f}"


def _plain(value: float, sd: float, *, sign: bool = False) -> str:
    if not math.isfinite(value):
        return _NOTHING
    decimals = decimals_for(sd)
    return signed(value, decimals) if sign else f"{value:.{decimals}f}"


command = drift
