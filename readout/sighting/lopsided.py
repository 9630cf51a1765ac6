"""Whether the profile found is lopsided: what is left of it differs between its two sides.

The same error on both sides of the line (a response curve, a reticle line that is no bar) leaves
its place alone; one that differs may be a shift in disguise. So the residuals of the folded
profile are compared with their mirror image about the line.
"""

from __future__ import annotations

import math

import numpy as np

from readout.model import F64
from readout.sighting.fold import Fold
from readout.sighting.solve import Solution

SURE = 4.5
"""a reduced chi-square this many of its standard deviations above 1 is no noise"""


def lopsidedness(fold: Fold, cosine: float, solution: Solution) -> tuple[float, int]:
    """Reduced chi-square of right less left and its freedom; 1 where it is what noise gives."""
    at = fold.u / cosine - solution.shift
    columns = at.shape[1]
    mirrored = -2 * at[:, :1] - np.arange(columns)
    first = np.floor(mirrored).astype(np.intp)
    share = mirrored - first
    there = (at > 0) & (first >= 0) & (first + 1 < columns)
    first = np.clip(first, 0, columns - 2)
    residual = solution.left / fold.n
    variance = np.where(solution.weight > 0, 1 / np.maximum(solution.weight, 1e-300), np.inf)
    variance = variance / fold.n

    def of_mirror(values: F64, power: int) -> F64:
        near = np.take_along_axis(values, first, axis=1)
        far = np.take_along_axis(values, first + 1, axis=1)
        return np.asarray((1 - share) ** power * near + share**power * far)

    difference = residual - of_mirror(residual, 1)
    scaled = (difference**2 / (variance + of_mirror(variance, 2)))[there]
    freedom = len(scaled) - 2
    if freedom < 3:
        return 1.0, freedom
    reduced = float(scaled.sum()) / freedom
    return (reduced if reduced > 1 + SURE * math.sqrt(2 / freedom) else 1.0), freedom
