"""The uncertainty budget of a reading as a table: for a page and for a terminal."""

from __future__ import annotations

import math
from dataclasses import dataclass
from functools import cache

from jinja2 import Environment, PackageLoader, Template

from readout.angle.budget import Budget, Contribution, Standing
from readout.angle.budget_reading import TiltBudget
from readout.units import decimals_for, signed

NOTHING = "\N{EN DASH}"
NO_BREAK = "\N{NO-BREAK SPACE}"
HEADINGS = ("line", "from", "input", "u(X), ″", "share", "u(Y), ″", "share")


@dataclass(frozen=True, slots=True)
class Row:
    """One line in words; the cells of ``HEADINGS``, and the note beside."""

    cells: tuple[str, ...]
    note: str


@dataclass(frozen=True, slots=True)
class BudgetTable:
    """``lines``, then the ``sums``; ``remarks``: what a reader must know of both."""

    lines: tuple[Row, ...]
    sums: tuple[Row, ...]
    remarks: tuple[str, ...]


def budget_table(both: TiltBudget) -> BudgetTable:
    """The two budgets side by side, line by line."""
    x, y = ({line.name: (line, share) for line, share in _shared(one)} for one in (both.x, both.y))
    rows = []
    for name in dict.fromkeys([*x, *y]):
        first = (x.get(name) or y[name])[0]
        cells = [name, first.standing.value, _input(first)]
        for axis in (x, y):
            cells += _effect(*axis[name]) if name in axis else (NOTHING, NOTHING)
        rows.append(Row(tuple(cells), first.note))
    return BudgetTable(tuple(rows), _sums(both), _remarks(both))


def budget_text(both: TiltBudget) -> str:
    """The table in plain text, one line a row, columns aligned."""
    table = budget_table(both)
    rows = [HEADINGS, *(row.cells for row in (*table.lines, *table.sums))]
    notes = ["", *(row.note for row in (*table.lines, *table.sums))]
    wide = [max(len(row[i]) for row in rows) for i in range(len(HEADINGS))]
    text = []
    for row, note in zip(rows, notes, strict=True):
        cells = [
            cell.ljust(width) if i < 3 else cell.rjust(width)
            for i, (cell, width) in enumerate(zip(row, wide, strict=True))
        ]
        text.append(("  ".join(cells) + (f"  {note}" if note else "")).rstrip())
    return "\n".join([*text, *table.remarks]) + "\n"


def budget_html(both: TiltBudget) -> str:
    """The table as HTML, to stand in a page that brings its own style."""
    return _template().render(headings=HEADINGS, table=budget_table(both))


@cache
def _template() -> Template:
    loader = PackageLoader("readout.report")
    return Environment(loader=loader, autoescape=True).get_template("budget.html")


def _shared(budget: Budget) -> list[tuple[Contribution, float]]:
    return list(zip(budget.contributions, budget.shares, strict=True))


def _input(line: Contribution) -> str:
    """What is known of the input, in its own unit: its limits where it has some.

    What is an angle from the start is not said twice.
    """
    u = line.standard_uncertainty
    if u is None:
        return NOTHING
    unit = {"arcsec": "″", "1": ""}.get(line.unit, f" {line.unit}")
    if line.half_width is not None:
        return f"±{line.half_width:.3g}{unit}, {line.distribution.value}"
    known = "" if line.unit == "arcsec" else f"{u:.3g}{unit}, "
    return known + line.distribution.value


def _effect(line: Contribution, share: float) -> tuple[str, str]:
    """Contribution in arc-seconds to two figures, and its share of the variance in per cent."""
    if line.standard_uncertainty is None:
        return NOTHING, NOTHING
    u = abs(line.signed_u)
    return _two_figures(u), f"{100 * share:.1f}{NO_BREAK}%"


def _two_figures(u: float) -> str:
    return f"{u:.{decimals_for(u)}f}" if u > 0 else "0"


def _sums(both: TiltBudget) -> tuple[Row, ...]:
    def row(name: str, words: list[str], note: str = "") -> Row:
        return Row((name, "", "", words[0], "", words[1], ""), note)

    budgets = (both.x, both.y)
    level = f"{100 * both.x.level:g}{NO_BREAK}%"
    return (
        row("combined", [_two_figures(one.combined_u) for one in budgets], "standard uncertainty"),
        row("degrees of freedom", [_freedom(one.effective_freedom) for one in budgets]),
        row(f"factor for {level}", [f"{one.coverage_factor:.2f}" for one in budgets]),
        row(f"expanded, {level}", [_two_figures(one.expanded_u) for one in budgets]),
        row(
            "angle",
            [signed(one.value, decimals_for(one.combined_u)) for one in budgets],
            "from zero" if both.x.quantity.endswith("zero") else "from the optical axis",
        ),
    )


def _freedom(freedom: float) -> str:
    """Beyond a thousand, Student's t is the normal distribution to three figures."""
    if math.isinf(freedom) or freedom > 1000:
        return "\N{INFINITY}"
    return f"{math.floor(freedom)}"


def _remarks(both: TiltBudget) -> tuple[str, ...]:
    remarks = []
    for standing, words in (
        (Standing.NOT_STATED, "not stated, and missing in the sum"),
        (Standing.DEFAULT, "usual values, not measured here"),
    ):
        names = dict.fromkeys([*both.x.named(standing), *both.y.named(standing)])
        if names:
            remarks.append(f"{words}: {', '.join(names)}")
    return tuple(remarks)
