"""Rows that the others contradict, found by leaving each out in turn.

A row's own residual hides its error, because the fit leans towards it. Left out, the row is
compared with what all others say of it: for the whitened residuals e of the row and its block H of
the hat matrix the sum of squares falls by e (I - H)^-1 e, and the row is off by (I - H)^-1 e
(R. D. Cook and S. Weisberg, Residuals and Influence in Regression, 1982, 2.2). Whether that is
more than chance is judged by the uncertainties stated, where the other rows agree with them, else
by the scatter of the others; and since as many rows are looked at, each is allowed only its part
of the risk (Bonferroni).
"""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np
from scipy.special import chdtrc, chdtri, fdtrc, ndtr, stdtrit

from readout.angle.both_sides import BothSides
from readout.least_squares import linear_least_squares
from readout.model import F64

RISK = 0.001
"""chance that any row of a good set is named"""
DOUBTFUL = 0.05
"""residuals this unlikely to be so large by chance are not taken for chance"""
GROSS_SHARE = 0.2
"""an error of this share of the whole range of tilts is a slip, not an uncertainty"""
LEAST_REST = 1e-6
"""where the others say less than this share of a row, nothing checks it"""


@dataclass(frozen=True, slots=True)
class Agreement:
    """How well the rows agree with each other, once what they share has taken its part.

    ``chi_square`` and ``freedom`` of the residuals, in the uncertainties stated. ``whitened``
    (n, 2), ``design`` (n, 2, p + k) and ``cofactor`` are those of the fit with each shared input
    as an unknown that is 0 ± 1 in its own standard uncertainty.
    """

    chi_square: float
    freedom: int
    whitened: F64
    design: F64
    cofactor: F64


def agreement(fit: BothSides) -> Agreement:
    """The residuals of ``fit`` after the shared inputs have explained what they can."""
    used, p, k = fit.used, len(fit.parameters), fit.shared.shape[2]
    design = np.concatenate([fit.design, -fit.shared], axis=2)
    prior = np.eye(p + k)[p:]
    target = np.concatenate([-fit.whitened[used], np.zeros(k)])
    step = linear_least_squares(np.vstack([design[used], prior]), target)
    left = fit.whitened + design @ step.parameters
    chi_square = float(np.sum(left**2) + np.sum(step.parameters[p:] ** 2))
    return Agreement(chi_square, fit.freedom, left, design, step.cofactor)


def widening(chi_square: float, freedom: int) -> float:
    """Factor on a claimed sd: 1 where the residuals are as large as their uncertainties allow.

    Else the Birge ratio (R. T. Birge, Phys. Rev. 40 (1932) 207) times Student's factor for a
    scatter known from ``freedom`` values.
    """
    if freedom == 0 or chi_square <= chdtri(freedom, DOUBTFUL):
        return 1.0
    return math.sqrt(chi_square / freedom) * float(stdtrit(freedom, ndtr(1.0)))


@dataclass(frozen=True, slots=True)
class OffRow:
    """One row against all others: ``off_arcsec`` (2,) what the others would have it be, less what
    is said of it, NaN in an axis that is unknown; ``off_sd`` the same in standard uncertainties.
    """

    row: int
    off_arcsec: F64
    off_sd: float


def contradicted_rows(fit: BothSides, agreed: Agreement) -> list[OffRow]:
    """The rows that the others contradict, the worst first."""
    n = len(fit.used)
    found = []
    for row in range(n):
        values = int(fit.used[row].sum())
        rest = agreed.freedom - values
        if values == 0 or rest < 1:
            continue
        chosen = fit.used[row]
        block = agreed.design[row][chosen] @ agreed.cofactor @ agreed.design[row][chosen].T
        remainder = np.eye(values) - block
        if np.linalg.eigvalsh(remainder).min() < LEAST_REST:
            continue
        own = agreed.whitened[row][chosen]
        off = np.linalg.solve(remainder, own)
        fall = float(own @ off)
        others = max(0.0, agreed.chi_square - fall)
        if others <= chdtri(rest, DOUBTFUL):
            scatter, chance = 1.0, float(chdtrc(values, fall))
        else:
            scatter = (others / rest) ** 0.5
            chance = float(fdtrc(values, rest, fall / values / scatter**2))
        if chance < RISK / n:
            whole = np.zeros(2)
            whole[chosen] = off
            off_arcsec = np.where(chosen, fit.root[row] @ whole, np.nan)
            found.append(OffRow(row, off_arcsec, (fall / values) ** 0.5 / scatter))
    return sorted(found, key=lambda item: -item.off_sd)


def slip(off_rows: list[OffRow], known_arcsec: F64) -> tuple[int, int] | None:
    """Number and axis of the worst row, if it is off by a good part of the whole range of tilts.

    ``known_arcsec`` (n, 2), NaN where empty.
    """
    for item in off_rows:
        others = np.delete(known_arcsec, item.row, axis=0)
        reach = max(
            (float(np.ptp(c[np.isfinite(c)])) for c in others.T if np.isfinite(c).any()),
            default=0.0,
        )
        axis = int(np.nanargmax(np.abs(item.off_arcsec)))
        if abs(item.off_arcsec[axis]) > GROSS_SHARE * reach > 0:
            return item.row, axis
    return None
